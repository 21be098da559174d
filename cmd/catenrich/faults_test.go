package main

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"maps"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/apache/arrow-go/v18/parquet"
	"github.com/apache/arrow-go/v18/parquet/file"
	"github.com/apache/arrow-go/v18/parquet/schema"
	"github.com/klauspost/compress/gzip"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
	"catenrich/internal/publish/faulty"
	"catenrich/pipeline"
	"catenrich/readers/fitstest"
)

// A transition is what a job finds, what it makes, and what stood there before: the
// work of another job on another input, or nothing.
type transition struct {
	name             string
	file             string // the input, below in/
	oldInput, oldAdd string // columns; "" for nothing before
	input, add       string
	reports          bool // whether the run makes a report, which costs time
	short            bool // whether it is tried in the short mode

	output    string // on the disk
	plan      *pipeline.Plan
	base      *faulty.Disk // holds the old work
	old, new  map[string]string
	disk      string
	ofRelease map[string]bool // files that speak of the whole run, not of one output
}

const faultJob = `
input.files = ["in/*"]
columns.redshift = "z"
columns.redshift_missing = [-99]
output.directory = "out"
input.csv.comment = "#"
limits.max_rejects = 10000
add.columns = ["%s"]
`

// smallFITS is a table of a few rows.
func smallFITS(z ...float64) string {
	tb := fitstest.Table{Rows: len(z), Columns: []fitstest.Column{fitstest.Doubles("z", z...)}}
	return string(fitstest.File(tb.HDU()))
}

// transitions are small jobs of every format.
func transitions(t *testing.T) []*transition {
	parquet := string(readFile(t, "../../testdata/small/parquet-go-bloom.parquet"))
	other := string(readFile(t, "../../testdata/small/parquet-go-small-pages.parquet"))
	good, bad := "id,z\n1,0.5\n2,-99\n3,1.5\n", "id,z\n1,0.5\nbroken\n2,0.7\n"
	return []*transition{
		{name: "CSV with rejects", file: "a.csv", input: bad, add: "luminosity_distance"},
		{name: "CSV in place of other columns", file: "a.csv", oldInput: good, oldAdd: "lookback_time", input: good, add: "luminosity_distance"},
		{name: "CSV with rejects in place of CSV without", file: "a.csv", oldInput: good, oldAdd: "lookback_time", input: bad, add: "lookback_time", short: true},
		{name: "CSV without rejects in place of CSV with", file: "a.csv", oldInput: bad, oldAdd: "lookback_time", input: good, add: "times", reports: true},
		{name: "Parquet", file: "a.parquet", input: parquet, add: "luminosity_distance"},
		{name: "Parquet in place of other columns", file: "a.parquet", oldInput: parquet, oldAdd: "lookback_time", input: parquet, add: "luminosity_distance", short: true},
		{name: "Parquet in place of another input", file: "a.parquet", oldInput: other, oldAdd: "lookback_time", input: parquet, add: "lookback_time"},
		{name: "FITS in place of another input", file: "a.fits", oldInput: smallFITS(0.1, 2), oldAdd: "times", input: smallFITS(0.5, -99, 1), add: "times", short: true},
	}
}

// silent is an observer of runs that are expected to fail.
type silent struct{}

func (silent) Advance(int64, int64)   {}
func (silent) Done(*pipeline.Outcome) {}
func (silent) Warn(string)            {}

// run is a whole run on a disk.
func (c *transition) run(d *faulty.Disk) (*pipeline.Summary, error) {
	return pipeline.Run(context.Background(), c.plan, pipeline.Options{Workers: 1, FS: d, NoReport: !c.reports, Stdout: io.Discard, Stderr: io.Discard}, silent{})
}

// planHere plans the job of the working directory.
func planHere(t testing.TB, add string) *pipeline.Plan {
	t.Helper()
	writeFile(t, "job.toml", fmt.Sprintf(faultJob, add))
	j, _, err := new(jobFlags).resolve([]string{"job.toml"})
	if err != nil {
		t.Fatal(err)
	}
	p, err := pipeline.NewPlan(j, formats())
	if err != nil {
		t.Fatal(err)
	}
	return p
}

// prepare makes inputs, plans and the old work, in the working directory.
func (c *transition) prepare(t *testing.T) {
	t.Helper()
	work := func(input, add string, d *faulty.Disk) map[string]string {
		writeFile(t, "in/"+c.file, input)
		c.plan = planHere(t, add)
		c.output = c.plan.Units[0].Output
		c.ofRelease = map[string]bool{c.plan.ReportPath(): true, c.plan.ReleasePath(): true}
		if s, err := c.run(d); err != nil || s.Written != 1 {
			t.Fatalf("the run that nothing disturbs: %+v, %v", s, err)
		}
		return contents(d)
	}
	c.disk = filepath.Dir(filepath.Join("out", c.file))
	c.base = faulty.New(c.disk)
	if c.oldAdd != "" {
		c.old = work(c.oldInput, c.oldAdd, c.base)
	}
	c.new = work(c.input, c.add, faulty.New(c.disk))
	if len(c.new) < 2 || c.new[c.output] == c.old[c.output] {
		t.Fatalf("the run made %d files in %s", len(c.new), c.disk)
	}
}

// before returns a disk with the old work, all of it durable.
func (c *transition) before() *faulty.Disk { return c.base.AfterCut(^uint(0), faulty.Kept) }

// contents returns the files of a disk but for temporaries.
func contents(d *faulty.Disk) map[string]string {
	all := map[string]string{}
	for _, name := range d.Names() {
		if !strings.HasPrefix(filepath.Base(name), ".catenrich_") {
			all[name] = d.Read(name)
		}
	}
	return all
}

// state says which of the three states that may be a disk is in: the old
// output under the old manifest, the new one under the pending or the new one.
// What speaks of the whole run is of what stands there, or says that the run failed, or
// there is none.
func (c *transition) state(d *faulty.Disk) (string, error) {
	manifest, pending := publish.ManifestPath(c.output), publish.PendingPath(c.output)
	got := contents(d)
	files := fmt.Errorf("%d bytes of output, manifest %.100q, pending %.100q, in all %q", len(got[c.output]), got[manifest], got[pending], d.Names())
	for path := range c.ofRelease {
		text, ok := got[path]
		failed := strings.Contains(text, "the run could not finish it")
		if ok && text != c.old[path] && text != c.new[path] && !failed {
			return "", fmt.Errorf("%s is neither the old one nor the new one: %w", path, files)
		}
		if ok && got[c.output] != c.old[c.output] && text == c.old[path] {
			return "", fmt.Errorf("%s of the old output stands beside another: %w", path, files)
		}
	}
	if got[c.output] == c.old[c.output] && got[manifest] == c.old[manifest] {
		for path, text := range c.old {
			if !c.ofRelease[path] && got[path] != text && got[path] != c.new[path] {
				return "", fmt.Errorf("%s of the old work has changed: %w", path, files)
			}
		}
		return "old", nil
	}
	for path, text := range c.new {
		if !c.ofRelease[path] && path != manifest && got[path] != text {
			return "", fmt.Errorf("%s is not of the new work: %w", path, files)
		}
	}
	switch c.new[manifest] {
	case got[manifest]:
		return "new", nil
	case got[pending]:
		return "new, pending", nil
	}
	return "", files
}

// finish is the next run, undisturbed: it ends in the new work and nothing
// else, and the one after it finds all up to date.
func (c *transition) finish(d *faulty.Disk) error {
	d.Break(0, faulty.None)
	for _, upToDate := range []bool{false, true} {
		s, err := c.run(d)
		if err != nil || upToDate && s.UpToDate != 1 {
			return fmt.Errorf("the next run: %+v, %w", s, err)
		}
		got := contents(d)
		for path, text := range c.new {
			if got[path] != text {
				return fmt.Errorf("after the next run %s has %d bytes that are not the new %d", path, len(got[path]), len(text))
			}
			delete(got, path)
		}
		for path := range got {
			return fmt.Errorf("after the next run %s is left", path)
		}
	}
	return nil
}

// leftovers lists the temporaries of a disk.
func leftovers(d *faulty.Disk) []string {
	return slices.DeleteFunc(d.Names(), func(name string) bool { return !strings.HasPrefix(filepath.Base(name), ".catenrich_") })
}

// eachTransition runs f for every transition in a directory of its own.
func eachTransition(t *testing.T, f func(t *testing.T, c *transition)) {
	for _, c := range transitions(t) {
		if testing.Short() && !c.short {
			continue
		}
		t.Run(c.name, func(t *testing.T) {
			t.Chdir(t.TempDir())
			c.prepare(t)
			f(t, c)
		})
	}
}

// TestEveryFaultOfARun lets each operation of a whole run fail, in each way.
func TestEveryFaultOfARun(t *testing.T) {
	eachTransition(t, func(t *testing.T, c *transition) {
		tried, states := 0, map[string]int{}
		ways := []faulty.Fault{faulty.Fail, faulty.Short, faulty.Late}
		if c.reports || testing.Short() {
			ways = ways[:1]
		}
		for _, how := range ways {
			for n := 1; ; n++ {
				d := c.before()
				d.Break(n, how)
				_, err := c.run(d)
				if d.Broke() == "" {
					break // there is no operation n
				}
				tried++
				where := fmt.Sprintf("%v at operation %d, %s (%v)", how, n, d.Broke(), err)
				if err != nil && (fault.Of(err) == fault.Internal || !strings.Contains(err.Error(), c.disk)) {
					t.Fatalf("%s: class %d, and the message should name the place", where, fault.Of(err))
				}
				state, bad := c.state(d)
				if bad != nil {
					t.Fatalf("%s: %v", where, bad)
				}
				states[state]++
				if err == nil && state != "new" {
					t.Fatalf("%s: success in state %q", where, state)
				}
				if left := leftovers(d); len(left) > 0 && how != faulty.Late && d.Broke() != "remove" {
					t.Fatalf("%s: left %q", where, left)
				}
				if err := c.finish(d); err != nil {
					t.Fatalf("%s: %v", where, err)
				}
			}
		}
		t.Logf("%d faults; states afterwards: %v", tried, states)
	})
}

// TestEveryPowerCutOfARun cuts the power before each operation of a whole run,
// in every way the disk can then look.
func TestEveryPowerCutOfARun(t *testing.T) {
	eachTransition(t, func(t *testing.T, c *transition) {
		tried, states := 0, map[string]int{}
		seen := map[[32]byte]bool{} // the same disk again tells nothing new
		for n, done := 1, false; !done; n++ {
			d := c.before()
			d.Break(n, faulty.Crash)
			_, err := c.run(d)
			done = d.Broke() == ""
			if done && err != nil {
				t.Fatal(err)
			}
			d.Cuts(func(what string, after *faulty.Disk) {
				tried++
				where := fmt.Sprintf("power cut at operation %d, %s, %s", n, d.Broke(), what)
				state, bad := c.state(after)
				if bad != nil {
					t.Fatalf("%s: %v", where, bad)
				}
				states[state]++
				if done && state != "new" {
					t.Fatalf("%s: success did not last: %q", where, state)
				}
				if image := after.Image(); !seen[image] {
					seen[image] = true
					if err := c.finish(after); err != nil {
						t.Fatalf("%s: %v", where, err)
					}
				}
			})
		}
		t.Logf("%d power cuts, %d different disks; states afterwards: %v", tried, len(seen), states)
	})
}

// harm is a way in which somebody changes an input.
type harm struct {
	name string
	do   func(path string) error
}

// harms are what may happen to an input while it is read; other is the text of
// another input.
func harms(other string) []harm {
	return []harm{
		{"removed", os.Remove},
		{"cut to half", func(path string) error {
			info, err := os.Stat(path)
			return errors.Join(err, os.Truncate(path, info.Size()/2))
		}},
		{"emptied", func(path string) error { return os.Truncate(path, 0) }},
		{"appended to", func(path string) error {
			f, err := os.OpenFile(path, os.O_WRONLY|os.O_APPEND, 0)
			if err != nil {
				return err
			}
			_, err = f.WriteString("9,0.9\n")
			return errors.Join(err, f.Close())
		}},
		{"replaced", func(path string) error {
			return errors.Join(os.WriteFile(path+".new", []byte(other), 0o666), os.Rename(path+".new", path))
		}},
		{"replaced by its like of an earlier date", func(path string) error {
			info, err := os.Stat(path)
			like := []byte(other[:min(int(info.Size()), len(other))])
			for int64(len(like)) < info.Size() {
				like = append(like, '\n')
			}
			old := info.ModTime().AddDate(-1, 0, 0)
			return errors.Join(err, os.WriteFile(path+".new", like, 0o666), os.Chtimes(path+".new", old, old), os.Rename(path+".new", path))
		}},
		{"written over", func(path string) error {
			f, err := os.OpenFile(path, os.O_WRONLY, 0)
			if err != nil {
				return err
			}
			info, err := f.Stat()
			_, err2 := f.WriteAt([]byte{'7'}, info.Size()/2)
			return errors.Join(err, err2, f.Close())
		}},
	}
}

// TestInputChangesWhileItIsRead changes an input, in every way and before every
// few operations of a run: a run that succeeds has made the output of the input
// as it was before or after, and does not count as done what changed behind it;
// one that fails says why and leaves nothing.
func TestInputChangesWhileItIsRead(t *testing.T) {
	rows := 20_000
	long, other := catalogue(rows, 1), catalogue(rows, 2)
	z, zs := make([]float64, 6*rows), make([]float64, 6*rows)
	for i := range z {
		z[i], zs[i] = float64(1+i%977)/300, float64(1+i%331)/200
	}
	for _, in := range []struct{ file, text, other string }{
		{"a.csv", long, other},
		{"a.csv.gz", packed(t, long), packed(t, other)},
		{"a.fits", smallFITS(z...), smallFITS(zs...)},
		{"a.parquet", parquetOf(t, 50_000, z), parquetOf(t, 30_000, zs)},
	} {
		t.Run(in.file, func(t *testing.T) {
			t.Chdir(t.TempDir())
			c := &transition{file: in.file, input: in.text, add: "luminosity_distance"}
			c.prepare(t)
			d := c.before()
			if _, err := c.run(d); err != nil {
				t.Fatal(err)
			}
			places, moments := d.Count(), 12
			if testing.Short() {
				moments = 3
			}
			tried, classes := 0, map[fault.Class]int{}
			for _, h := range harms(in.other) {
				for i := range moments {
					at := 1 + i*(places-1)/(moments-1)
					class, err := c.harmed(t, in.text, h, at)
					if err != nil {
						t.Fatalf("%s before operation %d of %d: %v", h.name, at, places, err)
					}
					tried++
					classes[class]++
				}
			}
			t.Logf("%d changes; by exit code: %v", tried, classes)
		})
	}
}

// harmed runs the job on its input, which comes to harm before an operation. It
// returns the exit code, and an error if that is not as it should be.
func (c *transition) harmed(t *testing.T, input string, h harm, at int) (fault.Class, error) {
	path := filepath.Join("in", c.file)
	writeFile(t, path, input)
	d := c.before()
	d.Before = func(n int) {
		if n == at {
			time.Sleep(10 * time.Millisecond) // the kernel's clock for files is coarse
			if err := h.do(path); err != nil {
				t.Fatal(err)
			}
		}
	}
	_, err := c.run(d)
	d.Before = nil
	if err != nil {
		if class := fault.Of(err); class != fault.IO && class != fault.Data && class != fault.NoInput || !strings.Contains(err.Error(), path) {
			return class, fmt.Errorf("class %d, want 65, 66 or 74 and the input's name: %w", class, err)
		}
		if left := d.Names(); len(left) > 0 {
			return 0, fmt.Errorf("left %q after: %w", left, err)
		}
		return fault.Of(err), nil
	}
	if got := contents(d); !maps.Equal(got, c.new) {
		after := faulty.New(c.disk)
		if _, err := c.run(after); err != nil || !maps.Equal(got, contents(after)) {
			return 0, fmt.Errorf("the output is neither of the input before nor of that after (%w)", err)
		}
		return 0, nil
	}
	if s, err := c.run(d); err == nil && s.UpToDate > 0 {
		return 0, errors.New("the next run takes the changed input for done")
	}
	return 0, nil
}

// packed is a gzip file of a text.
func packed(t *testing.T, text string) string {
	t.Helper()
	var b bytes.Buffer
	z := gzip.NewWriter(&b)
	if _, err := io.WriteString(z, text); err != nil {
		t.Fatal(err)
	}
	if err := z.Close(); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// parquetOf is a Parquet file of one column z, in row groups of a given length.
func parquetOf(t *testing.T, group int, z []float64) string {
	t.Helper()
	var b bytes.Buffer
	root, err := schema.NewGroupNode("schema", parquet.Repetitions.Required, schema.FieldList{schema.NewFloat64Node("z", parquet.Repetitions.Required, -1)}, -1)
	if err != nil {
		t.Fatal(err)
	}
	w := file.NewParquetWriter(&b, root)
	for rows := range slices.Chunk(z, group) {
		g, err := w.AppendRowGroupChecked()
		if err != nil {
			t.Fatal(err)
		}
		c, err := g.NextColumn()
		if err != nil {
			t.Fatal(err)
		}
		if _, err := c.(*file.Float64ColumnChunkWriter).WriteBatch(rows, nil, nil); err != nil {
			t.Fatal(err)
		}
		if err := errors.Join(c.Close(), g.Close()); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return b.String()
}
