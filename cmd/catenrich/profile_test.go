package main

import (
	"bytes"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"catenrich/internal/fault"
)

// TestProfiles: each file is there after a run, also after one that failed,
// and of its kind; the output is the same with and without.
func TestProfiles(t *testing.T) {
	dir := t.TempDir()
	path := func(name string) string { return filepath.Join(dir, name) }
	if err := os.WriteFile(path("in.csv"), []byte("id,z\n1,0.5\n2,1.5\n"), 0o666); err != nil {
		t.Fatal(err)
	}
	// Profiles and traces of Go: gzip of a protocol buffer, and a header in plain text.
	begins := map[string]string{"cpuprofile": "\x1f\x8b", "memprofile": "\x1f\x8b", "trace": "go 1."}
	for _, redshift := range []string{"z", "no_such_column"} {
		args := []string{"run", path("in.csv"), "--redshift", redshift, "--add", "distances", "-o", path("out-" + redshift + ".csv"), "--quiet"}
		for name := range begins {
			args = append(args, "--"+name, path(redshift+"."+name))
		}
		var stderr bytes.Buffer
		code := run(args, os.Stdin, &stderr, &stderr)
		if want := map[string]int{"z": 0, "no_such_column": int(fault.Data)}[redshift]; code != want {
			t.Fatalf("--redshift %s: exit %d, want %d: %s", redshift, code, want, &stderr)
		}
		for name, want := range begins {
			got, err := os.ReadFile(path(redshift + "." + name))
			if err != nil || !strings.HasPrefix(string(got), want) {
				t.Errorf("--redshift %s: --%s begins with %q, want %q (%v)", redshift, name, got[:min(len(got), 8)], want, err)
			}
		}
	}
	var stderr bytes.Buffer
	if code := run([]string{"run", path("in.csv"), "--redshift", "z", "--add", "distances", "-o", path("plain.csv"), "--quiet"}, os.Stdin, &stderr, &stderr); code != 0 {
		t.Fatal(&stderr)
	}
	a, err := os.ReadFile(path("out-z.csv"))
	b, err2 := os.ReadFile(path("plain.csv"))
	if err != nil || err2 != nil || !bytes.Equal(a, b) {
		t.Errorf("the output differs when the run is profiled (%v, %v)", err, err2)
	}
}

func TestProfileThatCannotBeMade(t *testing.T) {
	var stderr bytes.Buffer
	code := run([]string{"run", "absent.csv", "--redshift", "z", "--add", "distances", "-o", "-", "--trace", filepath.Join(t.TempDir(), "no", "dir")}, os.Stdin, &stderr, &stderr)
	if code != int(fault.CantCreate) || !strings.Contains(stderr.String(), "--trace") {
		t.Errorf("exit %d, want %d: %s", code, fault.CantCreate, &stderr)
	}
}
