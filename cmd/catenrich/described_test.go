package main

import (
	"encoding/json"
	"encoding/xml"
	"os"
	"regexp"
	"strings"
	"testing"

	"github.com/apache/arrow-go/v18/parquet/file"

	"catenrich/internal/publish"
	"catenrich/pipeline"
)

// describedJob adds columns of every kind of unit, in units of h.
const describedJob = `
[input]
files = ["d/quill_ridge.csv", "d/quill_ridge_wide.parquet"]
[columns]
redshift = "z_best"
redshift_error = "z_err"
redshift_missing = [-99]
right_ascension = "ra"
declination = "dec"
[[cosmology]]
set = "planck2018"
[[cosmology]]
set = "wmap9"
suffix = "_w9"
[[band]]
name = "r"
magnitude = "mag_r"
solar_absolute_magnitude = 4.65
[[line]]
name = "x"
flux = "snr"
[[radio]]
name = "y"
flux = "snr"
[[size]]
name = "s"
angle = "snr"
[[selection]]
name = "main"
band = "r"
faint = 19.5
limits_on = "observed"
area = 28.12
redshift = [0.01, 0.5]
[add]
columns = ["all", "errors"]
length_unit = "Mpc/h"
prefix = "ce_"
[output]
directory = "out"
[limits]
max_rejects = 100
`

// voUnit is the part of VOUnits 1.1 that the columns use: symbols with integer
// powers, joined by dots. "h" alone would be an hour: it is quoted.
var voUnit = regexp.MustCompile(`^([A-Za-z]+|'littleh')(\*\*-?[0-9]+)?(\.([A-Za-z]+|'littleh')(\*\*-?[0-9]+)?)*$`)

// TestDescribed: a CSV output has its columns described beside it, a Parquet
// output twice within it; all three say the same of each column.
func TestDescribed(t *testing.T) {
	t.Chdir(t.TempDir())
	mustRun(t, "demo", "d", "--rows", "2000", "--quiet")
	writeFile(t, "job.toml", describedJob)
	mustRun(t, "run", "job.toml", "--quiet", "--no-report")

	rows := csvRows(t, "out/quill_ridge.csv.columns.csv")
	if got := strings.Join(rows[0], ","); got != "name,unit,ucd,description,source" {
		t.Fatalf("the header is %s", got)
	}
	var beside []pipeline.Description
	for _, r := range rows[1:] {
		beside = append(beside, pipeline.Description{Name: r[0], Unit: r[1], UCD: r[2], Description: r[3], Source: r[4]})
	}
	header := csvRows(t, "out/quill_ridge.csv")[0]
	for i, d := range beside {
		if at := len(header) - len(beside) + i; header[at] != d.Name {
			t.Fatalf("line %d describes %s, and the column is %s", i+2, d.Name, header[at])
		}
		if d.UCD == "" || len(d.Description) < 10 || len(d.Source) < 8 || d.Unit != "" && !voUnit.MatchString(d.Unit) {
			t.Errorf("%+v", d)
		}
		if strings.Contains(d.Unit, "littleh") && !strings.Contains(d.Description, "h = H0 / (100 km/s/Mpc)") {
			t.Errorf("%s does not say what h is: %q", d.Name, d.Description)
		}
	}
	within := parquetDescriptions(t, "out/quill_ridge_wide.parquet")
	if len(within) != len(beside) {
		t.Fatalf("%d columns are described beside the CSV, %d in the Parquet", len(beside), len(within))
	}
	for i := range within {
		if within[i] != beside[i] {
			t.Errorf("the Parquet says %+v\nthe CSV %+v", within[i], beside[i])
		}
	}
	if _, err := os.Stat("out/quill_ridge_wide.parquet.columns.csv"); err == nil {
		t.Error("the Parquet has a description beside it too")
	}
	checkVOTable(t, "out/quill_ridge_wide.parquet", within)
}

// parquetDescriptions reads catenrich.columns.
func parquetDescriptions(t *testing.T, path string) (all []pipeline.Description) {
	t.Helper()
	r, err := file.OpenParquetFile(path, false)
	if err != nil {
		t.Fatal(err)
	}
	defer r.Close()
	if err := json.Unmarshal([]byte(*r.MetaData().KeyValueMetadata().FindValue("catenrich.columns")), &all); err != nil {
		t.Fatal(err)
	}
	return all
}

// checkVOTable holds the VOTable in the metadata to the file's own schema: a
// FIELD for each column, in their order, the added ones described.
func checkVOTable(t *testing.T, path string, added []pipeline.Description) {
	t.Helper()
	r, err := file.OpenParquetFile(path, false)
	if err != nil {
		t.Fatal(err)
	}
	defer r.Close()
	var doc struct {
		Fields []struct {
			Name        string `xml:"name,attr"`
			Datatype    string `xml:"datatype,attr"`
			Unit        string `xml:"unit,attr"`
			UCD         string `xml:"ucd,attr"`
			Description string `xml:"DESCRIPTION"`
		} `xml:"RESOURCE>TABLE>FIELD"`
	}
	if err := xml.Unmarshal([]byte(*r.MetaData().KeyValueMetadata().FindValue("IVOA.VOTable-Parquet.content")), &doc); err != nil {
		t.Fatal(err)
	}
	root := r.MetaData().Schema.Root()
	if len(doc.Fields) != root.NumFields() {
		t.Fatalf("%d FIELDs for %d columns", len(doc.Fields), root.NumFields())
	}
	for i, f := range doc.Fields {
		if f.Name != root.Field(i).Name() || f.Datatype == "" {
			t.Errorf("FIELD %d is %s %s, the column %s", i, f.Name, f.Datatype, root.Field(i).Name())
		}
		if at := i - (len(doc.Fields) - len(added)); at >= 0 {
			if d := added[at]; f.Unit != d.Unit || f.UCD != d.UCD || f.Description != d.Description+" (source: "+d.Source+")" {
				t.Errorf("%+v, want %+v", f, d)
			}
		}
	}
}

// TestDescriptionIsKept: an output without its description, or with another
// one, is not up to date; a pattern does not take it for a catalogue.
func TestDescriptionIsKept(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in.csv", "z\n0.5\n")
	args := []string{"run", "in.csv", "--redshift", "z", "--add", "times", "-o", "out.csv"}
	mustRun(t, args...)
	want := readFile(t, "out.csv.columns.csv")
	for _, check := range []string{"quick", "full"} {
		for name, spoil := range map[string]func(){
			"gone":    func() { os.Remove("out.csv.columns.csv") },
			"changed": func() { writeFile(t, "out.csv.columns.csv", "changed") },
		} {
			spoil()
			if r := mustRun(t, append(args, "--check", check)...); !strings.Contains(r.stderr, "1 written") {
				t.Errorf("%s, --check %s: %s", name, check, r.stderr)
			}
			if string(readFile(t, "out.csv.columns.csv")) != string(want) {
				t.Errorf("%s, --check %s: it is not there again", name, check)
			}
		}
		if r := mustRun(t, append(args, "--check", check)...); !strings.Contains(r.stderr, "1 up to date") {
			t.Errorf("nothing changed: %s", r.stderr)
		}
	}
	writeFile(t, "only-called-so.columns.csv", "z\n0.7\n")
	var plan struct{ Units []struct{ ID string } }
	if err := json.Unmarshal([]byte(mustRun(t, "plan", "o*.csv", "--redshift", "z", "--add", "times", "-o", "elsewhere/", "--json").stdout), &plan); err != nil {
		t.Fatal(err)
	}
	if len(plan.Units) != 2 || plan.Units[0].ID != "only-called-so.columns.csv" || plan.Units[1].ID != "out.csv" {
		t.Errorf("the pattern found %+v", plan.Units)
	}
}

// TestBesideOutputs: no output is put where another's manifest or sidecar goes.
func TestBesideOutputs(t *testing.T) {
	t.Chdir(t.TempDir())
	for _, name := range []string{"a.csv", "b.csv"} {
		writeFile(t, "in/"+name, "z\n0.5\n")
	}
	for _, suffix := range append([]string{".manifest.json"}, publish.Suffixes...) {
		writeFile(t, "in/a.csv"+suffix, "z\n0.5\n")
		r := runHere(t, []string{"run", "in/a.csv", "in/b.csv", "in/a.csv" + suffix, "--format", "csv", "--redshift", "z", "--add", "times", "-o", "out/"}, nil)
		if r.code != 78 || !strings.Contains(r.stderr, "belongs to the output of in/a.csv") {
			t.Errorf("%s: exit %d\n%s", suffix, r.code, r.stderr)
		}
	}
}
