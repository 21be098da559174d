package publish

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"path/filepath"

	"catenrich/internal/fault"
)

// Suffixes are the sidecars that an output can have, by what is added to its
// name: the records that have no row, and the description of the columns.
// Nothing else beside an output is ever replaced or removed, but a report that
// [Put] made.
var Suffixes = []string{".columns.csv", ".rejects.csv"}

// Sidecars lists the paths of the sidecars that target can have.
func Sidecars(target string) []string {
	all := make([]string, len(Suffixes))
	for i, suffix := range Suffixes {
		all[i] = target + suffix
	}
	return all
}

// ManifestPath and PendingPath name an output's manifest, and the manifest of
// an output that is just being moved into place.
func ManifestPath(target string) string { return target + ".manifest.json" }

// PendingPath is described at [ManifestPath].
func PendingPath(target string) string { return target + ".manifest.pending" }

// maxManifest bounds what is read into memory on the word of a file's name.
const maxManifest = 64 << 20

// A State is what stands under an output's name and beside it.
type State struct {
	Exists  bool // something has the output's name
	Ours    bool // it is the file that the manifest, or a pending one, describes
	Whole   bool // so are all sidecars, none is missing, and nothing is pending
	Pending bool // a publication was begun and not finished

	// Manifest is the text of the manifest that stands beside the output,
	// whether or not it describes it; nil if there is none.
	Manifest []byte

	// InTheWay says what Begin would refuse to replace and why; "" if nothing.
	InTheWay string

	manifest, pending *Record // nil if absent or unreadable
	pendingText       []byte
	output            fs.FileInfo // nil if absent
}

// Look says what stands at target. It changes nothing, and reads of each file
// only what its quick fingerprint needs. An error means that it could not look.
func Look(fsys FS, target string) (State, error) {
	s, err := look(fsys, target)
	if err != nil {
		return s, fault.IO.Wrap(fmt.Errorf("looking at %s: %w", target, plain(err)))
	}
	return s, nil
}

func look(fsys FS, target string) (s State, err error) {
	// Another run may publish just now. What is read first is read again at
	// the end: if it has changed, what was seen between belongs to neither.
	for range 5 {
		if s, err = snapshot(fsys, target); err != nil {
			return s, err
		}
		manifest, err := readSmall(fsys, ManifestPath(target))
		if err != nil {
			return s, err
		}
		pending, err := readSmall(fsys, PendingPath(target))
		if err != nil {
			return s, err
		}
		if bytes.Equal(manifest, s.Manifest) && bytes.Equal(pending, s.pendingText) {
			break
		}
	}
	return s, nil
}

func snapshot(fsys FS, target string) (s State, err error) {
	if s.Manifest, err = readSmall(fsys, ManifestPath(target)); err != nil {
		return s, err
	}
	if s.pendingText, err = readSmall(fsys, PendingPath(target)); err != nil {
		return s, err
	}
	s.Pending = s.pendingText != nil
	if s.Pending {
		s.pending, _ = parseRecord(s.pendingText)
	}
	if s.Manifest != nil {
		var bad error
		if s.manifest, bad = parseRecord(s.Manifest); bad != nil {
			s.block("%s is not a manifest of ours (%v)", ManifestPath(target), bad)
		}
	}
	if s.output, err = fsys.Lstat(target); errors.Is(err, fs.ErrNotExist) {
		s.output, err = nil, nil
	}
	if err != nil {
		return s, err
	}
	if err := s.lookAtOutput(fsys, target); err != nil {
		return s, err
	}
	return s, s.lookAtSidecars(fsys, target)
}

// block notes the first thing that stands in the way.
func (s *State) block(format string, args ...any) {
	if s.InTheWay == "" {
		s.InTheWay = fmt.Sprintf(format, args...)
	}
}

func (s *State) lookAtOutput(fsys FS, target string) error {
	if s.output == nil {
		return nil
	}
	s.Exists = true
	switch mode := s.output.Mode(); {
	case mode&fs.ModeSymlink != 0:
		s.block("%s is a symbolic link", target)
		return nil
	case !mode.IsRegular():
		s.block("%s is not a file", target)
		return nil
	}
	var byManifest, byPending bool
	var err error
	if s.manifest != nil {
		if byManifest, err = s.manifest.Output.matches(fsys, target, s.output, Quick); err != nil {
			return err
		}
	}
	if s.pending != nil {
		if byPending, err = s.pending.Output.matches(fsys, target, s.output, Quick); err != nil {
			return err
		}
	}
	s.Ours, s.Whole = byManifest || byPending, byManifest && !s.Pending
	if !s.Ours {
		s.block("%s exists and is not an output that %s describes", target, ManifestPath(target))
	}
	return nil
}

// A reading digests the first size bytes of a file: [Quick] or [Full].
type reading func(f io.ReaderAt, size int64) (Digest, error)

// fullUntil is [Full] until ctx ends.
func fullUntil(ctx context.Context) reading {
	return func(f io.ReaderAt, size int64) (Digest, error) { return Full(Until(ctx, f), size) }
}

// matches compares the file at path with what a record says of it, by its size
// and one of its digests.
func (f FileInfo) matches(fsys FS, path string, info fs.FileInfo, read reading) (bool, error) {
	if !info.Mode().IsRegular() || info.Size() != f.Size {
		return false, nil
	}
	file, err := fsys.Open(path)
	if errors.Is(err, fs.ErrNotExist) {
		return false, nil // it went meanwhile
	}
	if err != nil {
		return false, err
	}
	defer file.Close()
	sum, err := read(file, f.Size)
	if errors.Is(err, io.ErrUnexpectedEOF) {
		return false, nil // it shrank meanwhile
	}
	return err == nil && (sum == f.SHA256 || sum == f.Quick), err
}

// lookAtSidecars compares every possible sidecar with the manifest. One that
// no manifest names is somebody else's file.
func (s *State) lookAtSidecars(fsys FS, target string) error {
	for _, suffix := range Suffixes {
		var want FileInfo
		var listed, started bool
		if s.manifest != nil {
			want, listed = s.manifest.sidecar(suffix)
		}
		if s.pending != nil {
			_, started = s.pending.sidecar(suffix)
		}
		info, err := fsys.Lstat(target + suffix)
		switch {
		case errors.Is(err, fs.ErrNotExist):
			s.Whole = s.Whole && !listed
			continue
		case err != nil:
			return err
		case !info.Mode().IsRegular():
			s.block("%s is not a file", target+suffix)
		case !listed && !started:
			s.block("%s exists and is not a sidecar that %s lists", target+suffix, ManifestPath(target))
		}
		same := false
		if listed {
			if same, err = want.matches(fsys, target+suffix, info, Quick); err != nil {
				return err
			}
		}
		s.Whole = s.Whole && same
	}
	return nil
}

// Recover brings to an end what a crash interrupted at target, and says what
// stands there then. A pending manifest is finished if the output is the one
// it describes, by the SHA-256 of the whole file: two versions of an output
// can agree in size, head and tail. Otherwise it is removed, with the sidecars
// that were published ahead of their output, and what was there before stands.
//
// The caller holds the output's lock, where there are locks.
func Recover(ctx context.Context, fsys FS, target string) (State, error) {
	s, err := look(fsys, target)
	if err == nil && s.Pending {
		if err = resolve(ctx, fsys, target, &s); err == nil {
			s, err = look(fsys, target)
		}
	}
	if err != nil {
		return s, fault.IO.Wrap(fmt.Errorf("recovering %s: %w", target, plain(err)))
	}
	return s, nil
}

func resolve(ctx context.Context, fsys FS, target string, s *State) error {
	finished := false
	if s.pending != nil && s.output != nil {
		var err error
		if finished, err = s.pending.Output.matches(fsys, target, s.output, fullUntil(ctx)); err != nil {
			return err
		}
	}
	if finished {
		return promote(fsys, target, s.pending)
	}
	return retreat(fsys, target, s)
}

// promote is the last step of publication: sidecars of an earlier output go,
// and only when they are gone for good the pending manifest gets its name.
func promote(fsys FS, target string, r *Record) error {
	dir := filepath.Dir(target)
	// The output's rename may have been seen before it was durable.
	if err := fsys.SyncDir(dir); err != nil {
		return err
	}
	if err := removeStale(fsys, target, r); err != nil {
		return err
	}
	err := fsys.Rename(PendingPath(target), ManifestPath(target))
	if err != nil && !errors.Is(err, fs.ErrNotExist) { // another run may have done it
		return err
	}
	return fsys.SyncDir(dir)
}

// removeStale removes the sidecars of target that r does not list, for good.
func removeStale(fsys FS, target string, r *Record) error {
	removed := false
	for _, suffix := range Suffixes {
		if _, listed := r.sidecar(suffix); listed {
			continue
		}
		err := fsys.Remove(target + suffix)
		if err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
		removed = removed || err == nil
	}
	if !removed {
		return nil
	}
	return fsys.SyncDir(filepath.Dir(target))
}

// retreat removes a pending manifest whose output never came, after the
// sidecars that came before it: without the manifest they would be nobody's.
func retreat(fsys FS, target string, s *State) error {
	dir := filepath.Dir(target)
	removed := false
	for _, suffix := range Suffixes {
		if s.pending == nil {
			break
		}
		if _, started := s.pending.sidecar(suffix); !started {
			continue
		}
		if s.manifest != nil {
			if _, listed := s.manifest.sidecar(suffix); listed {
				continue // the manifest still owns the name
			}
		}
		err := fsys.Remove(target + suffix)
		if err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
		removed = removed || err == nil
	}
	if removed {
		if err := fsys.SyncDir(dir); err != nil {
			return err
		}
	}
	if err := fsys.Remove(PendingPath(target)); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	return fsys.SyncDir(dir)
}

// ReadManifest is the text of the manifest that stands beside target, whether
// or not it describes it; nil if there is none.
func ReadManifest(fsys FS, target string) ([]byte, error) {
	text, err := readSmall(fsys, ManifestPath(target))
	if err != nil {
		return nil, fault.IO.Wrap(fmt.Errorf("reading the manifest of %s: %w", target, plain(err)))
	}
	return text, nil
}

// readSmall reads a manifest; nil if there is none, or no plain file.
func readSmall(fsys FS, path string) ([]byte, error) {
	info, err := fsys.Lstat(path)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	if !info.Mode().IsRegular() || info.Size() > maxManifest {
		return []byte{}, nil // there is something, and it is no manifest
	}
	f, err := fsys.Open(path)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	defer f.Close()
	text, err := io.ReadAll(io.NewSectionReader(f, 0, maxManifest))
	if text == nil {
		text = []byte{}
	}
	return text, err
}
