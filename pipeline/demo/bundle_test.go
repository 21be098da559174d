package demo

import (
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"catenrich/internal/fault"
)

// entries lists the files below dir, slashes between.
func entries(t *testing.T, dir string) string {
	t.Helper()
	var names []string
	err := filepath.WalkDir(dir, func(path string, e fs.DirEntry, err error) error {
		if err == nil && !e.IsDir() {
			name, _ := filepath.Rel(dir, path)
			names = append(names, filepath.ToSlash(name))
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return strings.Join(names, " ")
}

const everything = "README.txt quill_ridge.csv quill_ridge.toml quill_ridge_photometry.toml templates/band_i.csv templates/k_r.csv templates/old_stars.csv truth/quill_ridge_truth.csv"

func TestWriteIsRepeatable(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "a", "b")
	for range 2 {
		files, err := Write(dir, Options{Rows: 2000})
		if err != nil {
			t.Fatal(err)
		}
		for i, f := range files {
			rel, _ := filepath.Rel(dir, f)
			files[i] = filepath.ToSlash(rel)
		}
		if got := strings.Join(files, " "); got != everything {
			t.Errorf("Write returned %s, want %s", got, everything)
		}
		if got := entries(t, dir); got != everything {
			t.Errorf("the directory has %s, want %s", got, everything)
		}
	}
}

func TestWriteReplacesNothing(t *testing.T) {
	for _, c := range []struct {
		name  string
		spoil func(path string) error
	}{
		{Catalogue, func(p string) error { return os.WriteFile(p, []byte("mine"), 0o666) }},
		{Truth, func(p string) error { return os.Truncate(p, 1000) }},
		{Job, func(p string) error { return errors.Join(os.Remove(p), os.Mkdir(p, 0o777)) }},
		{Readme, func(p string) error { return errors.Join(os.Remove(p), os.Symlink("elsewhere", p)) }},
	} {
		t.Run(c.name, func(t *testing.T) {
			dir := t.TempDir()
			if _, err := Write(dir, Options{Rows: 2000}); err != nil {
				t.Fatal(err)
			}
			path := join(dir, c.name)
			if err := c.spoil(path); err != nil {
				t.Fatal(err)
			}
			if err := os.Remove(join(dir, KTable)); err != nil {
				t.Fatal(err)
			}
			before := entries(t, dir)
			_, err := Write(dir, Options{Rows: 2000})
			if err == nil || fault.Of(err) != fault.CantCreate || !strings.Contains(err.Error(), path) {
				t.Errorf("error %v of class %d, want class %d naming %s", err, fault.Of(err), fault.CantCreate, path)
			}
			if after := entries(t, dir); after != before {
				t.Errorf("a refused Write left %s, want %s as before", after, before)
			}
		})
	}
}
