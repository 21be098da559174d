package main

import (
	"bytes"
	"crypto/sha256"
	"encoding/json"
	"fmt"
	"maps"
	"os"
	"path/filepath"
	"reflect"
	"regexp"
	"slices"
	"strings"
	"testing"

	"catenrich/pipeline/job"
)

// hashJob sets every kind of thing that a job can hold.
const hashJob = `
title = "a title"
[input]
files = ["in.csv"]
[input.csv]
comment = "#"
[columns]
redshift = "z"
redshift_missing = [-99, -9]
redshift_error = "zerr"
peculiar_velocity = "vp"
right_ascension = "ra"
declination = "dec"
ebv = "ebv"
quality = "q"
[redshift]
frame = "heliocentric"
distances_in = "cmb"
valid = [-0.5, 12]
quality_good = [3, 4]
peculiar_velocity_sigma = 250
[[cosmology]]
h0 = 70
omega_m = 0.3
omega_de = 0.65
cmb_temperature = 2.7
effective_neutrinos = 3
neutrino_masses = [0, 0.05]
[[cosmology]]
suffix = "_b"
set = "wmap9"
[[band]]
name = "r"
magnitude = "mag"
magnitude_error = "magerr"
extinction = 2.285
k_correction = { power_law = -0.5 }
evolution = { q = 1.0, z0 = 0.1 }
solar_absolute_magnitude = 4.65
[[band]]
name = "g"
flux = "flux"
flux_unit = "nanomaggies"
flux_ivar = "ivar"
[[band]]
name = "s"
magnitude = "mag"
k_correction = { sed = "sed.txt", bandpass = "band.txt" }
[[band]]
name = "a"
asinh_magnitude = "mag"
softening = 1e-10
[[line]]
name = "ha"
flux = "line"
flux_scale = 1e-17
[[radio]]
name = "l"
flux = "line"
spectral_index = -0.7
[[size]]
name = "d"
angle = "size"
[[selection]]
name = "main"
band = "r"
faint = 19.5
bright = 12
limits_on = "corrected"
area = 1200
redshift = [0.01, 0.5]
[[selection]]
name = "fields"
band = "r"
faint = 19.5
limits_on = "corrected"
area = "field"
field_areas = { north = 100, south = 200 }
k_correction = { power_law = -0.3 }
redshift = [0.01, 0.4]
[[volume_limited]]
name = "cut"
band = "r"
brighter_than = -20
redshift = [0.01, 0.4]
[add]
columns = ["all"]
[output]
file = "out.csv"
[limits]
max_rejects = 2
`

const hashCatalogue = `# a comment, and a broken record
z,z2,zerr,vp,ra,dec,ebv,q,mag,magerr,flux,ivar,line,size,field
0.1,0.11,0.001,100,10,20,0.05,3,17,0.02,10,0.5,5,3,north
0.2,0.21,0.002,-100,200,-20,0.04,4,18,0.02,50,0.5,6,2,south
"0.05",0.06,0.001,,,,0.03,3,15,0.02,400,0,7,9,north
-99,0.3,0.001,1,1,1,0.1,3,18,0.1,10,1,1,1,south
-9,0.3,0.001,1,1,1,0.1,3,18,0.1,10,1,1,1,south
0.3,0.31,0.01,1,30,40,0.2,2,19,0.05,20,0.1,1,1,north
broken
-0.001,0.001,0.001,0,30,40,0.1,4,11,0.05,20,0.1,1,1,north
15,15.1,0.01,0,30,40,0.1,4,22,0.05,2,0.1,1,1,south
`

// A change is an edit of hashJob.
type change struct{ old, new string }

// moving are changes that decide bytes; unmoving are those that do not.
var (
	moving = []change{
		{`comment = "#"`, "comment = \"#\"\nquote = \"none\""},
		{`redshift = "z"`, `redshift = "z2"`},
		{`[-99, -9]`, `[-99]`},
		{`right_ascension = "ra"`, `right_ascension = "dec"`},
		{`peculiar_velocity = "vp"`, `peculiar_velocity = "size"`},
		{`quality = "q"`, `quality = "size"`},
		{`frame = "heliocentric"`, `frame = "cmb"`},
		{`distances_in = "cmb"`, `distances_in = "local-group"`},
		{`valid = [-0.5, 12]`, `valid = [-0.5, 20]`},
		{`quality_good = [3, 4]`, `quality_good = [2, 3, 4]`},
		{`peculiar_velocity_sigma = 250`, "peculiar_velocity_sigma = 250\nnegative = \"signed\""},
		{"redshift = \"z\"\nredshift_missing = [-99, -9]\nredshift_error = \"zerr\"\npeculiar_velocity = \"vp\"", "velocity = \"vp\"\nvelocity_convention = \"optical\""},
		{"redshift = \"z\"\nredshift_missing = [-99, -9]\nredshift_error = \"zerr\"\npeculiar_velocity = \"vp\"", "velocity = \"vp\"\nvelocity_convention = \"radio\"\nvelocity_unit = \"m/s\""},
		{`h0 = 70`, `h0 = 70.00001`},
		{`omega_m = 0.3`, `omega_m = 0.31`},
		{`omega_de = 0.65`, `omega_de = 0.66`},
		{"omega_de = 0.65\n", ``},
		{`omega_de = 0.65`, "omega_de = 0.65\nw0 = -0.9"},
		{`omega_de = 0.65`, "omega_de = 0.65\nwa = 0.1"},
		{`cmb_temperature = 2.7`, `cmb_temperature = 2.8`},
		{`effective_neutrinos = 3`, `effective_neutrinos = 3.1`},
		{`neutrino_masses = [0, 0.05]`, `neutrino_masses = [0, 0.06]`},
		{`suffix = "_b"`, `suffix = "_c"`},
		{`set = "wmap9"`, `set = "planck2015"`},
		{`name = "r"
magnitude = "mag"`, `name = "r"
magnitude_offset = 0.1
magnitude = "mag"`},
		{`extinction = 2.285`, `extinction = 2.3`},
		{`extinction = 2.285`, `extinction = "ebv"`},
		{`power_law = -0.5`, `power_law = -0.4`},
		{`power_law = -0.5`, `power_law = -0.5, rest_band_redshift = 0.1`},
		{`{ power_law = -0.5 }`, `{ table = "k.txt" }`},
		{`q = 1.0`, `q = 1.1`},
		{`z0 = 0.1`, `z0 = 0.2`},
		{`solar_absolute_magnitude = 4.65`, `solar_absolute_magnitude = 4.7`},
		{`flux_unit = "nanomaggies"`, `flux_unit = "microJy"`},
		{`bandpass = "band.txt"`, `bandpass = "band.txt", bandpass_kind = "energy"`},
		{`bandpass = "band.txt"`, `bandpass = "band2.txt"`},
		{`softening = 1e-10`, `softening = 1e-9`},
		{`flux_scale = 1e-17`, `flux_scale = 1e-16`},
		{"name = \"ha\"", "name = \"hb\""},
		{"name = \"l\"\nflux = \"line\"", "name = \"l\"\nflux_unit = \"Jy\"\nflux = \"line\""},
		{"name = \"l\"", "name = \"c\""},
		{"spectral_index = -0.7", "spectral_index = -0.8"},
		{"name = \"d\"", "name = \"e\""},
		{"faint = 19.5\nbright", "faint = 19.4\nbright"},
		{`bright = 12`, `bright = 16`},
		{"limits_on = \"corrected\"\narea = 1200", "limits_on = \"observed\"\narea = 1200"},
		{`area = 1200`, `area = 1100`},
		{"area = 1200", "area = 1200\ncompleteness = \"ebv\""},
		{"area = 1200", "area = 1200\nk_correction = { power_law = -0.3 }"},
		{`redshift = [0.01, 0.5]`, `redshift = [0.01, 0.6]`},
		{`name = "main"`, `name = "deep"`},
		{`north = 100`, `north = 101`},
		{`brighter_than = -20`, `brighter_than = -21.5`},
		{"brighter_than = -20\nredshift = [0.01, 0.4]", "brighter_than = -20\nredshift = [0.01, 0.15]"},
		{`name = "cut"`, `name = "cut2"`},
		{"name = \"cut\"\nband = \"r\"", "name = \"cut\"\nband = \"g\""},
		{`power_law = -0.3`, `power_law = -0.2`},
		{`power_law = -0.3`, `power_law = -0.3, rest_band_redshift = 0.1`},
		{`{ power_law = -0.3 }`, `{ sed = "sed.txt", bandpass = "band.txt" }`},
		{"name = \"fields\"\nband = \"r\"", "name = \"fields\"\nband = \"s\""},
		{"name = \"s\"\nmagnitude = \"mag\"", "name = \"s\"\nflux = \"mag\"\nflux_unit = \"Jy\""},
		{`columns = ["all"]`, `columns = ["all"]` + "\nprefix = \"x_\""},
		{`columns = ["all"]`, `columns = ["all"]` + "\nlength_unit = \"Gpc\""},
		{`columns = ["all"]`, `columns = ["distances"]`},
		{`file = "out.csv"`, "file = \"out.csv\"\ndigits = 9"},
		{`file = "out.csv"`, "file = \"out.csv\"\nfloat = 32"},
		{"name = \"s\"\nmagnitude = \"mag\"", "name = \"t\"\nmagnitude = \"mag\""},
	}

	// hashOnly are changes that another dialect, format or choice of columns
	// would show in bytes, or that name what is the default here.
	hashOnly = []change{
		{`redshift_error = "zerr"`, `redshift_error = "ebv"`},
		{`peculiar_velocity_sigma = 250`, `peculiar_velocity_sigma = 300`},
		{`magnitude_error = "magerr"`, `magnitude_error = "zerr"`},
		{"magnitude_error = \"magerr\"\n", ``},
		{`flux_ivar = "ivar"`, `flux_error = "ivar"`},
		{`comment = "#"`, "comment = \"#\"\ndelimiter = \",\""},
		{`comment = "#"`, "comment = \"#\"\nheader_delimiter = \",\""},
		{`comment = "#"`, "comment = \"# \""},
		{"[input.csv]\ncomment = \"#\"", "[input.csv]\ncomment = \"#\"\nheader = false\nnames = [\"z\",\"z2\",\"zerr\",\"vp\",\"ra\",\"dec\",\"ebv\",\"q\",\"mag\",\"magerr\",\"flux\",\"ivar\",\"line\",\"size\",\"field\"]"},
		{`files = ["in.csv"]`, "files = [\"in.csv\"]\nformat = \"csv\""},
		{`file = "out.csv"`, "file = \"out.csv\"\nformat = \"csv\""},
		{`file = "out.csv"`, "file = \"out.csv\"\nencoding = \"plain\""},
		{`file = "out.csv"`, "file = \"out.csv\"\ncodec = \"snappy\""},
		{`file = "out.csv"`, "file = \"out.csv\"\nlevel = 3"},
		{`files = ["in.csv"]`, "files = [\"in.csv\"]\nhdu = 2"},
		{`bandpass = "band.txt"`, `bandpass = "band.txt", wavelength_unit = "nm"`},
	}

	unmoving = []change{
		{`title = "a title"`, `title = "another title"`},
		{`file = "out.csv"`, `file = "other.csv"`},
		{`file = "out.csv"`, `directory = "elsewhere"`},
		{`files = ["in.csv"]`, `files = ["i*.csv"]`},
		{`max_rejects = 2`, `max_rejects = 20`},
		{`[-99, -9]`, `[-9, -99.0, -9]`},
		{`quality_good = [3, 4]`, `quality_good = [4, 3.0]`},
		{`h0 = 70`, `h0 = 70.0`},
		{`h0 = 70`, "h0 = 7e1\nwa = -0.0"},
		{`omega_de = 0.65`, "omega_de = 0.65\nw0 = -1"},
		{`set = "wmap9"`, "h0 = 69.32\nomega_m = 0.2865\ncmb_temperature = 2.725\neffective_neutrinos = 3.04"},
		{`frame = "heliocentric"`, `frame = "barycentric"`},
		{`columns = ["all"]`, "columns = [\"all\"]\nlength_unit = \"Mpc\""},
		{`file = "out.csv"`, "file = \"out.csv\"\nfloat = 64\ndigits = 0"},
		{"[[band]]\nname = \"a\"\nasinh_magnitude = \"mag\"\nsoftening = 1e-10\n", ""},
	}
)

// outcome runs a job in the working directory and returns its hash, its
// settings and its output.
func outcome(t *testing.T, text string) (hash string, settings map[string]any, output []byte) {
	t.Helper()
	for _, old := range []string{"out.csv", "other.csv", "elsewhere/in.csv"} {
		for _, suffix := range []string{"", ".manifest.json", ".rejects.csv", ".columns.csv"} {
			os.Remove(old + suffix)
		}
	}
	writeFile(t, "job.toml", text)
	mustRun(t, "run", "job.toml", "--quiet")
	for _, path := range []string{"out.csv", "other.csv", "elsewhere/in.csv"} {
		if _, err := os.Stat(path); err != nil {
			continue
		}
		var manifest struct {
			Hash     string         `json:"config_hash"`
			Settings map[string]any `json:"settings"`
		}
		if err := json.Unmarshal(readFile(t, path+".manifest.json"), &manifest); err != nil {
			t.Fatal(err)
		}
		return manifest.Hash, manifest.Settings, readFile(t, path)
	}
	t.Fatal("no output")
	return "", nil, nil
}

func prepareHashes(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in.csv", hashCatalogue)
	writeFile(t, "k.txt", "0 0\n0.1 0.1\n0.5 0.6\n20 3\n")
	var sed strings.Builder
	for w := 100; w <= 12000; w += 50 {
		fmt.Fprintf(&sed, "%d %g\n", w, 1+float64(w)/5000)
	}
	writeFile(t, "sed.txt", sed.String())
	writeFile(t, "band.txt", "5500 0\n6000 1\n6800 1\n7000 0\n")
	writeFile(t, "band2.txt", "5500 0\n6000 1\n6800 0.5\n7000 0\n")
}

// TestHashAndBytes changes each field of a job alone. What decides bytes is in
// the config hash, and what is not in the hash decides none.
func TestHashAndBytes(t *testing.T) {
	prepareHashes(t)
	// The last of unmoving is another matter: it is about order.
	reordered := unmoving[len(unmoving)-1]
	hash, settings, output := outcome(t, hashJob)
	moved := make(map[string]bool)
	edit := func(c change) string {
		if strings.Count(hashJob, c.old) == 0 {
			t.Fatalf("the job has no %q", c.old)
		}
		return strings.Replace(hashJob, c.old, c.new, 1)
	}
	for _, c := range slices.Concat(moving, hashOnly) {
		now, changed, bytesNow := outcome(t, edit(c))
		if now == hash {
			t.Errorf("%q → %q: the hash stays", c.old, c.new)
		}
		if slices.Contains(moving, c) && bytes.Equal(bytesNow, output) {
			t.Errorf("%q → %q: the bytes stay", c.old, c.new)
		}
		differ(settings, changed, "", moved)
	}
	for _, c := range unmoving[:len(unmoving)-1] {
		now, _, bytesNow := outcome(t, edit(c))
		if now != hash || !bytes.Equal(bytesNow, output) {
			t.Errorf("%q → %q: hash moved: %t, bytes moved: %t", c.old, c.new, now != hash, !bytes.Equal(bytesNow, output))
		}
	}
	// Bands by name, whatever their order in the file.
	now, _, bytesNow := outcome(t, edit(reordered)+reordered.old)
	if now != hash || !bytes.Equal(bytesNow, output) {
		t.Error("the order of bands in the file matters")
	}
	for path := range leaves(reflect.TypeFor[job.Settings](), "") {
		if !moved[path] && path != "outputVersion" {
			t.Errorf("no change of this test moves %s: add one", path)
		}
	}
}

var elements = regexp.MustCompile(`\[\d+\]`)

// differ collects the paths of settings at which a and b differ, without the
// places in lists.
func differ(a, b any, path string, into map[string]bool) {
	am, aMap := a.(map[string]any)
	bm, bMap := b.(map[string]any)
	al, aList := a.([]any)
	bl, bList := b.([]any)
	switch {
	case aMap && bMap:
		for key := range maps.Keys(am) {
			differ(am[key], bm[key], strings.TrimPrefix(path+"."+key, "."), into)
		}
		if len(am) != len(bm) {
			into[elements.ReplaceAllString(path, "")] = true
		}
	case aList && bList && len(al) == len(bl):
		for i := range al {
			differ(al[i], bl[i], fmt.Sprintf("%s[%d]", path, i), into)
		}
		if !reflect.DeepEqual(a, b) {
			into[elements.ReplaceAllString(path, "")] = true
		}
	case !reflect.DeepEqual(a, b):
		path = elements.ReplaceAllString(path, "")
		for ; path != ""; path = path[:max(0, strings.LastIndexByte(path, '.'))] {
			into[path] = true // and what holds it: the parts of a map have no type of their own
		}
	}
}

// leaves lists the JSON paths of everything in a type that is no struct.
func leaves(t reflect.Type, path string) map[string]bool {
	for t.Kind() == reflect.Pointer || t.Kind() == reflect.Slice && t.Elem().Kind() == reflect.Struct {
		t = t.Elem()
	}
	if t.Kind() != reflect.Struct {
		return map[string]bool{path: true}
	}
	all := make(map[string]bool)
	for i := range t.NumField() {
		name, _, _ := strings.Cut(t.Field(i).Tag.Get("json"), ",")
		maps.Copy(all, leaves(t.Field(i).Type, strings.TrimPrefix(path+"."+name, ".")))
	}
	return all
}

// TestSaveJob: flags, the job file that they amount to, and the same job
// written by hand have one hash and give the same bytes.
func TestSaveJob(t *testing.T) {
	prepareHashes(t)
	flags := []string{
		"--redshift", "z", "--redshift-missing", "-99,-9", "--quality", "q", "--quality-good", "3,4", "--valid", "0,12", "--comment", "#",
		"--h0", "70", "--omega-m", "0.3", "--omega-de", "0.65", "--cmb-temperature", "2.7", "--neutrino-masses", "0,0.05",
		"--add", "distances,lookback_time", "--length-unit", "Gpc", "--prefix", "x_", "--digits", "12", "--max-rejects", "2",
	}
	mustRun(t, append([]string{"run", "in.csv", "-o", "flags.csv", "--save-job", "saved.toml", "--quiet"}, flags...)...)
	saved := string(readFile(t, "saved.toml"))
	if strings.Contains(saved, "places") || !strings.Contains(saved, "redshift_missing") {
		t.Errorf("the saved job is\n%s", saved)
	}
	writeFile(t, "again.toml", strings.Replace(saved, "flags.csv", "again.csv", 1))
	mustRun(t, "run", "again.toml", "--quiet")
	writeFile(t, "hand.toml", `
[input]
files = ["in.csv"]
csv = { comment = "#" }
[columns]
redshift = "z"
redshift_missing = [-9, -99]
quality = "q"
[redshift]
valid = [0, 12]
quality_good = [3, 4]
[[cosmology]]
h0 = 70
omega_m = 0.3
omega_de = 0.65
cmb_temperature = 2.7
neutrino_masses = [0, 0.05]
[add]
columns = ["distances", "lookback_time"]
length_unit = "Gpc"
prefix = "x_"
[output]
file = "hand.csv"
digits = 12
[limits]
max_rejects = 2
`)
	mustRun(t, "run", "hand.toml", "--quiet")
	for _, other := range []string{"again.csv", "hand.csv"} {
		for _, suffix := range []string{"", ".manifest.json"} {
			if got, want := readFile(t, other+suffix), readFile(t, "flags.csv"+suffix); !bytes.Equal(got, want) {
				t.Errorf("%s%s differs from flags.csv%s:\n%.900s\n%.900s", other, suffix, suffix, got, want)
			}
		}
	}
	if r := runHere(t, append([]string{"run", "in.csv", "-o", "new.csv", "--save-job", "saved.toml", "--quiet"}, flags...), nil); r.code != 73 {
		t.Errorf("a job file that exists was overwritten: exit %d\n%s", r.code, r.stderr)
	}
}

// TestOutputVersion holds the digests of outputs beside job.OutputVersion. An
// output that moves needs a new version; -update then writes them again.
func TestOutputVersion(t *testing.T) {
	path, err := filepath.Abs("testdata/outputs.txt")
	if err != nil {
		t.Fatal(err)
	}
	prepareHashes(t)
	var now strings.Builder
	fmt.Fprintf(&now, "outputVersion %d\n", job.OutputVersion)
	for i, c := range []change{
		{"a title", "a title"},
		{`columns = ["all"]`, `columns = ["distances"]`},
		{`columns = ["all"]`, `columns = ["times", "recession"]`},
		{`columns = ["all"]`, "columns = [\"volumes\"]\nlength_unit = \"Mpc/h\""},
		{`h0 = 70`, "h0 = 50"},
		{`omega_de = 0.65`, `omega_de = 0.9`},
		{`omega_de = 0.65`, "w0 = -0.9\nwa = 0.2"},
		{`frame = "heliocentric"`, `frame = "local-group"`},
		{`peculiar_velocity_sigma = 250`, "peculiar_velocity_sigma = 250\nnegative = \"signed\""},
		{`file = "out.csv"`, "file = \"out.csv\"\ndigits = 6"},
		{`file = "out.csv"`, "file = \"out.csv\"\nfloat = 32"},
		{`{ power_law = -0.5 }`, `{ table = "k.txt" }`},
		{`limits_on = "corrected"`, `limits_on = "observed"`},
	} {
		_, _, output := outcome(t, strings.Replace(hashJob, c.old, c.new, 1))
		fmt.Fprintf(&now, "%2d %x %q → %q\n", i, sha256.Sum256(output), c.old, c.new)
	}
	if *update {
		writeFile(t, path, now.String())
		return
	}
	want := string(readFile(t, path))
	version, _, _ := strings.Cut(want, "\n")
	if now.String() != want && strings.HasPrefix(now.String(), version+"\n") {
		t.Errorf("outputs moved and job.OutputVersion did not: raise it, and run the test with -update\n got: %s\nwant: %s", now.String(), want)
	} else if now.String() != want {
		t.Errorf("job.OutputVersion moved: run the test with -update")
	}
}
