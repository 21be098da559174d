package interop

import (
	"errors"
	"path/filepath"
	"sort"
	"testing"

	"catenrich/internal/table"
)

// specs are the choices of encoding and codec.
var specs = []table.Spec{{}, {Encoding: "plain"}, {Codec: "snappy"}, {Codec: "none"}}

// TestMatrix grafts onto every file that the makers make, by default and with
// each other choice of encoding and codec, and lets every judge read it. What
// a judge cannot read of the input it is not asked of the output; each such
// case is listed.
func TestMatrix(t *testing.T) {
	db := duck(t)
	files := makeAll(t, db)
	var names []string
	for name := range files {
		names = append(names, name)
	}
	sort.Strings(names)
	read := map[string]int{}
	skipped := map[string]int{}
	for _, name := range names {
		t.Run(name, func(t *testing.T) {
			for i, spec := range specs {
				out := filepath.Join(t.TempDir(), "out.parquet")
				graft(t, files[name], out, spec)
				if err := samePrefix(files[name], out); err != nil {
					t.Error(err)
				}
				for _, j := range judges {
					err := caught(func() error { return j.judge(db, files[name], out) })
					var cannot errCannot
					switch {
					case errors.As(err, &cannot):
						skipped[j.name]++
						if i == 0 {
							t.Logf("SKIP %s cannot read the input: %v", j.name, err)
						}
					case err != nil:
						t.Errorf("%s, encoding %q, codec %q: %v", j.name, spec.Encoding, spec.Codec, err)
					default:
						read[j.name]++
					}
				}
			}
		})
	}
	for _, j := range judges {
		t.Logf("%s read %d outputs of %d files; %d not asked", j.name, read[j.name], len(files), skipped[j.name])
	}
}

// TestGraftOntoGraft adds other columns to an output, twice over.
func TestGraftOntoGraft(t *testing.T) {
	db := duck(t)
	dir := t.TempDir()
	first := filepath.Join(dir, "0.parquet")
	if err := parquetGoMaker("", []int{300, 1, 700}).make(t, db, first); err != nil {
		t.Fatal(err)
	}
	others := table.Spec{Added: make([]table.Field, len(added)), Metadata: []table.KeyValue{{Key: "catenrich.columns", Value: "others"}}}
	for i, f := range added {
		f.Name = "earlier_" + f.Name
		others.Added[i] = f
	}
	second, third := filepath.Join(dir, "1.parquet"), filepath.Join(dir, "2.parquet")
	graft(t, first, second, others)
	graft(t, second, third, table.Spec{Metadata: []table.KeyValue{{Key: "catenrich.columns", Value: "latest"}}})
	if err := samePrefix(second, third); err != nil {
		t.Error(err)
	}
	for _, j := range judges {
		if err := caught(func() error { return j.judge(db, second, third) }); err != nil {
			t.Errorf("%s: %v", j.name, err)
		}
	}
	p, f, err := openParquetGo(third)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	for key, want := range map[string]string{"catenrich.columns": "latest", "catenrich.1.columns": "others"} {
		if got, ok := p.Lookup(key); !ok || got != want {
			t.Errorf("%s is %q, want %q", key, got, want)
		}
	}
}
