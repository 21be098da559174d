package publish_test

import (
	"errors"
	"fmt"
	"maps"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	. "catenrich/internal/publish"
	"catenrich/internal/publish/faulty"
)

const (
	out       = "/d/out.csv"
	outReject = out + ".rejects.csv"
	outColumn = out + ".columns.csv"
)

// A version is what a run publishes: content by suffix.
type version map[string]string

// publish runs the whole of a publication on the disk, with every kind of
// writing in it.
func (v version) publish(m *faulty.Disk, src *os.File) error {
	_, err := v.publishCounting(m, src)
	return err
}

// publishCounting also returns how many operations there had been when it
// began to clean up.
func (v version) publishCounting(m *faulty.Disk, src *os.File) (aborting int, err error) {
	r, err := Begin(m, out, Options{})
	if err != nil {
		return 0, err
	}
	defer func() {
		aborting = m.Count()
		err = errors.Join(err, r.Abort())
	}()
	return 0, v.write(r, src)
}

func (v version) write(r *Release, src *os.File) error {
	for _, suffix := range slices.Sorted(maps.Keys(v)) {
		o, err := r.Create(suffix)
		if err != nil {
			return err
		}
		text := v[suffix]
		if suffix == "" { // the first byte is patched, the middle copied
			if err := o.CopyRange(src, 0, 4); err != nil {
				return err
			}
			_, err := o.Write([]byte(text[4:]))
			if err := errors.Join(err, o.Patch(4, []byte(text[4:6]))); err != nil {
				return err
			}
		} else if _, err := o.Write([]byte(text)); err != nil {
			return err
		}
	}
	return r.Commit(ManifestOf(v[""]))
}

// manifest returns the manifest that publishing v makes.
func (v version) manifest(t *testing.T, src *os.File) string {
	m := faulty.New("/d")
	if err := v.publish(m, src); err != nil {
		t.Fatal(err)
	}
	return m.Read(ManifestPath(out))
}

// A change of version, and the two manifests.
type passage struct {
	old, new                 version
	oldManifest, newManifest string
}

// state names the state that a passage is in, or says why it is in none that
// may be. An old output keeps its sidecars, though a new one may have taken a
// sidecar's place already; a new output never comes before its sidecars.
func (p *passage) state(m *faulty.Disk) (string, error) {
	output, manifest, pending := m.Read(out), m.Read(ManifestPath(out)), m.Read(PendingPath(out))
	files := fmt.Errorf("output %.20q, manifest %.200q, pending %.200q", output, manifest, pending)
	if output == p.oldText() && manifest == p.oldManifest && output != p.new[""] {
		for suffix, text := range p.old {
			if got := m.Read(out + suffix); got != text && got != p.new[suffix] {
				return "", fmt.Errorf("the old %s holds %q, want %q: %w", suffix, got, text, files)
			}
		}
		return "old", nil
	}
	for suffix, text := range p.new {
		if got := m.Read(out + suffix); got != text {
			return "", fmt.Errorf("the new %s holds %q, want %q: %w", suffix, got, text, files)
		}
	}
	switch {
	case pending == p.newManifest:
		return "new, pending", nil
	case manifest == p.newManifest:
		return "new", nil
	}
	return "", files
}

// wantOld checks that exactly the old files stand.
func (p *passage) wantOld(m *faulty.Disk) error {
	want := map[string]string{}
	if p.old != nil {
		want[ManifestPath(out)] = p.oldManifest
	}
	for suffix, text := range p.old {
		want[out+suffix] = text
	}
	for _, name := range m.Names() {
		if _, ok := want[name]; !ok {
			return fmt.Errorf("%s is left", name)
		}
	}
	for name, text := range want {
		// The new sidecar of a listed name may have come first.
		if got := m.Read(name); got != text && got != p.new[strings.TrimPrefix(name, out)] {
			return fmt.Errorf("%s holds %q, want %q", name, got, text)
		}
	}
	return nil
}

func (p *passage) oldText() string {
	if p.old == nil {
		return "-"
	}
	return p.old[""]
}

// wantNew checks that exactly the new files stand, besides temporaries of a
// crashed process.
func (p *passage) wantNew(m *faulty.Disk) error {
	if s, err := p.state(m); s != "new" {
		return fmt.Errorf("state %q, want new: %w", s, err)
	}
	want := map[string]bool{ManifestPath(out): true}
	for suffix, text := range p.new {
		want[out+suffix] = true
		if got := m.Read(out + suffix); got != text {
			return fmt.Errorf("%s holds %q, want %q", out+suffix, got, text)
		}
	}
	for _, name := range m.Names() {
		if !want[name] && !strings.HasPrefix(filepath.Base(name), TemporaryPrefix) {
			return fmt.Errorf("%s is left", name)
		}
	}
	s, err := Look(m, out)
	if err == nil && !s.Whole {
		err = fmt.Errorf("not whole: %+v", s)
	}
	return err
}

// passages are the ways from one version to another. The two outputs have the
// same size, and in the last pair the same head and tail.
func passages(t *testing.T) (all []*passage, src *os.File) {
	path := filepath.Join(t.TempDir(), "src")
	if err := os.WriteFile(path, []byte("copyrest"), 0o666); err != nil {
		t.Fatal(err)
	}
	src, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { src.Close() })
	ends := strings.Repeat("e", QuickSpan)
	plain := version{"": "copy old text"}
	both := version{"": "copy old text", ".rejects.csv": "old r", ".columns.csv": "old c"}
	pairs := []passage{
		{old: nil, new: version{"": "copy new text"}},
		{old: nil, new: version{"": "copy new text", ".rejects.csv": "new r"}},
		{old: plain, new: version{"": "copy new text", ".rejects.csv": "new r"}},
		{old: both, new: version{"": "copy new text"}},
		{old: both, new: version{"": "copy new text", ".rejects.csv": "new r", ".columns.csv": "old c"}},
		{old: version{"": "copy" + ends + "old" + ends, ".rejects.csv": "r"}, new: version{"": "copy" + ends + "new" + ends}},
	}
	for i := range pairs {
		p := &pairs[i]
		p.oldManifest = "-"
		if p.old != nil {
			p.oldManifest = p.old.manifest(t, src)
		}
		p.newManifest = p.new.manifest(t, src)
		all = append(all, p)
	}
	return all, src
}

// before returns a model in which the old version stands, durably.
func (p *passage) before(t *testing.T, src *os.File) *faulty.Disk {
	m := faulty.New("/d")
	if p.old != nil {
		if err := p.old.publish(m, src); err != nil {
			t.Fatal(err)
		}
	}
	m = m.AfterCut(^uint(0), faulty.Kept)
	return m
}

// TestEveryFault lets each operation of a publication fail in each way, without
// a crash: the target holds one of the three states, the old one untouched, and
// the next run ends in the new one.
func TestEveryFault(t *testing.T) {
	all, src := passages(t)
	tried, states := 0, map[string]int{}
	for i, p := range all {
		for _, how := range []faulty.Fault{faulty.Fail, faulty.Short, faulty.Late} {
			for n := 1; ; n++ {
				m := p.before(t, src)
				m.Break(n, how)
				aborting, err := p.new.publishCounting(m, src)
				if m.Count() < n {
					break // there is no operation n
				}
				tried++
				where := fmt.Sprintf("passage %d, %v at operation %d (%v)", i, how, n, err)
				state, bad := p.state(m)
				if bad != nil {
					t.Fatalf("%s: %v", where, bad)
				}
				states[state]++
				if err == nil && state != "new" {
					t.Fatalf("%s: success in state %q", where, state)
				}
				if how != faulty.Late && state == "old" && n <= aborting {
					if err := p.wantOld(m); err != nil { // nothing went wrong in cleaning up
						t.Fatalf("%s: %v", where, err)
					}
				}
				m.Break(0, faulty.None)
				if err := p.new.publish(m, src); err != nil {
					t.Fatalf("%s: the next run: %v", where, err)
				}
				if err := p.wantNew(m); err != nil {
					t.Fatalf("%s: after the next run: %v", where, err)
				}
			}
		}
	}
	t.Logf("%d faults; states afterwards: %v", tried, states)
}

// TestEveryCrash cuts the power before each operation of a publication, in
// every way the disk can then look, and again before each operation of the
// recovery.
func TestEveryCrash(t *testing.T) {
	all, src := passages(t)
	tried, states := 0, map[string]int{}
	for i, p := range all {
		seen, killed := map[[32]byte]bool{}, map[[32]byte]bool{} // the same disk again tells nothing new
		for n, done := 1, false; !done; n++ {
			m := p.before(t, src)
			m.Break(n, faulty.Crash)
			if err := p.new.publish(m, src); err == nil {
				done = true // and the power is cut after the last one
			}
			// The process may die without the machine: then what it saw stays,
			// and the cut comes later.
			if key := m.Image(); m.Read(PendingPath(out)) != "-" && !killed[key] {
				killed[key] = true
				tried += p.crashInRecovery(t, fmt.Sprintf("passage %d, killed at operation %d", i, n), m)
			}
			m.Cuts(func(what string, after *faulty.Disk) {
				tried++
				where := fmt.Sprintf("passage %d, crash at operation %d, %s", i, n, what)
				state, bad := p.state(after)
				if bad != nil {
					t.Fatalf("%s: %v", where, bad)
				}
				states[state]++
				if done && state != "new" {
					t.Fatalf("%s: success did not last: %q", where, state)
				}
				if disk := after.Image(); seen[disk] {
					return
				} else {
					seen[disk] = true
				}
				if after.Read(PendingPath(out)) != "-" {
					tried += p.crashInRecovery(t, where, after)
				}
				if err := p.new.publish(after, src); err != nil {
					t.Fatalf("%s: the next run: %v", where, err)
				}
				if err := p.wantNew(after); err != nil {
					t.Fatalf("%s: after the next run: %v", where, err)
				}
			})
		}
	}
	t.Logf("%d crashes; states afterwards: %v", tried, states)
}

// crashInRecovery cuts the power a second time, while what the first cut left
// is being recovered.
func (p *passage) crashInRecovery(t *testing.T, where string, first *faulty.Disk) (tried int) {
	seen := map[[32]byte]bool{}
	for n, done := 1, false; !done; n++ {
		m := first.Clone()
		m.Break(n, faulty.Crash)
		if _, err := Recover(t.Context(), m, out); err == nil {
			done = true
		}
		m.Cuts(func(what string, after *faulty.Disk) {
			tried++
			if _, bad := p.state(after); bad != nil {
				t.Fatalf("%s; then in recovery at operation %d, %s: %v", where, n, what, bad)
			}
			if seen[after.Image()] {
				return
			}
			seen[after.Image()] = true
			s, err := Recover(t.Context(), after, out)
			if err != nil || s.Pending || s.InTheWay != "" {
				t.Fatalf("%s; then in recovery at operation %d, %s: recovered to %+v, %v", where, n, what, s, err)
			}
		})
	}
	return tried
}
