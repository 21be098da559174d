package publish_test

import (
	"bytes"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"catenrich/internal/fault"
	. "catenrich/internal/publish"
	"catenrich/internal/publish/faulty"
)

const page = "/d/report.html"

func isPage(text []byte) bool { return bytes.HasPrefix(text, []byte("page")) }

// withPage returns a disk on which a page stands, durably; none for "".
func withPage(t *testing.T, text string) *faulty.Disk {
	m := faulty.New("/d")
	if text != "" {
		if err := Put(m, page, []byte(text), isPage, false); err != nil {
			t.Fatal(err)
		}
	}
	return m.AfterCut(^uint(0), faulty.Kept)
}

// TestPutThroughFaults lets each operation fail, and cuts the power before
// each, in every way the disk can then look: the old page stands, or the new.
func TestPutThroughFaults(t *testing.T) {
	for _, old := range []string{"", "page one"} {
		want := map[string]bool{"page two": true, old: true}
		if old == "" {
			want = map[string]bool{"page two": true, "-": true}
		}
		for _, how := range []faulty.Fault{faulty.Fail, faulty.Short, faulty.Late, faulty.Crash} {
			for n := 1; ; n++ {
				m := withPage(t, old)
				m.Break(n, how)
				err := Put(m, page, []byte("page two"), isPage, false)
				if m.Count() < n {
					break
				}
				if got := m.Read(page); !want[got] || err == nil && got != "page two" {
					t.Fatalf("%v at operation %d (%v) leaves %q", how, n, err, got)
				}
				m.Cuts(func(what string, after *faulty.Disk) {
					if got := after.Read(page); !want[got] {
						t.Fatalf("%v at operation %d, %s, leaves %q", how, n, what, got)
					}
					if err := Put(after, page, []byte("page two"), isPage, false); err != nil || after.Read(page) != "page two" {
						t.Fatalf("%v at operation %d, %s: the next run: %v", how, n, what, err)
					}
				})
			}
		}
	}
}

// TestPutLeavesAlone: what is not ours stays unless it may be replaced.
func TestPutLeavesAlone(t *testing.T) {
	dir := t.TempDir()
	path := func(name string) string { return filepath.Join(dir, name) }
	for name, text := range map[string]string{"foreign": "mine", "ours": "page one", "target": "page of another"} {
		if err := os.WriteFile(path(name), []byte(text), 0o666); err != nil {
			t.Fatal(err)
		}
	}
	if err := os.Symlink("target", path("link")); err != nil {
		t.Fatal(err)
	}
	if err := os.Mkdir(path("dir"), 0o777); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		name    string
		replace bool
		want    string // part of the error; "" for none
	}{
		{"new", false, ""}, {"ours", false, ""}, {"foreign", false, "was not written by catenrich"}, {"link", false, "was not written by catenrich"},
		{"dir", false, "is a directory"}, {"dir", true, "is a directory"}, {"foreign", true, ""}, {"link", true, ""},
	} {
		before := SnapshotDir(t, dir)
		may := MayPut(OS, path(c.name), isPage, c.replace)
		err := Put(OS, path(c.name), []byte("page two"), isPage, c.replace)
		if (may == nil) != (err == nil) {
			t.Errorf("%s: MayPut says %v, Put %v", c.name, may, err)
		}
		switch {
		case c.want == "":
			if text, _ := os.ReadFile(path(c.name)); err != nil || string(text) != "page two" {
				t.Errorf("%s, replace %v: %v, and it holds %q", c.name, c.replace, err, text)
			}
		case err == nil || !strings.Contains(err.Error(), c.want) || fault.Of(err) != fault.CantCreate:
			t.Errorf("%s, replace %v: %v, want %q", c.name, c.replace, err, c.want)
		case SnapshotDir(t, dir) != before:
			t.Errorf("%s was refused, and the directory changed", c.name)
		}
	}
	if text, _ := os.ReadFile(path("target")); string(text) != "page of another" {
		t.Error("the target of a link was written")
	}
}

// TestPutSame: the same text is not written again.
func TestPutSame(t *testing.T) {
	m := withPage(t, "page one")
	before, err := m.Lstat(page)
	if err != nil {
		t.Fatal(err)
	}
	err = Put(m, page, []byte("page one"), isPage, false)
	if after, statErr := m.Lstat(page); err != nil || statErr != nil || !after.ModTime().Equal(before.ModTime()) {
		t.Errorf("%v, and the file was written again", err)
	}
}

// TestRetract removes what is ours, and nothing else.
func TestRetract(t *testing.T) {
	for text, want := range map[string]string{"page one": "-", "mine": "mine"} {
		m := faulty.New("/d")
		f, err := m.Create(page)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := f.Write([]byte(text)); err != nil {
			t.Fatal(err)
		}
		if err := Retract(m, page, isPage); err != nil || m.Read(page) != want {
			t.Errorf("retracting %q leaves %q (%v), want %q", text, m.Read(page), err, want)
		}
	}
	if err := Retract(faulty.New("/d"), page, isPage); err != nil {
		t.Errorf("retracting nothing: %v", err)
	}
}
