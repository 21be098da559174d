package main

import (
	"bytes"
	"context"
	"io"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"

	"catenrich/internal/fault"
	"catenrich/pipeline"
)

// The whole program on catalogues that somebody damaged. Each gives an error of
// the class for content, that names the file, and nothing is left; or an output
// that verify proves from its manifest and its own columns, and against the
// input. Never a panic, which would be an internal error.

// maxHeap is what no input of these sizes may make the program take.
const maxHeap = 1 << 30

func fuzzProgram(t *testing.T, file string, content []byte, plan *pipeline.Plan) {
	if err := os.WriteFile(file, content, 0o666); err != nil {
		t.Fatal(err)
	}
	var stderr bytes.Buffer
	var before, m runtime.MemStats // HeapSys hardly shrinks: what other tests needed is not this file's
	runtime.ReadMemStats(&before)
	s, err := pipeline.Run(context.Background(), plan, pipeline.Options{Workers: 2, Stdout: io.Discard, Stderr: &stderr}, silent{})
	switch {
	case err != nil && (fault.Of(err) != fault.Data && fault.Of(err) != fault.Config || !strings.Contains(err.Error(), file)):
		t.Fatalf("class %d: %v", fault.Of(err), err)
	case err != nil:
		if left := published(t, "out"); len(left) > 0 {
			t.Fatalf("%v\nleft %s", err, listing(t, "out"))
		}
	case s.Rows < 2000: // proofs take their time
		if r := runHere(t, []string{"verify", "out/" + file, "--input", file}, nil); r.code != 0 {
			t.Fatalf("verify: exit %d\n%s%s", r.code, r.stdout, r.stderr)
		}
	}
	if runtime.ReadMemStats(&m); m.HeapSys > before.HeapSys+maxHeap {
		t.Fatalf("the heap grew by %d MB for a file of %d bytes", (m.HeapSys-before.HeapSys)>>20, len(content))
	}
}

// inScratch moves to a directory of its own, empty but for an output directory.
func inScratch(t *testing.T) {
	t.Chdir(t.TempDir())
	if err := os.Mkdir("out", 0o777); err != nil {
		t.Fatal(err)
	}
}

// fuzzPlan plans a job on one file. All runs share it: its tables take longer
// to make than a small catalogue takes to read.
func fuzzPlan(f *testing.F, file, settings string) func() *pipeline.Plan {
	return func() *pipeline.Plan {
		if err := os.WriteFile("job.toml", []byte("input.files = ['"+file+"']\noutput.directory = 'out'\n"+settings), 0o666); err != nil {
			f.Fatal(err)
		}
		j, _, err := new(jobFlags).resolve([]string{"job.toml"})
		if err != nil {
			f.Fatal(err)
		}
		p, err := pipeline.NewPlan(j, formats())
		if err != nil {
			f.Fatal(err)
		}
		return p
	}
}

// fuzzFile runs the program on mutations of seeds, as files called name.
func fuzzFile(f *testing.F, name, settings string, seeds ...[]byte) {
	for _, s := range seeds {
		f.Add(s)
	}
	var plan *pipeline.Plan
	f.Fuzz(func(t *testing.T, content []byte) {
		if len(content) > 1<<20 {
			return
		}
		inScratch(t)
		if plan == nil {
			if err := os.WriteFile(name, nil, 0o666); err != nil {
				t.Fatal(err)
			}
			plan = fuzzPlan(f, name, settings)()
		}
		fuzzProgram(t, name, content, plan)
	})
}

const fuzzSettings = `
columns.redshift = "z"
columns.redshift_missing = [-99]
add.columns = ["luminosity_distance", "lookback_time", "superluminal_now"]
limits.max_rejects = 1000
redshift.negative = "signed"
`

func FuzzRunCSV(f *testing.F) {
	fuzzFile(f, "a.csv", "input.csv.comment = '#'\n"+fuzzSettings,
		[]byte(catalogue(60, 1)), []byte("z\n1\n"), []byte("a,z,\"b\"\r\n1,0.5D0,\"x\r\ny\"\r\n,,\r\n"), []byte("\ufeffz,z2\r1e300,-0\r5e-324,1"))
}

func FuzzRunGzip(f *testing.F) {
	fuzzFile(f, "a.csv.gz", fuzzSettings, []byte(packed(new(testing.T), "id,z\n1,0.5\n2,0.6\n")))
}

func FuzzRunParquet(f *testing.F) {
	files, err := filepath.Glob("../../testdata/small/*.parquet")
	if err != nil || len(files) == 0 {
		f.Fatal(files, err)
	}
	var seeds [][]byte
	for _, path := range files {
		if content := readFile(f, path); len(content) < 30_000 {
			seeds = append(seeds, content)
		}
	}
	fuzzFile(f, "a.parquet", fuzzSettings, seeds...)
}

func FuzzRunFITS(f *testing.F) {
	fuzzFile(f, "a.fits", fuzzSettings, []byte(smallFITS(0.5, 1, -99)), fitsCatalogue(20, 1)[:20*2880])
}
