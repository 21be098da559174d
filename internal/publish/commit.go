package publish

import (
	"bytes"
	"errors"
	"fmt"
	"io/fs"
	"maps"
	"slices"

	"catenrich/internal/fault"
)

// Commit publishes what was created. When all files are durable it asks for
// the manifest, giving it what they are; a manifest that does not repeat this
// is a [fault.Internal]. After an error the target is as it was, or complete
// but for the last step, which the next [Recover] makes.
func (r *Release) Commit(manifest func(Record) ([]byte, error)) error {
	r.mu.Lock()
	defer r.mu.Unlock()
	if r.ended {
		return fault.Internal.Errorf("publishing %s: it was ended before", r.target)
	}
	if err := r.commit(manifest); err != nil {
		return fault.IO.Wrap(fmt.Errorf("publishing %s: %w", r.target, plain(err)))
	}
	r.ended = true
	r.cancel()
	return nil
}

func (r *Release) commit(manifest func(Record) ([]byte, error)) error {
	record, err := r.finishOutputs()
	if err != nil {
		return err
	}
	text, err := manifest(record)
	if err != nil {
		return err
	}
	if again, err := parseRecord(text); err != nil || !again.equal(record) {
		return fault.Internal.Errorf("the manifest does not say what the files are (%v)", err)
	}
	temp, err := r.writeManifest(text)
	if err != nil {
		return err
	}
	if err := r.stepPending(temp); err != nil {
		return err
	}
	if err := r.stepOutputs(record); err != nil {
		return err
	}
	return r.stepManifest(record, text)
}

// finishOutputs is step 1 but for the manifest.
func (r *Release) finishOutputs() (Record, error) {
	record := Record{Sidecars: []Sidecar{}}
	if r.outputs[""] == nil {
		return record, fault.Internal.Errorf("nothing was written")
	}
	for _, suffix := range slices.Sorted(maps.Keys(r.outputs)) {
		info, err := r.outputs[suffix].finish()
		if err != nil {
			return record, err
		}
		if suffix == "" {
			record.Output = info
		} else {
			record.Sidecars = append(record.Sidecars, Sidecar{suffix, info})
		}
	}
	return record, nil
}

// writeManifest writes a durable temporary.
func (r *Release) writeManifest(text []byte) (path string, err error) {
	path, f, err := r.temporary()
	if err != nil {
		return path, err
	}
	n, err := f.Write(text)
	if err == nil && n < len(text) {
		err = fmt.Errorf("writing the manifest: short write")
	}
	if err == nil {
		err = f.Sync()
	}
	return path, errors.Join(err, f.Close())
}

// rename moves a temporary into place.
func (r *Release) rename(temp, to string) error {
	if err := r.fsys.Rename(temp, to); err != nil {
		return err
	}
	delete(r.temps, temp)
	return nil
}

// stepPending is step 2. The long work lies behind us: look again whether the
// target is still ours to replace.
func (r *Release) stepPending(temp string) error {
	state, err := Look(r.fsys, r.target)
	if err != nil {
		return err
	}
	if err := r.refuse(state); err != nil {
		return err
	}
	r.started = true
	if err := r.rename(temp, PendingPath(r.target)); err != nil {
		return err
	}
	return r.fsys.SyncDir(r.dir)
}

// stepOutputs is step 3.
func (r *Release) stepOutputs(record Record) error {
	for _, s := range record.Sidecars {
		if err := r.rename(r.outputs[s.Suffix].temp, r.target+s.Suffix); err != nil {
			return err
		}
	}
	if len(record.Sidecars) > 0 {
		if err := r.fsys.SyncDir(r.dir); err != nil {
			return err
		}
	}
	if err := r.renameOutput(); err != nil {
		return err
	}
	return r.fsys.SyncDir(r.dir)
}

// renameOutput puts the output in place. Where nothing was, a file that turned
// up since stepPending looked is kept, unless another run made it.
func (r *Release) renameOutput() error {
	temp := r.outputs[""].temp
	if _, err := r.fsys.Lstat(r.target); errors.Is(err, fs.ErrNotExist) {
		err := r.fsys.RenameNew(temp, r.target)
		if err == nil {
			delete(r.temps, temp)
			r.moved = true
			return nil
		}
		if !errors.Is(err, fs.ErrExist) {
			return err
		}
	}
	state, err := Look(r.fsys, r.target)
	if err != nil {
		return err
	}
	if err := r.refuse(state); err != nil {
		return err
	}
	err = r.rename(temp, r.target)
	r.moved = err == nil
	return err
}

// stepManifest is step 4. Where there are no locks, another run of the same job
// may have put its own pending manifest over ours, or taken ours away: then
// the manifest gets its name from a temporary of its own.
func (r *Release) stepManifest(record Record, text []byte) error {
	if err := removeStale(r.fsys, r.target, &record); err != nil {
		return err
	}
	pending, err := readSmall(r.fsys, PendingPath(r.target))
	if err != nil {
		return err
	}
	done := false
	if bytes.Equal(pending, text) {
		err := r.fsys.Rename(PendingPath(r.target), ManifestPath(r.target))
		if err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
		done = err == nil
	}
	if !done {
		if err := r.manifestWithoutPending(record, text); err != nil {
			return err
		}
	}
	return r.fsys.SyncDir(r.dir)
}

func (r *Release) manifestWithoutPending(record Record, text []byte) error {
	if have, err := readSmall(r.fsys, ManifestPath(r.target)); err != nil || bytes.Equal(have, text) {
		return err
	}
	info, err := r.fsys.Lstat(r.target)
	if err != nil {
		return err
	}
	if ours, err := record.Output.matches(r.fsys, r.target, info, fullUntil(r.ctx)); err != nil || !ours {
		return errors.Join(err, fault.TryAgain.Errorf("another run replaced the output meanwhile"))
	}
	temp, err := r.writeManifest(text)
	if err != nil {
		return err
	}
	return r.rename(temp, ManifestPath(r.target))
}
