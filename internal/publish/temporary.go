package publish

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"sync/atomic"
	"time"

	"catenrich/internal/fault"
)

// A temporary's name says which process made it:
//
//	.catenrich_HOST_BOOT_PID_START_N.tmp
//
// so that a later run can tell one that is being written from one that a crash
// left. No underscore stands inside a part.
const (
	temporaryPrefix = ".catenrich_"
	temporarySuffix = ".tmp"
)

// oldAge is when a temporary whose process cannot be judged from here, because
// it ran on another host or in another container, counts as left behind. Its
// age is counted from the last write to it.
const oldAge = 7 * 24 * time.Hour

// An owner is a process, named so that no other process ever has its name.
type owner struct {
	host, boot string
	pid        int
	start      uint64 // 0 if unknown
}

// self is this process.
var self = sync.OnceValue(func() owner {
	host, err := os.Hostname()
	if err != nil || host == "" {
		host = "unknown"
	}
	pid := os.Getpid()
	return owner{host: namePart(host), boot: namePart(thisBoot()), pid: pid, start: startTime(pid)}
})

// namePart keeps of s what may stand in a file name, at most 64 bytes.
func namePart(s string) string {
	return strings.Map(func(r rune) rune {
		if r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z' || r >= '0' && r <= '9' || r == '.' {
			return r
		}
		return '-'
	}, s[:min(len(s), 64)])
}

var temporaries atomic.Uint64

// temporaryPath returns a path in dir that no process used before.
func temporaryPath(dir string) string {
	o := self()
	return filepath.Join(dir, fmt.Sprintf("%s%s_%s_%d_%d_%d%s",
		temporaryPrefix, o.host, o.boot, o.pid, o.start, temporaries.Add(1), temporarySuffix))
}

// temporaryOwner reads the owner from the name of a temporary.
func temporaryOwner(name string) (o owner, ok bool) {
	rest, found := strings.CutPrefix(name, temporaryPrefix)
	if !found {
		return o, false
	}
	if rest, found = strings.CutSuffix(rest, temporarySuffix); !found {
		return o, false
	}
	parts := strings.Split(rest, "_")
	if len(parts) != 5 {
		return o, false
	}
	var err [3]error
	o.host, o.boot = parts[0], parts[1]
	o.pid, err[0] = strconv.Atoi(parts[2])
	o.start, err[1] = strconv.ParseUint(parts[3], 10, 64)
	_, err[2] = strconv.ParseUint(parts[4], 10, 64)
	return o, errors.Join(err[:]...) == nil && o.pid > 0
}

// abandoned reports whether nobody writes a temporary of owner o any more.
//
// On this host and boot, in the same process namespace, the process table
// decides. From an earlier boot of this host it is left behind if nothing wrote
// to it since this boot: two hosts may have been given one name. Everything
// else is judged by age.
func (o owner) abandoned(modified, now time.Time) bool {
	me := self()
	if o.host == me.host && o.boot == me.boot && me.start != 0 {
		if processGone(o.pid) {
			return true
		}
		began := startTime(o.pid)
		return began != 0 && o.start != 0 && began != o.start // the pid came again
	}
	if o.host == me.host && o.boot != me.boot && sameSpace(o.boot, me.boot) {
		if boot := bootTime(); !boot.IsZero() && modified.Before(boot) {
			return true
		}
	}
	return now.Sub(modified) > oldAge
}

// sameSpace reports whether two boots, as [thisBoot] names them, have the same
// process namespace. The first one of a kernel always has the same number.
func sameSpace(a, b string) bool {
	_, a, okA := strings.Cut(a, ".")
	_, b, okB := strings.Cut(b, ".")
	return okA && okB && a == b
}

// Sweep removes from dir the temporaries that crashed runs left there. It does
// not look into directories below, and leaves alone what a process may still
// be writing. A directory that does not exist has none.
func Sweep(fsys FS, dir string) error {
	names, err := fsys.ReadDir(dir)
	if errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	if err != nil {
		return fault.IO.Wrap(fmt.Errorf("looking for leftovers in %s: %w", dir, plain(err)))
	}
	var errs []error
	for _, name := range names {
		o, ok := temporaryOwner(name)
		if !ok {
			continue
		}
		path := filepath.Join(dir, name)
		info, err := fsys.Lstat(path)
		if err != nil || !info.Mode().IsRegular() || !o.abandoned(info.ModTime(), time.Now()) {
			continue // gone meanwhile, or not a file of ours, or in use
		}
		if err := fsys.Remove(path); err != nil && !errors.Is(err, fs.ErrNotExist) {
			errs = append(errs, fmt.Errorf("removing the leftover %s: %w", path, plain(err)))
		}
	}
	return fault.IO.Wrap(errors.Join(errs...))
}
