package job_test

import (
	"bytes"
	"crypto/sha256"
	"encoding/json"
	"fmt"
	"strings"
	"testing"

	"catenrich/internal/fault"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/job"
)

// base is a job without fault; tests add to it or change it.
const base = `[input]
files = ["in.csv"]
[columns]
redshift = "z"
[add]
columns = ["distances"]
[output]
file = "out.csv"
`

// load parses and resolves a job file.
func load(text string) (*job.Job, error) {
	f, err := job.Parse("job.toml", []byte(text))
	if err != nil {
		return nil, err
	}
	return f.Resolve(columns.Catalog{})
}

func TestParseErrors(t *testing.T) {
	for _, c := range []struct{ name, text, want string }{
		{"unknown table", "[inptu]\nfiles = []\n", `job.toml:1:2: unknown key "inptu": the nearest are "input"`},
		{"unknown key", "[input]\nfile = [\"a\"]\n", `job.toml:2:1: unknown key "input.file": the nearest are "files"`},
		{"unknown key in a list of tables", "[[cosmology]]\nh0 = 70\nomega_matter = 0.3\n", `job.toml:3:1: unknown key "cosmology.omega_matter": the nearest are "omega_m"`},
		{"unknown key in an inline table", "[[band]]\nname = \"r\"\nk_correction = { powerlaw = 1 }\n", `job.toml:3:18: unknown key "band.k_correction.powerlaw": the nearest are "power_law"`},
		{"dotted key", "input.csv.delimeter = \";\"\n", `unknown key "input.csv.delimeter": the nearest are "delimiter"`},
		{"two unknown keys", "[add]\ncolums = []\nunit = \"Mpc\"\n", `job.toml:3:1: unknown key "add.unit"`},
		{"wrong type", "[input]\nfiles = \"a.csv\"\n", "job.toml:2:9:"},
		{"a number as text", "[[cosmology]]\nh0 = \"70\"\n", "job.toml:2:6:"},
		{"a fraction where a whole number is wanted", "[output]\ndigits = 1.5\n", "job.toml:2:10:"},
		{"a key twice", "[add]\nprefix = \"a\"\nprefix = \"b\"\n", "job.toml:3:"},
		{"an open list", "[input]\nfiles = [\"a\"\n", "job.toml:"},
		{"no TOML at all", "z,mag\n0.1,20\n", "job.toml:1:"},
	} {
		_, err := job.Parse("job.toml", []byte(c.text))
		if err == nil || fault.Of(err) != fault.Config || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v\nwant class %d and %q", c.name, err, fault.Config, c.want)
		}
		if err != nil && strings.Contains(err.Error(), "job.File") {
			t.Errorf("%s: the error speaks of the program: %v", c.name, err)
		}
	}
}

func TestResolveErrors(t *testing.T) {
	for _, c := range []struct{ name, old, new, want string }{
		{"no input", `files = ["in.csv"]`, "files = []", "job.toml:2: input.files names no input"},
		{"no redshift", "redshift = \"z\"\n", "", "columns.redshift is not set"},
		{"redshift and velocity", `redshift = "z"`, "redshift = \"z\"\nvelocity = \"v\"\nvelocity_convention = \"radio\"", "job.toml:5: columns.velocity and columns.redshift exclude each other"},
		{"no convention", `redshift = "z"`, `velocity = "v"`, "columns.velocity_convention is not set"},
		{"convention", `redshift = "z"`, "velocity = \"v\"\nvelocity_convention = \"Optical\"", `job.toml:5: columns.velocity_convention is "Optical", want one of "optical", "radio" and "relativistic"`},
		{"velocity unit", `redshift = "z"`, "velocity = \"v\"\nvelocity_convention = \"radio\"\nvelocity_unit = \"kms\"", `job.toml:6: columns.velocity_unit is "kms"`},
		{"sentinel that is text", `redshift = "z"`, "redshift = \"z\"\nredshift_missing = [\"n/a\"]", "job.toml:5: columns.redshift_missing holds n/a, want numbers"},
		{"sentinel that is infinite", `redshift = "z"`, "redshift = \"z\"\nredshift_missing = [inf]", "job.toml:5: columns.redshift_missing is +Inf, want a finite number"},
		{"sentinel of nothing", `redshift = "z"`, "redshift = \"z\"\nvelocity_missing = [-1]", "job.toml:5: columns.velocity_missing is set, but no column"},
		{"quality without marks", `redshift = "z"`, "redshift = \"z\"\nquality = \"q\"", "job.toml:5: columns.quality is set, but redshift.quality_good"},
		{"marks without quality", "[add]", "[redshift]\nquality_good = [1]\n[add]", "job.toml:6: redshift.quality_good is set, but columns.quality is not"},
		{"mixed marks", `redshift = "z"`, "redshift = \"z\"\nquality = \"q\"\n[redshift]\nquality_good = [1, \"good\"]", "job.toml:7: redshift.quality_good mixes numbers and text"},
		{"valid upside down", "[add]", "[redshift]\nvalid = [2, 1]\n[add]", "job.toml:6: redshift.valid is [2 1]"},
		{"valid of three", "[add]", "[redshift]\nvalid = [1, 2, 3]\n[add]", "job.toml:6: redshift.valid is [1 2 3]"},
		{"valid that is no number", "[add]", "[redshift]\nvalid = [0, nan]\n[add]", "job.toml:6: redshift.valid"},
		{"negative", "[add]", "[redshift]\nnegative = \"keep\"\n[add]", `job.toml:6: redshift.negative is "keep", want one of "null" and "signed"`},
		{"frame", "[add]", "[redshift]\nframe = \"galactic\"\n[add]", `job.toml:6: redshift.frame is "galactic"`},
		{"nothing to add", `columns = ["distances"]`, "columns = []", "job.toml:6: add.columns is empty"},
		{"unknown column", `["distances"]`, `["distance"]`, `job.toml:6: add.columns names "distance", which is no column and no group`},
		{"column twice", `["distances"]`, `["times", "times"]`, `job.toml:6: add.columns names "times" twice`},
		{"length unit", "[output]", "length_unit = \"Gly\"\n[output]", `job.toml:7: add.length_unit is "Gly"`},
		{"no output", "[output]\nfile = \"out.csv\"\n", "", "output.directory is not set"},
		{"two outputs", `file = "out.csv"`, "file = \"out.csv\"\ndirectory = \"d\"", "job.toml:8: output.file and output.directory exclude each other"},
		{"digits", `file = "out.csv"`, "file = \"out.csv\"\ndigits = 18", "job.toml:9: output.digits is 18"},
		{"negative digits", `file = "out.csv"`, "file = \"out.csv\"\ndigits = -1", "job.toml:9: output.digits is -1"},
		{"float", `file = "out.csv"`, "file = \"out.csv\"\nfloat = 16", "job.toml:9: output.float is 16, want 64 or 32"},
		{"codec", `file = "out.csv"`, "file = \"out.csv\"\ncodec = \"lz4\"", `job.toml:9: output.codec is "lz4"`},
		{"output format", `file = "out.csv"`, "file = \"out.csv\"\nformat = \"xls\"", `job.toml:9: output.format is "xls"`},
		{"delimiter", "[columns]", "csv = { delimiter = \"::\" }\n[columns]", `job.toml:3: input.csv.delimiter is "::"`},
		{"quote", "[columns]", "csv = { quote = \"'\" }\n[columns]", "job.toml:3: input.csv.quote is \"'\""},
		{"header", "[columns]", "csv = { header = \"yes\" }\n[columns]", "job.toml:3: input.csv.header is yes"},
		{"header that is a number", "[columns]", "csv = { header = 1 }\n[columns]", "job.toml:3: input.csv.header is 1"},
		{"no header, no names", "[columns]", "csv = { header = false }\n[columns]", "input.csv.names is not set"},
		{"names and a header", "[columns]", "csv = { names = [\"z\"] }\n[columns]", "job.toml:3: input.csv.names is set, but the header names"},
		{"rejects", "[output]", "[limits]\nmax_rejects = -1\n[output]", "job.toml:8: limits.max_rejects is -1"},
		{"unknown set", "[add]", "[[cosmology]]\nset = \"planck\"\n[add]", `job.toml:6: cosmology[0].set is "planck", want one of "planck2018"`},
		{"set and numbers", "[add]", "[[cosmology]]\nset = \"wmap9\"\nh0 = 70\n[add]", "job.toml:6: cosmology[0].set names a set, so its numbers"},
		{"no omega_m", "[add]", "[[cosmology]]\nh0 = 70\n[add]", "job.toml:5: cosmology[0].omega_m is not set"},
		{"a second without a suffix", "[add]", "[[cosmology]]\nset = \"wmap9\"\n[[cosmology]]\nset = \"planck2015\"\n[add]", "job.toml:7: cosmology[1].suffix is not set"},
		{"a suffix twice", "[add]", "[[cosmology]]\nset = \"wmap9\"\nsuffix = \"_a\"\n[[cosmology]]\nset = \"wmap9\"\nsuffix = \"_a\"\n[add]", `job.toml:10: cosmology[1].suffix "_a" is used twice`},
		{"H0", "[add]", "[[cosmology]]\nh0 = 0\nomega_m = 0.3\n[add]", "job.toml:6: cosmology[0].h0 is 0"},
		{"H0 that is infinite", "[add]", "[[cosmology]]\nh0 = inf\nomega_m = 0.3\n[add]", "job.toml:6: cosmology[0].h0"},
		{"omega_m", "[add]", "[[cosmology]]\nh0 = 70\nomega_m = -0.3\n[add]", "job.toml:7: cosmology[0].omega_m is -0.3"},
		{"no big bang", "[add]", "[[cosmology]]\nh0 = 70\nomega_m = 0.1\nomega_de = 2.5\n[add]", "job.toml:8: cosmology[0].omega_de is 2.5: no big bang"},
		{"neutrinos", "[add]", "[[cosmology]]\nh0 = 70\nomega_m = 0.3\ncmb_temperature = 2.7\neffective_neutrinos = -1\n[add]", "job.toml:9: cosmology[0].effective_neutrinos is -1"},
		{"a neutrino mass", "[add]", "[[cosmology]]\nh0 = 70\nomega_m = 0.3\ncmb_temperature = 2.7\nneutrino_masses = [-0.1]\n[add]", "job.toml:9: cosmology[0].neutrino_masses"},
		{"a mass without radiation", "[add]", "[[cosmology]]\nh0 = 70\nomega_m = 0.3\nneutrino_masses = [0.1]\n[add]", "cosmology[0]"},
	} {
		if strings.Count(base, c.old) != 1 {
			t.Fatalf("%s: %q is not in the base", c.name, c.old)
		}
		_, err := load(strings.Replace(base, c.old, c.new, 1))
		if err == nil || fault.Of(err) != fault.Config || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v\nwant class %d and %q", c.name, err, fault.Config, c.want)
		}
		if err != nil && strings.Contains(err.Error(), "\n") {
			t.Errorf("%s: more than one fault: %v", c.name, err)
		}
	}
	if _, err := load(base); err != nil {
		t.Errorf("the base itself: %v", err)
	}
}

// TestAllAtOnce: every fault is reported, each once.
func TestAllAtOnce(t *testing.T) {
	_, err := load("[input]\nfiles = []\n[columns]\n[add]\ncolumns = [\"x\"]\nlength_unit = \"m\"\n[output]\nfloat = 8\n[limits]\nmax_rejects = -1\n")
	if lines := strings.Split(fmt.Sprint(err), "\n"); len(lines) != 7 {
		t.Errorf("%d faults:\n%v", len(lines), err)
	}
}

// hashOf is the config hash of a job file.
func hashOf(t *testing.T, text string) [32]byte {
	t.Helper()
	j, err := load(text)
	if err != nil {
		t.Fatalf("%v\n%s", err, text)
	}
	canonical, err := j.Settings.Canonical()
	if err != nil {
		t.Fatal(err)
	}
	return sha256.Sum256(canonical)
}

// TestCanonical: what the settings of a plain job are, to the byte: anyone can
// recompute the hash from the documentation.
func TestCanonical(t *testing.T) {
	j, err := load(base + "[[cosmology]]\nh0 = 70\nomega_m = 0.3\n")
	if err != nil {
		t.Fatal(err)
	}
	canonical, err := j.Settings.Canonical()
	if err != nil {
		t.Fatal(err)
	}
	for _, part := range []string{
		`"cosmologies":[{"cmbTemperature":0,"effectiveNeutrinos":0,"flat":true,"h0":70,"neutrinoMasses":[],"omegaDE":0.7,"omegaM":0.3,"suffix":"","w0":-1,"wa":0}]`,
		`"added":["comoving_distance","transverse_comoving_distance",`, `"catalogue":{"redshift":"z"}`, `"missing":{}`, `"lengthUnit":"Mpc"`, fmt.Sprintf(`"outputVersion":%d`, job.OutputVersion),
	} {
		if !bytes.Contains(canonical, []byte(part)) {
			t.Errorf("the canonical settings lack %s:\n%s", part, canonical)
		}
	}
	// RFC 8785 sorts keys and leaves no blanks; Go sorts those of a map.
	var tree any
	if err := json.Unmarshal(canonical, &tree); err != nil {
		t.Fatal(err)
	}
	again, err := json.Marshal(tree)
	if err != nil || !bytes.Equal(again, canonical) {
		t.Errorf("not canonical: %v\n%s\n%s", err, canonical, again)
	}
	if bytes.Contains(canonical, []byte("null")) || bytes.Contains(canonical, []byte("in.csv")) || bytes.Contains(canonical, []byte("out.csv")) {
		t.Errorf("null lists or paths in the settings: %s", canonical)
	}
}

// TestSameHash: spellings of one job.
func TestSameHash(t *testing.T) {
	with := func(model, columns string) string {
		return strings.Replace(base, `redshift = "z"`, "redshift = \"z\"\n"+columns, 1) + "[[cosmology]]\n" + model
	}
	for _, c := range []struct{ name, a, b string }{
		{"70 and 70.0", with("h0 = 70\nomega_m = 0.3\n", ""), with("h0 = 70.0\nomega_m = 3e-1\n", "")},
		{"defaults written out", with("h0 = 70\nomega_m = 0.3\n", ""), with("h0 = 70\nomega_m = 0.3\nw0 = -1\nwa = 0\ncmb_temperature = 0\n", "")},
		{"-0 and 0", with("h0 = 70\nomega_m = 0.3\nwa = 0.0\nomega_de = 0.0\n", "redshift_missing = [0]"), with("h0 = 70\nomega_m = 0.3\nwa = -0.0\nomega_de = -0.0\n", "redshift_missing = [-0.0]")},
		{"-0 of a temperature", with("h0 = 70\nomega_m = 0.3\n", ""), with("h0 = 70\nomega_m = 0.3\ncmb_temperature = -0.0\n", "")},
		{"order of sentinels", with("set = \"wmap9\"\n", "redshift_missing = [-99, -9, 0]"), with("set = \"wmap9\"\n", "redshift_missing = [0, -9.0, -99, -9]")},
		{"a set and its numbers", with("set = \"planck2018\"\n", ""), with("h0 = 67.66\nomega_m = 0.30964\ncmb_temperature = 2.7255\neffective_neutrinos = 3.046\nneutrino_masses = [0, 0, 0.06]\n", "")},
		{"the default set", with("set = \"planck2018\"\n", ""), strings.Replace(base, `redshift = "z"`, "redshift = \"z\"\n", 1)},
		{"three massless neutrinos", with("h0 = 70\nomega_m = 0.3\ncmb_temperature = 2.7\n", ""), with("h0 = 70\nomega_m = 0.3\ncmb_temperature = 2.7\neffective_neutrinos = 3.046\nneutrino_masses = [0, 0, 0]\n", "")},
		{"names and group", base, strings.Replace(base, `["distances"]`, `["surface_brightness_dimming", "distances", "luminosity_distance"]`, 1)},
		{"order of names", strings.Replace(base, `["distances"]`, `["lookback_time", "comoving_distance"]`, 1), strings.Replace(base, `["distances"]`, `["comoving_distance", "lookback_time"]`, 1)},
	} {
		if hashOf(t, c.a) != hashOf(t, c.b) {
			t.Errorf("%s: two hashes", c.name)
		}
	}
	for _, c := range []struct{ name, a, b string }{
		{"order of cosmologies", with("set = \"wmap9\"\n[[cosmology]]\nset = \"planck2018\"\nsuffix = \"_b\"\n", ""), with("set = \"planck2018\"\n[[cosmology]]\nset = \"wmap9\"\nsuffix = \"_b\"\n", "")},
		{"a last digit", with("h0 = 70\nomega_m = 0.3\n", ""), with("h0 = 70\nomega_m = 0.30000000000000004\n", "")},
		{"a sentinel", base, with("set = \"planck2018\"\n", "redshift_missing = [-99]")},
	} {
		if hashOf(t, c.a) == hashOf(t, c.b) {
			t.Errorf("%s: one hash", c.name)
		}
	}
}

// FuzzParse: no text makes Parse or Resolve panic, and every error has a class
// and speaks of the file.
func FuzzParse(f *testing.F) {
	f.Add(base)
	f.Add(base + "[[cosmology]]\nh0 = 70\nomega_m = 0.3\n[[band]]\nname = \"r\"\nk_correction = { power_law = 1 }\n")
	f.Add("a = [[[[1]]]]\nb.c.\"d\" = {e = 1}\n[[x]]\n[x.y]\n[[x.y.z]]\n")
	f.Fuzz(func(t *testing.T, text string) {
		if strings.Contains(text, "table") || strings.Contains(text, "sed") {
			return // they name files
		}
		if _, err := load(text); err != nil && (fault.Of(err) == fault.Internal || !strings.Contains(err.Error(), "job.toml")) {
			t.Errorf("%v\n%q", err, text)
		}
	})
}
