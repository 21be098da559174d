package publish

import (
	"bytes"
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"catenrich/internal/fault"
)

func TestReadOnlyDirectory(t *testing.T) {
	if os.Geteuid() == 0 {
		// Permissions do not bind the superuser: a directory that cannot be
		// written is found where the kernel makes its own.
		if err := publishFiles(OS, "/proc/out.csv", map[string]string{"": "x"}, Options{}); fault.Of(err) != fault.CantCreate {
			t.Errorf("got %v (class %d), want class %d", err, fault.Of(err), fault.CantCreate)
		}
		return
	}
	dir := t.TempDir()
	if err := os.Chmod(dir, 0o500); err != nil {
		t.Fatal(err)
	}
	defer os.Chmod(dir, 0o700)
	err := publishFiles(OS, filepath.Join(dir, "out.csv"), map[string]string{"": "x"}, Options{})
	if fault.Of(err) != fault.CantCreate || !strings.Contains(err.Error(), filepath.Join(dir, "out.csv")) {
		t.Errorf("got %v (class %d), want class %d", err, fault.Of(err), fault.CantCreate)
	}
	wantFiles(t, dir, nil)
}

// fullFS is the real filesystem, with files that the device at /dev/full
// stands behind.
type fullFS struct{ osFS }

func (f fullFS) Create(path string) (File, error) {
	named, err := f.osFS.Create(path)
	if err != nil {
		return nil, err
	}
	full, err := os.OpenFile("/dev/full", os.O_RDWR, 0)
	return osFile{full, nil}, errors.Join(err, named.Close())
}

func TestFullDisk(t *testing.T) {
	if _, err := os.Stat("/dev/full"); err != nil {
		t.Skip("this system has no /dev/full")
	}
	dir := t.TempDir()
	target := filepath.Join(dir, "out.csv")
	err := publishFiles(fullFS{}, target, map[string]string{"": "x"}, Options{})
	if fault.Of(err) != fault.IO || !strings.Contains(err.Error(), target) || !strings.Contains(err.Error(), "no space left") {
		t.Errorf("got %v (class %d), want class %d, the path and the reason", err, fault.Of(err), fault.IO)
	}
	wantFiles(t, dir, nil)
}

// TestReplacedWhileWriting: a file that turns up under the output's name while
// the release is made is not ours, and stays.
func TestReplacedWhileWriting(t *testing.T) {
	dir := t.TempDir()
	target := filepath.Join(dir, "out.csv")
	r, err := Begin(OS, target, Options{})
	if err != nil {
		t.Fatal(err)
	}
	o, err := r.Create("")
	if err != nil {
		t.Fatal(err)
	}
	o.Write([]byte("ours"))
	if err := os.WriteFile(target, []byte("theirs"), 0o666); err != nil {
		t.Fatal(err)
	}
	if err := r.Commit(manifestOf("")); fault.Of(err) != fault.CantCreate {
		t.Errorf("got %v (class %d), want class %d", err, fault.Of(err), fault.CantCreate)
	}
	if err := r.Abort(); err != nil {
		t.Fatal(err)
	}
	wantFiles(t, dir, map[string]string{"out.csv": "theirs"})
}

// TestSymlinkIsReplacedNotFollowed: with Replace the link goes, and what it
// pointed to stays as it is.
func TestSymlinkIsReplacedNotFollowed(t *testing.T) {
	dir := t.TempDir()
	target := filepath.Join(dir, "out.csv")
	if err := errors.Join(os.WriteFile(filepath.Join(dir, "precious"), []byte("p"), 0o666), os.Symlink("precious", target)); err != nil {
		t.Fatal(err)
	}
	if err := publishFiles(OS, target, map[string]string{"": "new"}, Options{Replace: true}); err != nil {
		t.Fatal(err)
	}
	wantFiles(t, dir, map[string]string{"precious": "p", "out.csv": "new", "out.csv.manifest.json": "*"})
	if info, err := os.Lstat(target); err != nil || !info.Mode().IsRegular() {
		t.Errorf("the output is %v (%v), want a plain file", info.Mode(), err)
	}
}

// TestManifestThatLies: what a hostile manifest lists is not believed where it
// leads out of the directory, and a run leaves those files alone.
func TestManifestThatLies(t *testing.T) {
	dir := t.TempDir()
	target := filepath.Join(dir, "out.csv")
	victim := filepath.Join(dir, "victim")
	if err := publishFiles(OS, target, map[string]string{"": "one"}, Options{}); err != nil {
		t.Fatal(err)
	}
	text, err := os.ReadFile(ManifestPath(target))
	if err != nil {
		t.Fatal(err)
	}
	zero := strings.Repeat("0", 64)
	lie := bytes.Replace(text, []byte(`"sidecars":[]`), []byte(`"sidecars":[{"suffix":"/../victim","size":1,"sha256":"`+zero+`","quick":"`+zero+`"}]`), 1)
	if bytes.Equal(lie, text) {
		t.Fatal("the manifest has no empty list of sidecars")
	}
	if err := errors.Join(os.WriteFile(victim, []byte("v"), 0o666), os.WriteFile(ManifestPath(target), lie, 0o666)); err != nil {
		t.Fatal(err)
	}
	if err := publishFiles(OS, target, map[string]string{"": "two"}, Options{}); fault.Of(err) != fault.CantCreate {
		t.Errorf("got %v, want class %d", err, fault.CantCreate)
	}
	if err := os.WriteFile(PendingPath(target), lie, 0o666); err != nil {
		t.Fatal(err)
	}
	if _, err := Recover(t.Context(), OS, target); err != nil {
		t.Fatal(err)
	}
	if got, err := os.ReadFile(victim); err != nil || string(got) != "v" {
		t.Errorf("the file outside was touched: %q, %v", got, err)
	}
}

func TestWholeNeedsItsSidecars(t *testing.T) {
	target := filepath.Join(t.TempDir(), "out.csv")
	files := map[string]string{"": "x", ".rejects.csv": "r"}
	damage := map[string]func() error{
		"sidecar removed":  func() error { return os.Remove(target + ".rejects.csv") },
		"sidecar changed":  func() error { return os.WriteFile(target+".rejects.csv", []byte("q"), 0o666) },
		"output removed":   func() error { return os.Remove(target) },
		"manifest removed": func() error { return os.Remove(ManifestPath(target)) },
	}
	for name, hurt := range damage {
		if err := publishFiles(OS, target, files, Options{Replace: true}); err != nil {
			t.Fatal(err)
		}
		if err := hurt(); err != nil {
			t.Fatal(err)
		}
		if s, err := Look(OS, target); err != nil || s.Whole {
			t.Errorf("%s: %+v, %v; want it not whole", name, s, err)
		}
	}
}

func TestStream(t *testing.T) {
	var w bytes.Buffer
	s := NewStream(&w, "standard output")
	text := bytes.Repeat([]byte("row\n"), 200_000)
	if _, err := s.Write(text); err != nil {
		t.Fatal(err)
	}
	info, err := s.Finish()
	if err != nil || !bytes.Equal(w.Bytes(), text) || info.Size != int64(len(text)) || info.SHA256 != Digest(sha(text)) {
		t.Errorf("%d bytes came out, %+v, %v", w.Len(), info, err)
	}
}

// TestSourceThatShrinks: a source that ends early is an error, not a short file.
func TestSourceThatShrinks(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "src")
	if err := os.WriteFile(path, bytes.Repeat([]byte("x"), 1000), 0o666); err != nil {
		t.Fatal(err)
	}
	src, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	r, err := Begin(OS, filepath.Join(dir, "out"), Options{})
	if err != nil {
		t.Fatal(err)
	}
	o, err := r.Create("")
	if err != nil {
		t.Fatal(err)
	}
	if err := o.CopyRange(src, 0, 2000); fault.Of(err) != fault.IO {
		t.Errorf("got %v, want class %d", err, fault.IO)
	}
	if err := r.Commit(manifestOf("")); err == nil {
		t.Error("a broken output was published")
	}
	if err := r.Abort(); err != nil {
		t.Fatal(err)
	}
	wantFiles(t, dir, map[string]string{"src": "*"})
}
