package publish

import (
	"bytes"
	"errors"
	"io/fs"
	"path/filepath"

	"catenrich/internal/fault"
)

// Put makes a file that no manifest describes, such as a report, with the
// given text: whole or not at all. What stands there already is replaced if
// ours says that it is an earlier version, or if replace is true; a directory
// never, a symbolic link only with replace, its target untouched. The same
// text is not written again. Its directory must be there.
func Put(fsys FS, path string, text []byte, ours func([]byte) bool, replace bool) error {
	for {
		there, same, err := blocked(fsys, path, text, ours, replace)
		if err != nil || same {
			return err
		}
		err = put(fsys, path, text, there)
		if errors.Is(err, fs.ErrExist) {
			continue // another run was faster: look at what it made
		}
		if err != nil {
			return cannotMake(path, err)
		}
		return nil
	}
}

// MayPut is the error that [Put] would give for what stands at path, or nil.
func MayPut(fsys FS, path string, ours func([]byte) bool, replace bool) error {
	_, _, err := blocked(fsys, path, nil, ours, replace)
	return err
}

// blocked looks at what stands at path.
func blocked(fsys FS, path string, text []byte, ours func([]byte) bool, replace bool) (there, same bool, err error) {
	info, err := fsys.Lstat(path)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return false, false, nil
	case err != nil:
		return false, false, fault.IO.Wrap(err)
	case info.IsDir():
		return true, false, fault.CantCreate.Errorf("%s is a directory: move it away", path)
	}
	old, err := readSmall(fsys, path)
	if err != nil {
		return true, false, fault.IO.Wrap(err)
	}
	regular := info.Mode().IsRegular()
	if regular && text != nil && bytes.Equal(old, text) {
		return true, true, nil
	}
	if !replace && !(regular && ours(old)) {
		return true, false, fault.CantCreate.Errorf("%s exists and was not written by catenrich, or was changed since: move it away, or allow it to be replaced with --replace", path)
	}
	return true, false, nil
}

// put writes a temporary and renames it.
func put(fsys FS, path string, text []byte, there bool) error {
	dir := filepath.Dir(path)
	temp := temporaryPath(dir)
	f, err := fsys.Create(temp)
	if err != nil {
		return err
	}
	_, err = f.Write(text)
	err = errors.Join(err, f.Sync(), f.Close())
	if err == nil && there {
		err = fsys.Rename(temp, path)
	} else if err == nil {
		err = fsys.RenameNew(temp, path)
	}
	if err != nil {
		fsys.Remove(temp)
		return err
	}
	return fsys.SyncDir(dir)
}

// Retract removes a file that [Put] made, before what it speaks of changes. A
// file that is not ours, or none, is left as it is.
func Retract(fsys FS, path string, ours func([]byte) bool) error {
	info, err := fsys.Lstat(path)
	if err != nil || !info.Mode().IsRegular() {
		return nil
	}
	old, err := readSmall(fsys, path)
	if err != nil || !ours(old) {
		return nil
	}
	err = fsys.Remove(path)
	if err == nil || errors.Is(err, fs.ErrNotExist) {
		err = fsys.SyncDir(filepath.Dir(path))
	}
	if err != nil {
		return fault.IO.Errorf("removing %s: %w", path, plain(err))
	}
	return nil
}
