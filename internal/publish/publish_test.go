package publish

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"catenrich/internal/fault"
)

// manifestOf is a manifest with only what publication reads, and a mark to
// tell versions apart.
func manifestOf(mark string) func(Record) ([]byte, error) {
	return func(r Record) ([]byte, error) {
		return json.Marshal(struct {
			Record
			Mark string `json:"mark"`
		}{r, fmt.Sprintf("%x", sha([]byte(mark)))})
	}
}

// publishFiles publishes files, keyed by suffix, at target.
func publishFiles(fsys FS, target string, files map[string]string, o Options) (err error) {
	r, err := Begin(fsys, target, o)
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, r.Abort()) }()
	for suffix, text := range files {
		out, err := r.Create(suffix)
		if err != nil {
			return err
		}
		if _, err := out.Write([]byte(text)); err != nil {
			return err
		}
	}
	return r.Commit(manifestOf(files[""]))
}

// wantFiles checks that dir holds exactly these files, besides the lock
// directory. A want of "*" accepts any content.
func wantFiles(t *testing.T, dir string, want map[string]string) {
	t.Helper()
	entries, err := os.ReadDir(dir)
	if err != nil {
		t.Fatal(err)
	}
	seen := map[string]bool{}
	for _, e := range entries {
		if e.Name() == LockDir {
			continue
		}
		seen[e.Name()] = true
		content, ok := want[e.Name()]
		if !ok {
			t.Errorf("%s was left behind", e.Name())
			continue
		}
		if got, err := os.ReadFile(filepath.Join(dir, e.Name())); err != nil || content != "*" && string(got) != content {
			t.Errorf("%s holds %.60q (%v), want %.60q", e.Name(), got, err, content)
		}
	}
	for name := range want {
		if !seen[name] {
			t.Errorf("%s is missing", name)
		}
	}
}

func TestPublishAndReplace(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "a", "b") // is made
	target := filepath.Join(dir, "out.csv")
	if err := publishFiles(OS, target, map[string]string{"": "one\n", ".rejects.csv": "r\n"}, Options{}); err != nil {
		t.Fatal(err)
	}
	wantFiles(t, dir, map[string]string{"out.csv": "one\n", "out.csv.rejects.csv": "r\n", "out.csv.manifest.json": "*"})
	s, err := Look(OS, target)
	if err != nil || !s.Exists || !s.Ours || !s.Whole || s.InTheWay != "" {
		t.Fatalf("after publication: %+v, %v", s, err)
	}

	// The next version has no rejects: the old ones must not stay beside it.
	if err := publishFiles(OS, target, map[string]string{"": "two\n"}, Options{}); err != nil {
		t.Fatal(err)
	}
	wantFiles(t, dir, map[string]string{"out.csv": "two\n", "out.csv.manifest.json": "*"})
	if s, err := Look(OS, target); err != nil || !s.Whole {
		t.Fatalf("after the second publication: %+v, %v", s, err)
	}
}

func TestDigestsInTheManifest(t *testing.T) {
	target := filepath.Join(t.TempDir(), "out")
	big := bytes.Repeat([]byte("0123456789abcdef"), 100_000) // several blocks
	src := filepath.Join(t.TempDir(), "src")
	if err := os.WriteFile(src, big, 0o666); err != nil {
		t.Fatal(err)
	}
	in, err := os.Open(src)
	if err != nil {
		t.Fatal(err)
	}
	r, err := Begin(OS, target, Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer r.Abort()
	out, err := r.Create("")
	if err != nil {
		t.Fatal(err)
	}
	want := append([]byte("head"), big...)
	want = append(want, big[5:1_000_005]...)
	want = append(want, "tail"...)
	steps := errors.Join(
		second(out.Write([]byte("head"))), second(out.Write(big)), out.CopyRange(in, 5, 1_000_000), in.Close(), second(out.Write([]byte("tail"))))
	if steps != nil {
		t.Fatal(steps)
	}
	if got := out.Sum(); got != sha(want) {
		t.Errorf("Sum before the patch is %x, want %x", got, sha(want))
	}
	copy(want[2:], "XY")
	if err := out.Patch(2, []byte("XY")); err != nil {
		t.Fatal(err)
	}
	if got := out.Sum(); got != sha(want) {
		t.Errorf("Sum after the patch is %x, want %x", got, sha(want))
	}
	var record Record
	if err := r.Commit(func(r Record) ([]byte, error) { record = r; return json.Marshal(r) }); err != nil {
		t.Fatal(err)
	}
	got, err := os.ReadFile(target)
	if err != nil || !bytes.Equal(got, want) {
		t.Fatalf("the file holds %d bytes (%v), want %d others", len(got), err, len(want))
	}
	if record.Output.SHA256 != Digest(sha(want)) || record.Output.Size != int64(len(want)) {
		t.Errorf("recorded %+v, want size %d and digest %x", record.Output, len(want), sha(want))
	}
	quick := sha([]byte(itoa(len(want))+"\n"), want[:65536], want[len(want)-65536:])
	if record.Output.Quick != Digest(quick) {
		t.Errorf("quick fingerprint %v, want %x", record.Output.Quick, quick)
	}
}

func TestForeignFilesAreRefused(t *testing.T) {
	cases := []struct {
		name string
		make func(target string) error
		want string
		code fault.Class
	}{
		{"output", func(p string) error { return os.WriteFile(p, []byte("mine"), 0o666) }, "exists and is not an output", fault.CantCreate},
		{"symlink", func(p string) error { return os.Symlink("elsewhere", p) }, "is a symbolic link", fault.CantCreate},
		{"sidecar", func(p string) error { return os.WriteFile(p+".rejects.csv", []byte("mine"), 0o666) }, "not a sidecar", fault.CantCreate},
		{"manifest", func(p string) error { return os.WriteFile(p+".manifest.json", []byte("{}"), 0o666) }, "is not a manifest of ours", fault.CantCreate},
		{"directory", func(p string) error { return os.Mkdir(p, 0o777) }, "is a directory", fault.CantCreate},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			dir := t.TempDir()
			target := filepath.Join(dir, "out.csv")
			if err := c.make(target); err != nil {
				t.Fatal(err)
			}
			before := snapshotDir(t, dir)
			err := publishFiles(OS, target, map[string]string{"": "new"}, Options{})
			if err == nil || !strings.Contains(err.Error(), c.want) || fault.Of(err) != c.code {
				t.Fatalf("got %v (class %d), want %q (class %d)", err, fault.Of(err), c.want, c.code)
			}
			if after := snapshotDir(t, dir); after != before {
				t.Errorf("the directory changed from\n%s to\n%s", before, after)
			}
			err = publishFiles(OS, target, map[string]string{"": "new"}, Options{Replace: true})
			if c.name == "directory" {
				if fault.Of(err) != fault.CantCreate {
					t.Fatalf("a directory was replaced: %v", err)
				}
				return
			}
			if err != nil {
				t.Fatal(err)
			}
			wantFiles(t, dir, map[string]string{"out.csv": "new", "out.csv.manifest.json": "*"})
		})
	}
}
