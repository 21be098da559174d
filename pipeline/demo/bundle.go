package demo

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"

	"catenrich/internal/fault"
)

// A bundle is a set of files that appear together, or not at all, and replace
// nothing but their like.
type bundle struct {
	dir    string
	drafts []draft
}

// A draft is a file that waits under another name.
type draft struct {
	path string
	file *os.File
}

func newBundle(dir string) *bundle { return &bundle{dir: dir} }

// create begins a file of the bundle.
func (b *bundle) create(name string) (io.Writer, error) {
	path := join(b.dir, name)
	if err := os.MkdirAll(filepath.Dir(path), 0o777); err != nil {
		return nil, fault.CantCreate.Errorf("making the demo's directory: %w", err)
	}
	temporary := filepath.Join(filepath.Dir(path), fmt.Sprintf(".%s.%d.tmp", filepath.Base(path), os.Getpid()))
	file, err := os.OpenFile(temporary, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o666)
	if err != nil {
		return nil, fault.CantCreate.Errorf("writing the demo: %w", err)
	}
	b.drafts = append(b.drafts, draft{path, file})
	return file, nil
}

// add makes a file of the bundle.
func (b *bundle) add(name string, content []byte) error {
	w, err := b.create(name)
	if err != nil {
		return err
	}
	if _, err := w.Write(content); err != nil {
		return fault.IO.Errorf("writing the demo: %w", err)
	}
	return nil
}

// commit puts the files in place and returns their paths, sorted. If one of
// the places is taken by something else, none is put.
func (b *bundle) commit() ([]string, error) {
	var errs []error
	paths := make([]string, 0, len(b.drafts))
	for _, d := range b.drafts {
		paths = append(paths, d.path)
		if err := d.file.Close(); err != nil {
			errs = append(errs, fault.IO.Errorf("writing %s: %w", d.path, err))
		} else if err := d.vacant(); err != nil {
			errs = append(errs, err)
		}
	}
	if len(errs) > 0 {
		return nil, errors.Join(errs...)
	}
	for _, d := range b.drafts {
		if err := os.Rename(d.file.Name(), d.path); err != nil {
			return nil, fault.CantCreate.Errorf("writing the demo: %w", err)
		}
	}
	slices.Sort(paths)
	return paths, nil
}

// vacant returns an error if anything but a file with the draft's bytes is in
// its place.
func (d *draft) vacant() error {
	info, err := os.Lstat(d.path)
	if errors.Is(err, os.ErrNotExist) {
		return nil
	}
	if err != nil {
		return fault.CantCreate.Errorf("writing the demo: %w", err)
	}
	same := false
	if info.Mode().IsRegular() {
		if same, err = sameBytes(d.file.Name(), d.path); err != nil {
			return fault.IO.Errorf("comparing the demo with what is there: %w", err)
		}
	}
	if !same {
		return fault.CantCreate.Errorf("%s exists and is not what the demo would write: it is left alone; choose another directory", d.path)
	}
	return nil
}

// sameBytes compares two files.
func sameBytes(pathA, pathB string) (bool, error) {
	a, err := os.Open(pathA)
	if err != nil {
		return false, err
	}
	defer a.Close()
	b, err := os.Open(pathB)
	if err != nil {
		return false, err
	}
	defer b.Close()
	bufA, bufB := make([]byte, 1<<16), make([]byte, 1<<16)
	for {
		n, errA := io.ReadFull(a, bufA)
		m, errB := io.ReadFull(b, bufB)
		if !bytes.Equal(bufA[:n], bufB[:m]) {
			return false, nil
		}
		switch end := errors.Is(errA, io.EOF) || errors.Is(errA, io.ErrUnexpectedEOF); {
		case errA == nil && errB == nil:
		case end && errB != nil:
			return true, nil
		default:
			return false, errors.Join(errA, errB)
		}
	}
}

// discard removes the drafts.
func (b *bundle) discard() {
	for _, d := range b.drafts {
		d.file.Close()
		os.Remove(d.file.Name()) // what cannot be removed cannot be helped
	}
}
