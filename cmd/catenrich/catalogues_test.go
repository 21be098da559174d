package main

import (
	"bytes"
	"encoding/csv"
	"math"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// The catalogues are open data: README.md in catalogues has their sources.
const cataloguesDir = "../../testdata/catalogues"

// TestEvents enriches the gravitational-wave events as they are, and meets the
// luminosity distances that were published with their redshifts.
func TestEvents(t *testing.T) {
	original := readFile(t, filepath.Join(cataloguesDir, "gw-events.txt"))
	t.Chdir(t.TempDir())
	writeFile(t, "gw-events.txt", string(original))
	writeFile(t, "job.toml", `
input.files = ["gw-events.txt"]
input.csv = { header = "commented", header_delimiter = "tab" }
columns.redshift = "redshift"
add.columns = ["luminosity_distance"]
output.file = "out.txt"
[[cosmology]] # inferred from the fit, as README.md of the catalogues says
h0 = 67.74
omega_m = 0.3075
cmb_temperature = 2.7255
effective_neutrinos = 3.046
neutrino_masses = [0, 0, 0.06]
`)
	mustRun(t, "run", "job.toml", "--quiet")
	lines := strings.Split(string(readFile(t, "out.txt")), "\n")
	names := strings.Split(strings.TrimPrefix(lines[0], "#"), "\t")
	at := func(cells []string, name string) string {
		for i := range names {
			if strings.TrimSpace(names[i]) == name {
				return strings.TrimSpace(cells[i])
			}
		}
		t.Fatalf("no column %q in %q", name, names)
		return ""
	}
	rows := 0
	for _, line := range lines[1:] {
		if line == "" {
			continue
		}
		rows++
		cells := strings.Split(line, ",")
		got, want := parse(t, at(cells, "luminosity_distance")), parse(t, at(cells, "distance"))
		if !(math.Abs(got/want-1) <= 3e-6) {
			t.Errorf("%s: luminosity distance %v, published %v Mpc", at(cells, "event"), got, want)
		}
	}
	if rows != 57 {
		t.Errorf("%d rows, want the 57 events", rows)
	}
}

// TestNebulaeAndGalaxies enriches a catalogue with missing and negative
// redshifts, and checks its velocities against its redshifts.
func TestNebulaeAndGalaxies(t *testing.T) {
	packed := readFile(t, filepath.Join(cataloguesDir, "nebulae-and-galaxies.csv.gz"))
	original := unpack(t, "x.gz", packed)
	t.Chdir(t.TempDir())
	writeFile(t, "in.csv.gz", string(packed))
	mustRun(t, "run", "in.csv.gz", "--delimiter", ";", "--redshift", "Redshift", "--add", "distances,times", "-o", "z.csv", "--quiet")
	mustRun(t, "run", "in.csv.gz", "--delimiter", ";", "--velocity", "RadVel", "--velocity-convention", "relativistic",
		"--add", "cosmological_redshift", "--prefix", "v_", "-o", "v.csv.gz", "--quiet")
	byRedshift, byVelocity := readFile(t, "z.csv"), unpack(t, "v.csv.gz", readFile(t, "v.csv.gz"))
	inLines := bytes.Split(original, []byte("\n"))
	for _, out := range [][]byte{byRedshift, byVelocity} {
		outLines := bytes.Split(out, []byte("\n"))
		if len(outLines) != len(inLines) {
			t.Fatalf("%d lines became %d", len(inLines), len(outLines))
		}
		for i := range inLines {
			if !bytes.HasPrefix(outLines[i], inLines[i]) {
				t.Fatalf("line %d was changed", i+1)
			}
		}
	}

	zRows, vRows := semicolons(t, byRedshift), semicolons(t, byVelocity)
	missing, negative, near, agree := 0, 0, 0, 0
	for i, r := range zRows {
		status, text := r["enrich_status"], strings.TrimSpace(r["Redshift"])
		if text == "" {
			missing++
			if status != "1" || r["luminosity_distance"] != "" {
				t.Errorf("row %d has no redshift, status %s and luminosity distance %q", i+1, status, r["luminosity_distance"])
			}
			continue
		}
		z := parse(t, text)
		switch {
		case z < 0:
			negative++
			if status != "8" || r["luminosity_distance"] != "" {
				t.Errorf("row %d has z = %v, status %s and luminosity distance %q", i+1, z, status, r["luminosity_distance"])
			}
		case z > 0 && (status != "0" || !(parse(t, r["luminosity_distance"]) > 0)):
			t.Errorf("row %d has z = %v, status %s and luminosity distance %q", i+1, z, status, r["luminosity_distance"])
		}
		// The catalogue relates its columns by the relativistic convention; a
		// row agrees if its own redshift, turned to a velocity, is RadVel
		// within the 1 km/s that RadVel is rounded to.
		if z < 0.01 || r["RadVel"] == "" {
			continue
		}
		near++
		fromVelocity := parse(t, vRows[i]["v_cosmological_redshift"])
		if math.Abs(relativistic(fromVelocity)-relativistic(z)) <= 1 {
			agree++
		}
	}
	if missing != 3386 || negative != 370 || len(zRows) != 13969 {
		t.Errorf("%d rows, %d missing, %d negative; want 13969, 3386 and 370", len(zRows), missing, negative)
	}
	if near != 7354 || agree != 6972 {
		t.Errorf("%d of %d velocities agree with their redshift, want 6972 of 7354", agree, near)
	}
	t.Logf("%d of %d velocities agree with their redshift within 1 km/s", agree, near)
}

// relativistic returns the velocity of a redshift, km/s: beta = (x^2-1)/(x^2+1).
func relativistic(z float64) float64 {
	x2 := (1 + z) * (1 + z)
	return 299792.458 * (x2 - 1) / (x2 + 1)
}

// semicolons reads a table with that delimiter.
func semicolons(t *testing.T, text []byte) []map[string]string {
	t.Helper()
	r := csv.NewReader(bytes.NewReader(text))
	r.Comma, r.LazyQuotes = ';', true
	records, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	rows := make([]map[string]string, 0, len(records))
	for _, record := range records[1:] {
		row := make(map[string]string, len(record))
		for i, name := range records[0] {
			row[name] = record[i]
		}
		rows = append(rows, row)
	}
	if len(rows) == 0 {
		t.Fatal("no rows, in " + strconv.Itoa(len(text)) + " bytes")
	}
	return rows
}
