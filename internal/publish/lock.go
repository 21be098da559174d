package publish

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"os"
	"path/filepath"
	"time"

	"github.com/gofrs/flock"

	"catenrich/internal/fault"
)

// LockDir is the directory, inside an output directory, that holds the lock
// files. They are never removed: a lock file that goes away while another
// process waits for it makes two holders.
const LockDir = ".catenrich"

// lockPoll is how often a waiting run looks again.
const lockPoll = 100 * time.Millisecond

// A Lock keeps other runs, on this host or on others that share the
// filesystem, from doing the same work at the same time. Nothing but time is
// lost where it does not hold.
type Lock struct {
	file    *flock.Flock
	Warning error // set if the filesystem has no locks, and this one holds nobody off
}

// Acquire takes the lock for name in dir, which it makes if there is none. Two
// outputs that share a dir need different names: their paths below it. While another run holds the lock it waits, or returns a [fault.TryAgain] if
// wait is false. It stops waiting when ctx ends.
func Acquire(ctx context.Context, dir, name string, wait bool) (*Lock, error) {
	locks := filepath.Join(dir, LockDir)
	if err := makeDir(OS, locks); err != nil {
		return nil, cannotMake(locks, err)
	}
	key := sha256.Sum256([]byte(name))
	path := filepath.Join(locks, hex.EncodeToString(key[:16])+".lock")
	file := flock.New(path, flock.SetFlag(os.O_RDWR|os.O_CREATE), flock.SetPermissions(0o666))
	var held bool
	var err error
	if wait {
		held, err = file.TryLockContext(ctx, lockPoll)
	} else {
		held, err = file.TryLock()
	}
	switch {
	case held:
		return &Lock{file: file}, nil
	case err == nil:
		file.Close()
		return nil, fault.TryAgain.Errorf("%s in %s is being written by another run: try again later, or wait with --wait", name, dir)
	}
	file.Close()
	switch {
	case ctx.Err() != nil:
		return nil, ctx.Err()
	case cannotLock(err):
		return &Lock{Warning: fmt.Errorf("%s: this filesystem has no locks (%w): runs at the same time would do the same work twice", dir, plain(err))}, nil
	}
	return nil, cannotMake("the lock "+path, err)
}

// Release lets the next run in. It may be called on a nil Lock, and twice.
func (l *Lock) Release() error {
	if l == nil || l.file == nil {
		return nil
	}
	return fault.IO.Wrap(l.file.Close())
}
