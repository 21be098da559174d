// Package publish makes all files that catenrich leaves behind, so that each
// appears complete under its name or not at all: through kill -9, a full disk,
// a power cut, and several runs at once.
//
// Start with [Begin], which refuses what is not ours to replace. It gives a
// [Release]; [Release.Create] gives [Output]s, which hash what is written to
// them; [Release.Commit] moves everything into place. [Recover] finishes or
// undoes what a crash interrupted, [Sweep] removes what it left, [Acquire]
// takes the lock that keeps two runs from doing the same work.
//
// # The steps
//
// Let T be the output's path. All temporaries are in T's directory.
//
//  1. Sidecars, output and manifest are written to temporaries and synced.
//  2. The manifest is renamed to T.manifest.pending. Sync the directory.
//  3. The sidecars are renamed into place. Sync the directory if there are
//     any. The output is renamed to T. Sync the directory.
//  4. Sidecars of an earlier output that the new one does not have are
//     removed. Sync the directory if there are any. T.manifest.pending is
//     renamed to T.manifest.json. Sync the directory.
//
// A crash before the end of step 2 leaves the old output with its manifest;
// during step 3 the old output with its manifest, or the new one with the
// pending manifest; in step 4 the new output with either name of the new
// manifest. In each state the output is described by a manifest beside it,
// which is what makes it ours: [Recover] needs no other knowledge.
//
// A directory's sync comes between any two changes whose order matters, since
// a filesystem may make renames durable in any order.
package publish

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"sync"

	"catenrich/internal/fault"
)

// Options say how a release may be made.
type Options struct {
	// Replace allows an output, sidecar or manifest that is not ours, or that
	// is a symbolic link, to be replaced. The link's own target is not
	// touched. A directory is never replaced.
	Replace bool

	// Context ends copying and hashing, which may take long for a large
	// input, with its own error; nil is never.
	Context context.Context
}

// A Release is one output with its sidecars and manifest, on its way. Create
// may be called from any goroutine; Commit and Abort follow when all writing
// has ended.
type Release struct {
	fsys    FS
	ctx     context.Context
	cancel  context.CancelFunc
	target  string
	dir     string
	replace bool

	mu      sync.Mutex
	outputs map[string]*Output // by suffix
	temps   map[string]bool    // temporaries that exist
	ended   bool
	started bool // a pending manifest was put in place
	moved   bool // the output was renamed: the rest is for Recover
}

// Begin prepares to publish target. It makes the directory if there is none,
// and ends what a crash interrupted. Something that is not ours in target's
// place, or in a sidecar's or the manifest's, is a [fault.CantCreate].
//
// The caller holds the output's lock, where there are locks.
func Begin(fsys FS, target string, o Options) (*Release, error) {
	dir := filepath.Dir(target)
	if err := makeDir(fsys, dir); err != nil {
		return nil, cannotMake(dir, err)
	}
	if o.Context == nil {
		o.Context = context.Background()
	}
	state, err := Recover(o.Context, fsys, target)
	if err != nil {
		return nil, err
	}
	r := &Release{
		fsys: fsys, target: target, dir: dir, replace: o.Replace,
		outputs: map[string]*Output{}, temps: map[string]bool{},
	}
	if err := r.refuse(state); err != nil {
		return nil, err
	}
	r.ctx, r.cancel = context.WithCancel(o.Context)
	return r, nil
}

// refuse is the error for a state that may not be replaced, or nil.
func (r *Release) refuse(s State) error {
	for _, path := range r.places() {
		if info, err := r.fsys.Lstat(path); err == nil && info.IsDir() {
			return fault.CantCreate.Errorf("%s is a directory: choose another output", path)
		}
	}
	if s.InTheWay == "" || r.replace {
		return nil
	}
	return fault.CantCreate.Errorf("%s: move it away, choose another output, or allow it to be replaced with --replace", s.InTheWay)
}

// places lists every path that a release may write.
func (r *Release) places() []string {
	return append([]string{r.target, ManifestPath(r.target), PendingPath(r.target)}, Sidecars(r.target)...)
}

// makeDir makes a directory and those above it, each durable before the next.
func makeDir(fsys FS, dir string) error {
	if _, err := fsys.Lstat(dir); err == nil {
		return nil
	}
	err := fsys.Mkdir(dir)
	if errors.Is(err, fs.ErrNotExist) && filepath.Dir(dir) != dir {
		if err = makeDir(fsys, filepath.Dir(dir)); err == nil {
			err = fsys.Mkdir(dir)
		}
	}
	if errors.Is(err, fs.ErrExist) {
		return nil
	}
	if err != nil {
		return err
	}
	return fsys.SyncDir(filepath.Dir(dir))
}

// cannotMake classifies the failure to make a file or directory.
func cannotMake(what string, err error) error {
	class := fault.CantCreate
	if diskFault(err) {
		class = fault.IO
	}
	return class.Wrap(fmt.Errorf("making %s: %w", what, plain(err)))
}

// plain takes path and operation off an error of package os: our own message
// has the path that the user knows.
func plain(err error) error {
	var path *fs.PathError
	var link *os.LinkError
	switch {
	case errors.As(err, &path):
		return path.Err
	case errors.As(err, &link):
		return link.Err
	}
	return err
}

// Create begins one file of the release: the output itself for "", or a
// sidecar for one of [Suffixes]. A second call with the same suffix panics.
func (r *Release) Create(suffix string) (*Output, error) {
	if suffix != "" && !slices.Contains(Suffixes, suffix) {
		panic("publish: no such sidecar: " + suffix)
	}
	r.mu.Lock()
	defer r.mu.Unlock()
	if r.ended || r.outputs[suffix] != nil {
		panic("publish: Create after the end, or twice, of " + r.target + suffix)
	}
	temp, file, err := r.temporary()
	if err != nil {
		return nil, cannotMake(r.target+suffix, err)
	}
	o := &Output{ctx: r.ctx, fsys: r.fsys, file: file, dir: r.dir, temp: temp, shown: r.target + suffix}
	r.outputs[suffix] = o
	return o, nil
}

// temporary makes an empty file in the release's directory.
func (r *Release) temporary() (path string, f File, err error) {
	path = temporaryPath(r.dir)
	if f, err = r.fsys.Create(path); err == nil {
		r.temps[path] = true
	}
	return path, f, err
}

// Abort removes what is temporary, and a pending manifest whose output did not
// come. After Commit has succeeded, or a second time, it does nothing.
func (r *Release) Abort() error {
	r.mu.Lock()
	defer r.mu.Unlock()
	if r.ended {
		return nil
	}
	r.ended = true
	r.cancel()
	var errs []error
	for _, o := range r.outputs {
		o.close() // what it held is being thrown away
	}
	for temp := range r.temps {
		if err := r.fsys.Remove(temp); err != nil && !errors.Is(err, fs.ErrNotExist) {
			errs = append(errs, fmt.Errorf("removing %s: %w", temp, plain(err)))
		}
	}
	if r.started && !r.moved { // an error may hide a rename that happened: Recover looks
		if _, err := Recover(context.Background(), r.fsys, r.target); err != nil {
			errs = append(errs, err)
		}
	}
	return fault.IO.Wrap(errors.Join(errs...))
}
