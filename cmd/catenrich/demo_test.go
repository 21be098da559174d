package main

import (
	"context"
	"encoding/csv"
	"io"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"catenrich/internal/table"
	"catenrich/pipeline/demo"
	"catenrich/pipeline/job"
	"catenrich/pipeline/ledger"
)

// TestDemo runs the demo as the README does and judges what it made by the
// truth that the survey was simulated from.
func TestDemo(t *testing.T) {
	dir := t.TempDir()
	mustRun(t, "demo", dir, "--quiet")
	for _, out := range []string{"enriched", "enriched_photometry"} {
		t.Run(out, func(t *testing.T) {
			equalBits(t, filepath.Join(dir, out, demo.Catalogue), filepath.Join(dir, out, demo.WideCatalogue))
		})
	}
	photometry := filepath.Join(dir, "enriched_photometry", demo.Catalogue)
	t.Run("pulls", func(t *testing.T) { testPulls(t, photometry, readTruth(t, filepath.Join(dir, demo.Truth))) })
	t.Run("V/Vmax", func(t *testing.T) { testVmax(t, photometry) })
}

// equalBits compares the derived columns of the CSV catalogue and of the
// Parquet one, which hold the same objects.
func equalBits(t *testing.T, text, wide string) {
	a, b := readManifest(t, text), readManifest(t, wide)
	if a.ConfigHash != b.ConfigHash {
		t.Errorf("one job, two config hashes: %v and %v", a.ConfigHash, b.ConfigHash)
	}
	var names []string
	for i, c := range a.Tally.Columns {
		if c.Extent != nil {
			names = append(names, c.Name)
		}
		if d := b.Tally.Columns[i]; c.Values != d.Values || c.True != d.True {
			t.Errorf("%s: %d values and %d true in the CSV, %d and %d in the Parquet file", c.Name, c.Values, c.True, d.Values, d.True)
		}
	}
	first, second := readNumbers(t, text, names), readNumbers(t, wide, names)
	for _, name := range names {
		different := 0
		for i, v := range first[name] {
			if math.Float64bits(v) != math.Float64bits(second[name][i]) && (v == v || second[name][i] == second[name][i]) {
				different++
			}
		}
		if different > 0 {
			t.Errorf("%s: %d of %d values differ between CSV and Parquet", name, different, len(first[name]))
		}
	}
}

// testPulls: absolute magnitudes of the main field miss the truth by their own
// errors, no more and no less.
func testPulls(t *testing.T, path string, truth map[string]map[string]string) {
	ids := readText(t, path, "object_id", "field")
	for _, band := range []string{"g", "r", "i"} {
		name := "absolute_magnitude_" + band
		values := readNumbers(t, path, []string{name, name + "_error"})
		var n, sum, squares float64
		for i, id := range ids["object_id"] {
			v, sigma := values[name][i], values[name+"_error"][i]
			if ids["field"][i] != "main" || truth[id]["defect"] != "" || v != v || !(sigma > 0) {
				continue
			}
			want, err := strconv.ParseFloat(truth[id]["abs_mag_"+band], 64)
			if err != nil {
				t.Fatalf("object %s has no true magnitude: %v", id, err)
			}
			pull := (v - want) / sigma
			n, sum, squares = n+1, sum+pull, squares+pull*pull
		}
		mean := sum / n
		width := math.Sqrt(squares/n - mean*mean)
		t.Logf("band %s: %.0f objects, pulls of mean %+.4f and width %.4f", band, n, mean, width)
		if n < 10000 || math.Abs(mean) > 3/math.Sqrt(n) || math.Abs(width-1) > 3/math.Sqrt(2*n) {
			t.Errorf("band %s: pulls of %.0f objects have mean %.4f and width %.4f, want 0 and 1 within 3 sigma (%.4f, %.4f)",
				band, n, mean, width, 3/math.Sqrt(n), 3/math.Sqrt(2*n))
		}
	}
}

// testVmax: the sample is complete, so V/Vmax is evenly spread (Schmidt 1968).
func testVmax(t *testing.T, path string) {
	m := readManifest(t, path)
	for _, c := range m.Tally.Columns {
		if c.Name != "v_over_v_max_main" {
			continue
		}
		mean, sigma := c.Sum.Float64()/float64(c.Values), 1/math.Sqrt(12*float64(c.Values))
		t.Logf("<V/Vmax> of %d objects is %.4f +- %.4f", c.Values, mean, sigma)
		if math.Abs(mean-0.5) > 3*sigma {
			t.Errorf("<V/Vmax> of %d objects is %.4f, want 0.5 within %.4f", c.Values, mean, 3*sigma)
		}
		return
	}
	t.Error("no column v_over_v_max_main")
}

func readManifest(t *testing.T, output string) *ledger.Manifest {
	t.Helper()
	m, err := ledger.Parse(readFile(t, output+".manifest.json"))
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// readColumns reads columns of a file by its own reader.
func readColumns(t *testing.T, path string, names []string, as table.Kind, take func(column int, c *table.Column, row int)) {
	t.Helper()
	format, err := formats().Find("", path)
	if err != nil {
		t.Fatal(err)
	}
	src, err := format.Open(path, &job.InputSettings{Quote: `"`, Header: "line"})
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	var wants []table.Want
	for _, name := range names {
		field, err := src.Schema().Index(name, "the test")
		if err != nil {
			t.Fatal(err)
		}
		wants = append(wants, table.Want{Field: field, As: as})
	}
	if err := src.Select(wants, nil); err != nil {
		t.Fatal(err)
	}
	var b table.Batch
	for {
		c, err := src.Next(context.Background())
		if err == io.EOF {
			return
		}
		if err != nil {
			t.Fatal(err)
		}
		b.Reset(c.Rows, wants, nil)
		if err := src.Decode(c, &b); err != nil {
			t.Fatal(err)
		}
		for i := range wants {
			for row := range b.Rows {
				take(i, &b.In[i], row)
			}
		}
		src.Release(c)
	}
}

func readNumbers(t *testing.T, path string, names []string) map[string][]float64 {
	t.Helper()
	all := make(map[string][]float64)
	readColumns(t, path, names, table.Float, func(i int, c *table.Column, row int) {
		all[names[i]] = append(all[names[i]], c.Float[row])
	})
	return all
}

func readText(t *testing.T, path string, names ...string) map[string][]string {
	t.Helper()
	all := make(map[string][]string)
	readColumns(t, path, names, table.Bytes, func(i int, c *table.Column, row int) {
		all[names[i]] = append(all[names[i]], string(c.Bytes[row]))
	})
	return all
}

// readTruth reads the demo's truth by object.
func readTruth(t *testing.T, path string) map[string]map[string]string {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	r := csv.NewReader(f)
	r.Comment = '#'
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	truth := make(map[string]map[string]string)
	for _, row := range rows[1:] {
		object := make(map[string]string)
		for i, name := range rows[0] {
			object[name] = strings.TrimSpace(row[i])
		}
		truth[object["object_id"]] = object
	}
	return truth
}
