//go:build unix && !linux

package publish

import (
	"os"
	"time"
)

// Without Linux's calls everything is copied through this process, and a
// temporary whose process may still run is judged by its age.

func copyInKernel(dst, src *os.File, off, n int64, progress func(int64)) (int64, error) {
	return 0, nil
}
func beginWriting(f *os.File, off, n int64) {}
func renameNew(from, to string) error       { return renameAfterLook(from, to) }
func thisBoot() string                      { return "unknown" }
func bootTime() time.Time                   { return time.Time{} }
func startTime(pid int) uint64              { return 0 }
