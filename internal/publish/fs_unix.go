//go:build unix

package publish

import (
	"errors"
	"io/fs"
	"os"

	"golang.org/x/sys/unix"
)

// duplicate returns a second descriptor of the same open file, which lives on
// when the caller closes f. Only ReadAt may be used on it: the two share one
// file offset.
func duplicate(f *os.File) (*os.File, error) {
	raw, err := f.SyscallConn()
	if err != nil {
		return nil, err
	}
	fd := -1
	var dupErr error
	if err := raw.Control(func(old uintptr) {
		fd, dupErr = unix.FcntlInt(old, unix.F_DUPFD_CLOEXEC, 0)
	}); err != nil {
		return nil, err
	}
	if dupErr != nil {
		return nil, &fs.PathError{Op: "dup", Path: f.Name(), Err: dupErr}
	}
	return os.NewFile(uintptr(fd), f.Name()), nil
}

// renameAfterLook stands in for a rename that replaces nothing, where the
// system has none: another process could make the file between the two calls.
func renameAfterLook(from, to string) error {
	if _, err := os.Lstat(to); err == nil {
		return &os.LinkError{Op: "rename", Old: from, New: to, Err: unix.EEXIST}
	}
	return os.Rename(from, to)
}

// removeFile unlinks a file. Unlike os.Remove it never removes a directory.
func removeFile(path string) error {
	if err := unix.Unlink(path); err != nil {
		return &fs.PathError{Op: "remove", Path: path, Err: err}
	}
	return nil
}

// cannotSyncDir tells a filesystem that has no way to sync a directory (some
// network and user-space ones) from one that tried and failed.
func cannotSyncDir(err error) bool {
	return errors.Is(err, unix.EINVAL) || errors.Is(err, unix.ENOTSUP) || errors.Is(err, unix.ENOSYS)
}

// processGone reports whether this host has no process pid. One that belongs
// to somebody else is there, even where /proc hides it.
func processGone(pid int) bool {
	return errors.Is(unix.Kill(pid, 0), unix.ESRCH)
}

// diskFault reports whether an error is the disk's, or its quota's, rather
// than a matter of names and permissions.
func diskFault(err error) bool {
	for _, e := range []error{unix.ENOSPC, unix.EDQUOT, unix.EIO, unix.EFBIG, unix.EMFILE, unix.ENFILE} {
		if errors.Is(err, e) {
			return true
		}
	}
	return false
}

// cannotLock tells a filesystem without locks from a lock that is held.
func cannotLock(err error) bool {
	for _, e := range []error{unix.ENOLCK, unix.ENOSYS, unix.ENOTSUP, unix.EOPNOTSUPP, unix.EINVAL} {
		if errors.Is(err, e) {
			return true
		}
	}
	return false
}
