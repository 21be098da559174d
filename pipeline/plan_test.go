package pipeline

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"catenrich/internal/fault"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/job"
)

// testFormats are two formats that nobody opens: a plan reads no catalogue.
var testFormats = Formats{{Name: "csv", Suffixes: []string{".csv", ".tsv"}}, {Name: "parquet", Suffixes: []string{".parquet"}}}

// plan makes the plan of a job file in the working directory.
func plan(t *testing.T, files, output string) (*Plan, error) {
	t.Helper()
	f, err := job.Parse("job.toml", []byte(fmt.Sprintf("input.files = [%s]\ncolumns.redshift = \"z\"\nadd.columns = [\"times\"]\n%s\n", files, output)))
	if err != nil {
		t.Fatal(err)
	}
	j, err := f.Resolve(columns.Catalog{})
	if err != nil {
		t.Fatal(err)
	}
	return NewPlan(j, testFormats)
}

// touch makes files of one byte.
func touch(t *testing.T, paths ...string) {
	t.Helper()
	for _, path := range paths {
		if err := os.MkdirAll(filepath.Dir(path), 0o777); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, []byte("z"), 0o666); err != nil {
			t.Fatal(err)
		}
	}
}

func TestPlanUnits(t *testing.T) {
	t.Chdir(t.TempDir())
	touch(t, "data/b.csv", "data/a.csv", "data/2026/c.csv", "data/2026/deep/d.csv", "data/2026/deep/d.csv.rejects.csv", "data/note.txt",
		"data/.catenrich/x.csv", "data/B.tsv", "other/e.parquet")
	for _, c := range []struct{ name, files, output, want string }{
		{"one file", `"data/a.csv"`, `output.file = "o.csv"`, "a.csv: data/a.csv → o.csv"},
		{"a star", `"data/*.csv"`, `output.directory = "out"`, "a.csv: data/a.csv → out/a.csv; b.csv: data/b.csv → out/b.csv"},
		{"a bytewise order", `"data/*.?sv"`, `output.directory = "out"`, "B.tsv: data/B.tsv → out/B.tsv; a.csv: data/a.csv → out/a.csv; b.csv: data/b.csv → out/b.csv"},
		{"two stars", `"data/**/*.csv"`, `output.directory = "out"`,
			"2026/c.csv: data/2026/c.csv → out/2026/c.csv; 2026/deep/d.csv: data/2026/deep/d.csv → out/2026/deep/d.csv; a.csv: data/a.csv → out/a.csv; b.csv: data/b.csv → out/b.csv"},
		{"a file named twice", `"data/a.csv", "data/./a.csv", "data/a*"`, `output.directory = "out"`, "a.csv: data/a.csv → out/a.csv"},
		{"alternatives", `"data/{a,b}.csv"`, `output.directory = "out"`, "a.csv: data/a.csv → out/a.csv; b.csv: data/b.csv → out/b.csv"},
		{"another format", `"other/*"`, "output.directory = \"out\"\noutput.format = \"csv\"", "e.parquet: other/e.parquet → out/e.csv"},
		{"standard input", `"-"`, `output.directory = "out"`, "standard-input: - → out/standard-input"},
		{"standard output", `"data/a.csv"`, `output.file = "-"`, "a.csv: data/a.csv → -"},
		{"out of the input's directory", `"data/*.csv"`, `output.directory = "data/out"`, "a.csv: data/a.csv → data/out/a.csv; b.csv: data/b.csv → data/out/b.csv"},
	} {
		p, err := plan(t, c.files, c.output)
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		var got []string
		for _, u := range p.Units {
			got = append(got, fmt.Sprintf("%s: %s → %s", u.ID, u.Input, u.Output))
		}
		if text := strings.Join(got, "; "); text != c.want {
			t.Errorf("%s:\n got %s\nwant %s", c.name, text, c.want)
		}
	}
}

// TestPlanUnitsAbsolute: ids do not hold the place of the job.
func TestPlanUnitsAbsolute(t *testing.T) {
	dir := t.TempDir()
	t.Chdir(t.TempDir())
	touch(t, dir+"/data/x/a.csv")
	p, err := plan(t, fmt.Sprintf("%q", dir+"/data/**/*.csv"), fmt.Sprintf("output.directory = %q", dir+"/out"))
	if err != nil || len(p.Units) != 1 || p.Units[0].ID != "x/a.csv" || p.Units[0].Output != dir+"/out/x/a.csv" {
		t.Errorf("%v %+v", err, p)
	}
}

func TestPlanRefuses(t *testing.T) {
	t.Chdir(t.TempDir())
	touch(t, "a/x.csv", "b/x.csv", "b/X.csv", "c/x.csv", "c/X.csv", "v/a.vot", "linked.csv")
	if err := os.Link("linked.csv", "hard.csv"); err != nil {
		t.Fatal(err)
	}
	if err := os.Symlink("a", "alias"); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		name, files, output string
		class               fault.Class
		says                []string
	}{
		{"nothing there", `"none/*.csv"`, `output.directory = "out"`, fault.NoInput, []string{"none/*.csv: no such file", "job.toml:1: input.files"}},
		{"one of two is not there", `"a/*.csv", "none.csv"`, `output.directory = "out"`, fault.NoInput, []string{"none.csv: no such file"}},
		{"a directory", `"a"`, `output.directory = "out"`, fault.NoInput, []string{"a is a directory", "a/*.csv"}},
		{"two units, one output", `"a/*.csv", "b/x.csv"`, `output.directory = "out"`, fault.Config, []string{"a/x.csv", "b/x.csv", "out/x.csv"}},
		{"the same but for case", `"c/*.csv"`, `output.directory = "out"`, fault.Config, []string{"c/X.csv", "c/x.csv", "without case"}},
		{"output is the input", `"a/x.csv"`, `output.file = "a/x.csv"`, fault.Config, []string{"a/x.csv is an input"}},
		{"output is the input but for case", `"a/x.csv"`, `output.file = "A/X.CSV"`, fault.Config, []string{"a/x.csv is an input"}},
		{"output is another input", `"a/x.csv", "b/X.csv"`, `output.directory = "b"`, fault.Config, []string{"would both be written to"}},
		{"output is the input by a hard link", `"linked.csv"`, `output.file = "hard.csv"`, fault.Config, []string{"the same file"}},
		{"output is the input by a linked directory", `"a/x.csv"`, `output.directory = "alias"`, fault.Config, []string{"the same file"}},
		{"the pattern matches the outputs", `"**/x.csv"`, `output.directory = "out"`, fault.Config, []string{`"**/x.csv"`, "job.toml:1"}},
		{"the pattern matches the output to come", `"a/*.csv"`, `output.file = "a/new.csv"`, fault.Config, []string{`"a/*.csv"`, "a/new.csv", "narrow it"}},
		{"an unknown suffix", `"v/a.vot"`, `output.directory = "out"`, fault.Config, []string{"v/a.vot", ".vot", ".parquet"}},
		{"one file for two", `"a/*.csv", "b/X.csv"`, `output.file = "out.csv"`, fault.Config, []string{"output.file is one file", "2 inputs"}},
		{"standard input and more", `"-", "a/x.csv"`, `output.directory = "out"`, fault.Config, []string{"single unit"}},
		{"standard output of two", `"a/x.csv", "b/X.csv"`, `output.file = "-"`, fault.Config, []string{"2"}},
	} {
		p, err := plan(t, c.files, c.output)
		if err == nil {
			t.Errorf("%s: not refused: %+v", c.name, p.Units)
			continue
		}
		if fault.Of(err) != c.class {
			t.Errorf("%s: class %d, want %d: %v", c.name, fault.Of(err), c.class, err)
		}
		for _, part := range c.says {
			if !strings.Contains(err.Error(), part) {
				t.Errorf("%s: the error does not say %q: %v", c.name, part, err)
			}
		}
	}
	if _, err := os.Stat("out"); !os.IsNotExist(err) {
		t.Error("a plan made a directory")
	}
}

// TestWorkersFor: small units go side by side, a large one takes all.
func TestWorkersFor(t *testing.T) {
	t.Chdir(t.TempDir())
	touch(t, "a.csv")
	p, err := plan(t, `"a.csv"`, `output.file = "o.csv"`)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		size          int64
		workers, want int
	}{{0, 8, 1}, {smallUnit, 8, 1}, {3 * smallUnit, 8, 3}, {1 << 40, 8, 8}, {1 << 40, 0, 1}} {
		r := newRunner(p, Options{Workers: c.workers}, nil)
		if got := r.workersFor(&Unit{Size: c.size}); got != c.want {
			t.Errorf("%d bytes of %d workers: %d, want %d", c.size, c.workers, got, c.want)
		}
	}
	// However small the limit, one chunk is in flight; however large, no more
	// than the workers can use.
	for _, memory := range []int64{1, 64 << 20, 1 << 50} {
		r := newRunner(p, Options{Workers: 4, Memory: memory}, nil)
		if d := r.depthFor(4); d < 1 || d > 8 {
			t.Errorf("%d bytes of memory: %d chunks in flight", memory, d)
		}
	}
}
