package writers

import (
	"bytes"
	"errors"
	"math/rand/v2"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"

	"catenrich/internal/fault"
	"catenrich/internal/table"
	"catenrich/readers"
)

// fixtures are the files in testdata/small.
func fixtures(t testing.TB) map[string][]byte {
	t.Helper()
	names, err := filepath.Glob("../testdata/small/*.parquet")
	if err != nil || len(names) == 0 {
		t.Fatalf("no files in testdata/small: %v", err)
	}
	files := make(map[string][]byte)
	for _, name := range names {
		b, err := os.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		files[filepath.Base(name)] = b
	}
	return files
}

// graftAll grafts onto a file, decoding every column that can be.
func graftAll(path string, out table.Output) error {
	src, err := readers.OpenParquet(path)
	if err != nil {
		return err
	}
	var want, text []string
	seen := map[string]int{}
	for _, f := range src.Schema().Fields {
		seen[f.Name]++
	}
	for _, f := range src.Schema().Fields {
		switch {
		case seen[f.Name] > 1 || f.Type == table.Other:
		case f.Type.Numeric():
			want = append(want, f.Name)
		default:
			text = append(text, f.Name)
		}
	}
	src.Close()
	job := graftJob{path: path, want: want, text: text, spec: table.Spec{Added: added}, kernel: fill, workers: 2}
	_, err = job.run(out)
	return err
}

func TestFixtures(t *testing.T) {
	for name := range fixtures(t) {
		out := newFileOutput(t)
		if err := graftAll("../testdata/small/"+name, out); err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		again := newFileOutput(t)
		if err := graftAll(out.f.Name(), again); fault.Of(err) != fault.Config || !strings.Contains(err.Error(), `"twice"`) {
			t.Errorf("%s: grafting the same names again: %v", name, err)
		}
	}
}

// allowedFault is what a damaged file may end in.
func allowedFault(err error) bool {
	return err == nil || fault.Of(err) == fault.Data || fault.Of(err) == fault.Config
}

// TestDamagedFiles flips bytes in real files. Each must end in an error that
// names the file, or in an output that opens again with as many rows; never in
// a panic, a hang, or a claim on memory that the file does not back.
func TestDamagedFiles(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	rounds := 150
	if testing.Short() {
		rounds = 20
	}
	path := filepath.Join(t.TempDir(), "damaged.parquet")
	failed, passed := 0, 0
	for name, good := range fixtures(t) {
		for round := range rounds {
			bad := bytes.Clone(good)
			for range 1 + r.IntN(4) {
				at := r.IntN(len(bad))
				if round%2 == 0 { // near the end, where the footer is
					at = len(bad) - 1 - r.IntN(min(len(bad), 3000))
				}
				bad[at] = byte(r.Uint32())
			}
			if err := os.WriteFile(path, bad, 0o666); err != nil {
				t.Fatal(err)
			}
			out := newFileOutput(t)
			err := graftAll(path, out)
			if err == nil {
				passed++
				if p, err := readers.OpenParquet(out.f.Name()); err != nil {
					t.Errorf("%s, round %d: the output does not open: %v", name, round, err)
				} else {
					p.Close()
				}
			} else if failed++; !allowedFault(err) || !strings.Contains(err.Error(), "damaged.parquet") {
				t.Errorf("%s, round %d: class %d: %v", name, round, fault.Of(err), err)
			}
			out.f.Close()
			os.Remove(out.f.Name())
		}
	}
	t.Logf("%d damaged files were refused, %d gave an output", failed, passed)
	var m runtime.MemStats
	runtime.ReadMemStats(&m)
	if m.HeapSys > 2<<30 {
		t.Errorf("the heap grew to %d MB", m.HeapSys>>20)
	}
}

// TestDamagedPageSaysWhere: file, row group and column.
func TestDamagedPageSaysWhere(t *testing.T) {
	s := shape{groups: []int{1000, 70000}}
	path := s.make(t)
	b, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	chunk, err := openArrow(t, path).MetaData().RowGroup(1).ColumnChunk(0)
	if err != nil {
		t.Fatal(err)
	}
	from := chunk.DataPageOffset()
	copy(b[from+30:], bytes.Repeat([]byte{0xff}, int(chunk.TotalCompressedSize())-30))
	if err := os.WriteFile(path, b, 0o666); err != nil {
		t.Fatal(err)
	}
	err = graftAll(path, newFileOutput(t))
	if fault.Of(err) != fault.Data || !strings.Contains(err.Error(), path) || !strings.Contains(err.Error(), "row group 1") || !strings.Contains(err.Error(), `"z"`) {
		t.Errorf("class %d: %v", fault.Of(err), err)
	}
}

func TestRefusedNames(t *testing.T) {
	s := shape{groups: []int{3}}
	src, err := readers.OpenParquet(s.make(t))
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	for _, c := range []struct {
		names []string
		class fault.Class
	}{
		{[]string{"new"}, 0}, {[]string{"z"}, fault.Config}, {[]string{"ID"}, fault.Config},
		{[]string{"a", "A"}, fault.Config}, {[]string{""}, fault.Config},
	} {
		var spec table.Spec
		for _, n := range c.names {
			spec.Added = append(spec.Added, table.Field{Name: n})
		}
		_, err := NewParquet(src, spec)
		if (err == nil) != (c.class == 0) || err != nil && fault.Of(err) != c.class {
			t.Errorf("%q: %v", c.names, err)
		}
	}
	for _, spec := range []table.Spec{{Codec: "lz4_raw"}, {Codec: "none", Level: 3}, {Level: 99}, {Encoding: "delta"}} {
		if _, err := NewParquet(src, spec); fault.Of(err) != fault.Config {
			t.Errorf("%+v: %v", spec, err)
		}
	}
}

func TestAbsentFile(t *testing.T) {
	_, err := readers.OpenParquet(filepath.Join(t.TempDir(), "absent.parquet"))
	if fault.Of(err) != fault.NoInput || !errors.Is(err, os.ErrNotExist) {
		t.Errorf("%v", err)
	}
}

// FuzzDamaged is TestDamagedFiles with inputs that are looked for.
func FuzzDamaged(f *testing.F) {
	for _, b := range fixtures(f) {
		if len(b) < 30_000 {
			f.Add(b)
		}
	}
	f.Fuzz(func(t *testing.T, b []byte) {
		dir := t.TempDir()
		path := filepath.Join(dir, "damaged.parquet")
		if err := os.WriteFile(path, b, 0o666); err != nil {
			t.Fatal(err)
		}
		if err := graftAll(path, newFileOutput(t)); !allowedFault(err) {
			t.Errorf("class %d: %v", fault.Of(err), err)
		}
	})
}
