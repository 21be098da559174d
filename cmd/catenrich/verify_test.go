package main

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"encoding/json"
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"catenrich/internal/publish"
	"catenrich/pipeline/ledger"
	"catenrich/pipeline/prove"
)

// TestVerifyCases proves every output of the golden cases, all rows of it.
func TestVerifyCases(t *testing.T) {
	root, err := filepath.Abs(casesDir)
	if err != nil {
		t.Fatal(err)
	}
	entries, err := os.ReadDir(root)
	if err != nil {
		t.Fatal(err)
	}
	proven := 0
	for _, e := range entries {
		if !e.IsDir() {
			continue
		}
		t.Run(e.Name(), func(t *testing.T) {
			folder, work := filepath.Join(root, e.Name()), t.TempDir()
			before := copyInputs(t, folder, work)
			t.Chdir(work)
			runHere(t, caseArgs(t, folder), bytes.NewReader(before["stdin"]))
			outputs, err := prove.Targets([]string{"."})
			if err != nil {
				return // a case that fails, or writes to standard output
			}
			proven += len(outputs)
			if r := runHere(t, append([]string{"verify", "--all"}, outputs...), nil); r.code != 0 {
				t.Errorf("exit %d\n%s%s", r.code, r.stdout, r.stderr)
			}
		})
	}
	if proven < 30 {
		t.Errorf("only %d outputs were proven", proven)
	}
}

// quillRidge is an invented catalogue with everything that a column can be made
// of, and every kind of trouble.
func quillRidge(rows int) string {
	r := rand.New(rand.NewPCG(7, 11))
	var b strings.Builder
	b.WriteString("id,z,z_err,z_lo,z_hi,ra,dec,v_p,ebv,mag_r,err_r,flux_g,ivar_g,k_g,line,line_err,radio,angle,field,c\n")
	for i := range rows {
		z := r.ExpFloat64() * 0.4
		switch r.IntN(30) {
		case 0:
			z = -0.3 * r.Float64()
		case 1:
			z = 8 * r.Float64()
		case 2:
			z = 1e-6 + 1e-3*r.Float64()
		case 3:
			z = 3000 * r.Float64()
		}
		width := 0.01 * (1 + z) * r.Float64()
		cells := []string{
			fmt.Sprint(i), fmt.Sprintf("%.6f", z), fmt.Sprintf("%.6f", width), fmt.Sprintf("%.6f", z-width), fmt.Sprintf("%.6f", z+2*width),
			fmt.Sprintf("%.5f", 360*r.Float64()), fmt.Sprintf("%.5f", 180*r.Float64()-90), fmt.Sprintf("%.1f", 600*r.NormFloat64()),
			fmt.Sprintf("%.4f", 0.1*r.ExpFloat64()), fmt.Sprintf("%.4f", 20+2*r.NormFloat64()), fmt.Sprintf("%.4f", 0.1*r.Float64()),
			fmt.Sprintf("%.3f", 30*r.ExpFloat64()), fmt.Sprintf("%.3f", r.ExpFloat64()), fmt.Sprintf("%.4f", 2*z), fmt.Sprintf("%.3g", 1e-16*r.ExpFloat64()),
			"1e-17", fmt.Sprintf("%.3f", 100*r.ExpFloat64()), fmt.Sprintf("%.3f", 5*r.ExpFloat64()), []string{"north", "south"}[r.IntN(2)], fmt.Sprintf("%.3f", 0.5+0.5*r.Float64()),
		}
		if r.IntN(10) == 0 {
			cells[1+r.IntN(len(cells)-1)] = []string{"", "-99", "x", "NaN", "-1"}[r.IntN(5)]
		}
		b.WriteString(strings.Join(cells, ",") + "\n")
	}
	return b.String()
}

// everything is a job that asks for every column, errors and intervals too.
const everything = `
input.files = ["in.csv"]
[columns]
redshift = "z"
redshift_missing = [-99]
redshift_error = "z_err"
redshift_lower = "z_lo"
redshift_upper = "z_hi"
right_ascension = "ra"
declination = "dec"
peculiar_velocity = "v_p"
ebv = "ebv"
[redshift]
frame = "heliocentric"
distances_in = "cmb"
peculiar_velocity_sigma = 250
%[1]s
[[band]]
name = "r"
magnitude = "mag_r"
magnitude_error = "err_r"
extinction = 2.285
k_correction = { power_law = -0.5 }
evolution = { q = 1.2, z0 = 0.1 }
solar_absolute_magnitude = 4.65
[[band]]
name = "g"
flux = "flux_g"
flux_unit = "nanomaggies"
flux_ivar = "ivar_g"
k_correction = { column = "k_g" }
[[line]]
name = "ha"
flux = "line"
flux_error = "line_err"
[[radio]]
name = "low"
flux = "radio"
spectral_index = -0.7
[[size]]
name = "disc"
angle = "angle"
[[selection]]
name = "main"
band = "r"
faint = 20.5
bright = 15
limits_on = "corrected"
area = "field"
field_areas = { north = 1200, south = 800.5 }
completeness = "c"
redshift = [0.01, 0.8]
[[volume_limited]]
name = "bright"
band = "r"
brighter_than = -20.5
redshift = [0.02, 0.3]
[add]
columns = ["all", "errors", "intervals"]
length_unit = "%[2]s"
[output]
directory = "out"
%[3]s
`

// TestVerifyEverything proves jobs that ask for everything, in models that are
// flat, curved, closed past the antipode, that end, or whose dark energy
// evolves, all rows by the direct path.
func TestVerifyEverything(t *testing.T) {
	rows := 400
	if testing.Short() {
		rows = 40
	}
	const signed = "negative = \"signed\"\n[[cosmology]]\n"
	for name, c := range map[string][3]string{
		"Planck 2018":          {"[[cosmology]]\nset = \"planck2018\"", "Mpc", ""},
		"two, in Glyr":         {signed + "set = \"wmap9\"\n[[cosmology]]\nsuffix = \"_w\"\nh0 = 72\nomega_m = 0.28\nw0 = -0.9\nwa = -0.3", "Glyr", ""},
		"open, Mpc/h":          {signed + "h0 = 70\nomega_m = 0.3\nomega_de = 0.5", "Mpc/h", ""},
		"closed, far":          {signed + "h0 = 70\nomega_m = 0.4\nomega_de = 1.4", "Gpc", ""},
		"ends":                 {signed + "h0 = 70\nomega_m = 1.3\nomega_de = -0.1", "Mpc", ""},
		"grows near the end":   {signed + "h0 = 70\nomega_m = 0.3\nomega_de = 0.9\nw0 = -0.9\nwa = 0.2", "Mpc", ""},
		"no matter":            {signed + "h0 = 70\nomega_m = 0\nomega_de = 0.7", "Mpc", ""},
		"soft dark energy":     {signed + "h0 = 70\nomega_m = 0.3\nw0 = -0.4", "Mpc", ""},
		"six digits":           {"[[cosmology]]\nset = \"seventy-thirty\"", "Mpc", "digits = 6"},
		"float32":              {"[[cosmology]]\nset = \"seventy-thirty\"", "Mpc", "float = 32"},
		"three digits, narrow": {"[[cosmology]]\nset = \"seventy-thirty\"", "Mpc", "digits = 3\nfloat = 32"},
	} {
		t.Run(name, func(t *testing.T) {
			t.Chdir(t.TempDir())
			job := fmt.Sprintf(everything, c[0], c[1], c[2])
			writeFile(t, "in.csv", quillRidge(rows))
			writeFile(t, "job.toml", job)
			mustRun(t, "run", "job.toml", "--quiet")
			if r := runHere(t, []string{"verify", "out", "--all", "--input", "in.csv"}, nil); r.code != 0 {
				t.Errorf("exit %d\n%s%s", r.code, r.stdout, r.stderr)
			}
		})
	}
}

// outputs makes a small CSV with rejects and a small Parquet file, each with
// its manifest, and returns their paths.
func outputs(t testing.TB) (csv, parquet string) {
	t.Helper()
	source, err := filepath.Abs("../../testdata/small/duckdb-zstd-v2.parquet")
	if err != nil {
		t.Fatal(err)
	}
	t.Chdir(t.TempDir())
	writeFile(t, "in.csv", catalogue(60, 5))
	mustRun(t, "run", "in.csv", "--redshift", "z", "--comment", "#", "--add", "distances,recession", "-o", "out/a.csv", "--max-rejects", "1000", "--set", "seventy-thirty", "--quiet")
	mustRun(t, "run", source, "--redshift", "z", "--add", "distances,times", "-o", "out/b.parquet", "--set", "seventy-thirty", "--quiet")
	return "out/a.csv", "out/b.parquet"
}

// TestVerifyCatchesFlips flips one random bit pattern in one random byte, a
// thousand times, spread over outputs (the end of the Parquet file, which is
// its footer, on its own), sidecar and manifests.
func TestVerifyCatchesFlips(t *testing.T) {
	csv, parquet := outputs(t)
	footer := int64(footerSize(t, parquet)) + 8
	flips := 1000
	if testing.Short() {
		flips = 100
	}
	places := []struct {
		path string
		last int64 // only so many bytes at the end; 0: all
	}{{csv, 0}, {csv + ".rejects.csv", 0}, {publish.ManifestPath(csv), 0}, {parquet, 0}, {parquet, footer}, {publish.ManifestPath(parquet), 0}}
	r := rand.New(rand.NewPCG(3, 5))
	caught := 0
	for i := range flips {
		place := places[i%len(places)]
		whole := readFile(t, place.path)
		from := int64(0)
		if place.last > 0 {
			from = int64(len(whole)) - place.last
		}
		at := from + r.Int64N(int64(len(whole))-from)
		broken := bytes.Clone(whole)
		broken[at] ^= byte(1 + r.IntN(255))
		writeFile(t, place.path, string(broken))
		target := csv
		if strings.Contains(place.path, parquet) {
			target = parquet
		}
		if got := runHere(t, []string{"verify", target, "--rows", "20"}, nil); got.code == 65 {
			caught++
		} else {
			t.Errorf("byte %d of %s changed from %#x to %#x: exit %d", at, place.path, whole[at], broken[at], got.code)
		}
		writeFile(t, place.path, string(whole))
	}
	t.Logf("%d of %d flips caught", caught, flips)
	mustRun(t, "verify", "out")
}

// footerSize reads the length of a Parquet file's footer.
func footerSize(t testing.TB, path string) uint32 {
	content := readFile(t, path)
	return binary.LittleEndian.Uint32(content[len(content)-8:])
}

// resign makes the manifest of a changed output say what the output now is, as
// somebody would who wanted to hide the change.
func resign(t *testing.T, output string) {
	t.Helper()
	m, err := ledger.Parse(readFile(t, publish.ManifestPath(output)))
	if err != nil {
		t.Fatal(err)
	}
	content := readFile(t, output)
	m.Output.Size, m.Output.SHA256 = int64(len(content)), sha256.Sum256(content)
	if m.Output.Quick, err = publish.Quick(bytes.NewReader(content), m.Output.Size); err != nil {
		t.Fatal(err)
	}
	text, err := ledger.Encode(m)
	if err != nil {
		t.Fatal(err)
	}
	writeFile(t, publish.ManifestPath(output), string(text))
}

// TestVerifyRecomputes changes values and signs the manifest anew: only
// recomputing finds it.
func TestVerifyRecomputes(t *testing.T) {
	const csv = "out/a.csv"
	for name, c := range map[string]struct{ column, from, to string }{
		"a distance by 4e-9":        {"luminosity_distance", "2832.93809", "2832.93810"},
		"a flag":                    {"superluminal_now", "false", "true"},
		"a status bit":              {"enrich_status", "0", "512"},
		"a value made null":         {"distance_modulus", "42.26", ""},
		"text in place of a number": {"angular_scale", "6.", "x."},
	} {
		t.Run(name, func(t *testing.T) {
			t.Chdir(t.TempDir())
			writeFile(t, "in.csv", "id,z\na,0.1\nb,0.5\nc,1.5\n")
			mustRun(t, "run", "in.csv", "--redshift", "z", "--add", "distances,recession", "-o", csv, "--set", "seventy-thirty", "--quiet")
			lines := strings.Split(string(readFile(t, csv)), "\n")
			at := slices.Index(strings.Split(lines[0], ","), c.column)
			cells := strings.Split(lines[2], ",")
			if !strings.HasPrefix(cells[at], c.from) {
				t.Fatalf("%s is %s", c.column, cells[at])
			}
			cells[at] = c.to + strings.TrimPrefix(cells[at], c.from)
			if c.to == "" {
				cells[at] = ""
			}
			lines[2] = strings.Join(cells, ",")
			writeFile(t, csv, strings.Join(lines, "\n"))
			resign(t, csv)
			r := runHere(t, []string{"verify", csv, "--all"}, nil)
			if r.code != 65 || !strings.Contains(r.stdout, "\n  2    "+c.column) {
				t.Errorf("exit %d\n%s%s", r.code, r.stdout, r.stderr)
			}
		})
	}
}

// TestVerifyMisplaced moves, removes and adds files.
func TestVerifyMisplaced(t *testing.T) {
	move := func(from, to string) func(*testing.T) {
		return func(t *testing.T) {
			if err := os.Rename(from, to); err != nil {
				t.Fatal(err)
			}
		}
	}
	for name, c := range map[string]struct {
		change func(t *testing.T)
		says   string
	}{
		"the manifest of another output": {func(t *testing.T) {
			writeFile(t, publish.ManifestPath("out/a.csv"), string(readFile(t, publish.ManifestPath("out/b.parquet"))))
		}, "does not list it"},
		"a sidecar is missing":         {move("out/a.csv.rejects.csv", "rejects"), "is missing"},
		"a sidecar nobody listed":      {func(t *testing.T) { writeFile(t, "out/b.parquet.rejects.csv", "x") }, "does not list it"},
		"the output is missing":        {move("out/a.csv", "gone"), "no such file"},
		"the manifest is missing":      {move(publish.ManifestPath("out/a.csv"), "gone"), "there is none"},
		"publication was interrupted":  {move(publish.ManifestPath("out/a.csv"), publish.PendingPath("out/a.csv")), "interrupted"},
		"the manifest is a note":       {func(t *testing.T) { writeFile(t, publish.ManifestPath("out/a.csv"), "{}\n") }, "damaged or not ours"},
		"bytes were appended":          {func(t *testing.T) { writeFile(t, "out/a.csv", string(readFile(t, "out/a.csv"))+"1,2\n") }, "bytes, not "},
		"the input is another version": {func(t *testing.T) { writeFile(t, "in.csv", catalogue(60, 6)) }, "as recorded"},
	} {
		t.Run(name, func(t *testing.T) {
			outputs(t)
			c.change(t)
			r := runHere(t, []string{"verify", "out/a.csv", "out/b.parquet", "--rows", "5"}, nil)
			if name == "the input is another version" {
				r = runHere(t, []string{"verify", "out/a.csv", "--rows", "5", "--input", "in.csv"}, nil)
			}
			if r.code != 65 || !strings.Contains(r.stdout, "NOT PROVEN") || !strings.Contains(r.stderr, c.says) {
				t.Errorf("exit %d, want 65 and %q\n%s%s", r.code, c.says, r.stdout, r.stderr)
			}
		})
	}
}

// TestVerifyJSON holds the shape of the report.
func TestVerifyJSON(t *testing.T) {
	outputs(t)
	var reports []prove.Report
	if err := json.Unmarshal([]byte(mustRun(t, "verify", "out", "--json").stdout), &reports); err != nil {
		t.Fatal(err)
	}
	if len(reports) != 2 || !reports[0].Whole || !reports[1].Whole || reports[0].Recomputed != reports[0].Rows || reports[1].Rows == 0 {
		t.Errorf("%+v", reports)
	}
	again := mustRun(t, "verify", "out/b.parquet", "--rows", "7", "--json").stdout
	if err := json.Unmarshal([]byte(again), &reports); err != nil {
		t.Fatal(err)
	}
	if reports[0].Recomputed != 7 {
		t.Errorf("%d rows were recomputed, want 7", reports[0].Recomputed)
	}
	if r := runHere(t, []string{"verify", "."}, nil); r.code != 0 {
		t.Errorf("exit %d\n%s", r.code, r.stderr)
	}
	if r := runHere(t, []string{"verify", t.TempDir()}, nil); r.code != 66 {
		t.Errorf("a directory without outputs: exit %d, want 66", r.code)
	}
}
