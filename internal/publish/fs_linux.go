package publish

import (
	"bytes"
	"errors"
	"fmt"
	"os"
	"strconv"
	"strings"
	"time"

	"golang.org/x/sys/unix"
)

// copyInKernel appends as many as it can of n bytes of src from off to dst, but
// for what is shared no more than copyStep, without bringing them into this
// process, and tells progress of them as they come, unless they are shared and
// have no need to be written. Fewer with a nil error means that the kernel
// declines, and the caller copies the rest itself.
//
// A whole file at the start of an empty one is shared where the filesystem can
// (FICLONE: btrfs, XFS); copy_file_range shares what block boundaries allow,
// and elsewhere copies from page to page.
func copyInKernel(dst, src *os.File, off, n int64, progress func(int64)) (int64, error) {
	if off == 0 && clone(dst, src, n) {
		return n, nil
	}
	n = min(n, copyStep)
	var done int64
	for done < n {
		from := off + done
		m, err := unix.CopyFileRange(int(src.Fd()), &from, int(dst.Fd()), nil, int(n-done), 0)
		switch {
		case errors.Is(err, unix.EINTR):
			continue
		case declined(err) || (err == nil && m == 0):
			return done, nil
		case err != nil:
			return done, &os.PathError{Op: "copy_file_range", Path: dst.Name(), Err: err}
		}
		done += int64(m)
		progress(int64(m))
	}
	return done, nil
}

// beginWriting starts the writing of a part of f to the disk. It is asked
// without waiting for the end, so an error of the disk is left for the sync.
func beginWriting(f *os.File, off, n int64) {
	raw, err := f.SyscallConn()
	if err != nil {
		return
	}
	raw.Control(func(fd uintptr) { unix.SyncFileRange(int(fd), off, n, unix.SYNC_FILE_RANGE_WRITE) })
}

// clone makes the empty file dst share all n bytes of src, and leaves dst's
// offset behind them.
func clone(dst, src *os.File, n int64) bool {
	if n == 0 {
		return false
	}
	was, err := dst.Seek(0, 1)
	if err != nil || was != 0 {
		return false
	}
	if s, err := src.Stat(); err != nil || s.Size() != n {
		return false
	}
	if unix.IoctlFileClone(int(dst.Fd()), int(src.Fd())) != nil {
		return false
	}
	// src may have grown since it was looked at.
	if dst.Truncate(n) == nil {
		if end, err := dst.Seek(n, 0); err == nil && end == n {
			return true
		}
	}
	return dst.Truncate(0) != nil // start again by copying, unless not even this works
}

// declined lists the errors by which copy_file_range(2) says that it is not
// for these files, as opposed to a fault of the disk.
func declined(err error) bool {
	for _, e := range []error{unix.EXDEV, unix.EINVAL, unix.ENOSYS, unix.EOPNOTSUPP, unix.EPERM, unix.EBADF, unix.ETXTBSY} {
		if errors.Is(err, e) {
			return true
		}
	}
	return false
}

func renameNew(from, to string) error {
	err := unix.Renameat2(unix.AT_FDCWD, from, unix.AT_FDCWD, to, unix.RENAME_NOREPLACE)
	if err == nil {
		return nil
	}
	if errors.Is(err, unix.EINVAL) || errors.Is(err, unix.ENOSYS) || errors.Is(err, unix.ENOTSUP) {
		return renameAfterLook(from, to) // NFS, for one
	}
	return &os.LinkError{Op: "rename", Old: from, New: to, Err: err}
}

// thisBoot names the running kernel's boot and the process namespace in which
// a pid has its meaning: containers of one host share the first, not the
// second.
func thisBoot() string {
	id, _ := os.ReadFile("/proc/sys/kernel/random/boot_id")
	space, _ := os.Readlink("/proc/self/ns/pid") // pid:[4026531836]
	short := strings.ReplaceAll(string(bytes.TrimSpace(id)), "-", "")
	return fmt.Sprintf("%.16s.%s", short, strings.Trim(strings.TrimPrefix(space, "pid:"), "[]"))
}

// bootTime returns when this kernel started; zero if it will not say.
func bootTime() time.Time {
	stat, _ := os.ReadFile("/proc/stat")
	for line := range bytes.Lines(stat) {
		if rest, ok := bytes.CutPrefix(line, []byte("btime ")); ok {
			if s, err := strconv.ParseInt(string(bytes.TrimSpace(rest)), 10, 64); err == nil {
				return time.Unix(s, 0)
			}
		}
	}
	return time.Time{}
}

// startTime returns when process pid started, in clock ticks since boot (field
// 22 of /proc/PID/stat, proc(5)), or 0 if that cannot be seen. With the pid it
// names a process for good: pids come again.
func startTime(pid int) uint64 {
	stat, err := os.ReadFile(fmt.Sprintf("/proc/%d/stat", pid))
	if err != nil {
		return 0
	}
	// Field 2 is the command in parentheses and may hold anything.
	fields := bytes.Fields(stat[bytes.LastIndexByte(stat, ')')+1:])
	if len(fields) < 20 {
		return 0
	}
	ticks, _ := strconv.ParseUint(string(fields[19]), 10, 64)
	return ticks
}
