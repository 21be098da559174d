package job

import (
	"bytes"
	"encoding/json"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"

	"catenrich/internal/fault"
)

// named is a catalog that knows every column.
type named struct{}

func (named) Expand(_ *Settings, names []string) ([]string, []error) { return names, nil }

const recordedJob = `
input.files = ["a.csv"]
output.directory = "out"
add.columns = ["luminosity_distance"]
[columns]
redshift = "z"
redshift_missing = [-99]
quality = "q"
ebv = "ebv"
[redshift]
quality_good = [3, 4]
[[cosmology]]
set = "planck2018"
[[cosmology]]
h0 = 70
omega_m = 0.3
omega_de = 0.8
suffix = "_closed"
[[band]]
name = "r"
magnitude = "m"
extinction = 2.3
k_correction = { table = "k.csv" }
evolution = { q = 1 }
[[band]]
name = "g"
flux = "f"
zero_point = 22.5
flux_ivar = "i"
k_correction = { column = "k" }
[[selection]]
name = "main"
band = "g"
faint = 19
limits_on = "observed"
area = 100
redshift = [0.01, 0.5]
k_correction = { power_law = -0.5 }
`

// recorded resolves the job above and returns its settings and its K table.
func recorded(t *testing.T) (*Job, []byte, []byte) {
	t.Helper()
	dir := t.TempDir()
	k := []byte("z,k\n0,0\n1,0.8\n2,1.9\n")
	if err := os.WriteFile(filepath.Join(dir, "k.csv"), k, 0o666); err != nil {
		t.Fatal(err)
	}
	f, err := Parse(filepath.Join(dir, "job.toml"), []byte(recordedJob))
	if err != nil {
		t.Fatal(err)
	}
	j, err := f.Resolve(named{})
	if err != nil {
		t.Fatal(err)
	}
	settings, err := j.Settings.Canonical()
	if err != nil {
		t.Fatal(err)
	}
	return j, settings, k
}

func TestFromSettings(t *testing.T) {
	want, settings, k := recorded(t)
	got, lost, err := FromSettings(settings, func(sum string) []byte {
		if sum != want.Settings.Bands[1].K.Files["table"] {
			t.Errorf("the file %s was asked for", sum)
		}
		return k
	}, named{})
	if err != nil || len(lost) != 0 {
		t.Fatal(err, lost)
	}
	again, err := got.Settings.Canonical()
	if err != nil || !bytes.Equal(again, settings) {
		t.Errorf("settings are %s, want %s", again, settings)
	}
	if !reflect.DeepEqual(got.Bands, want.Bands) {
		t.Errorf("bands are %+v, want %+v", got.Bands, want.Bands)
	}
	if !reflect.DeepEqual(got.Selections, want.Selections) {
		t.Errorf("selections are %+v, want %+v", got.Selections, want.Selections)
	}
	for i := range want.Models {
		if !reflect.DeepEqual(got.Models[i].Params(), want.Models[i].Params()) && want.Settings.Cosmologies[i].CMBTemperature > 0 {
			t.Errorf("model %d is %+v, want %+v", i, got.Models[i].Params(), want.Models[i].Params())
		}
	}
}

func TestFromSettingsWithoutFile(t *testing.T) {
	_, settings, _ := recorded(t)
	j, lost, err := FromSettings(settings, func(string) []byte { return nil }, named{})
	if err != nil {
		t.Fatal(err)
	}
	if len(lost) != 1 || lost[0].Use != "table" || !strings.Contains(lost[0].Place, "band.r") {
		t.Errorf("lost: %+v", lost)
	}
	if g, r := j.Bands[0].K, j.Bands[1].K; g.Lost() || !r.Lost() {
		t.Errorf("lost are g: %v, r: %v", g.Lost(), r.Lost())
	}
}

// TestFromSettingsRefuses takes settings that no resolved job has.
func TestFromSettingsRefuses(t *testing.T) {
	_, settings, k := recorded(t)
	for name, change := range map[string]func(map[string]any){
		"another output version":    func(s map[string]any) { s["outputVersion"] = OutputVersion + 1 },
		"something unknown":         func(s map[string]any) { s["surprise"] = 1 },
		"a universe without a bang": func(s map[string]any) { s["cosmologies"].([]any)[1].(map[string]any)["omegaDE"] = 3 },
		"no good marks":             func(s map[string]any) { s["redshift"].(map[string]any)["qualityGood"] = []any{} },
		"an unknown measure":        func(s map[string]any) { s["bands"].([]any)[0].(map[string]any)["measure"] = "colour" },
		"a selection of no band":    func(s map[string]any) { s["bands"] = []any{} },
		"no redshift limits":        func(s map[string]any) { s["selections"].([]any)[0].(map[string]any)["redshift"] = []any{} },
		"text":                      func(s map[string]any) { s["cosmologies"] = "none" },
	} {
		var s map[string]any
		if err := json.Unmarshal(settings, &s); err != nil {
			t.Fatal(err)
		}
		change(s)
		text, err := json.Marshal(s)
		if err != nil {
			t.Fatal(err)
		}
		if _, _, err := FromSettings(text, func(string) []byte { return k }, named{}); err == nil || fault.Of(err) != fault.Data {
			t.Errorf("%s: error %v, want a fault.Data", name, err)
		}
	}
}
