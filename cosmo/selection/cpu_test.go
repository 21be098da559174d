//go:build unix

package selection

import (
	"syscall"
	"testing"
	"time"
)

// cpu reports nanoseconds of processor time a row, which a busy machine does
// not stretch. Call it before the loop, and its result after.
func cpu(b *testing.B, rows int) func() {
	used := func() time.Duration {
		var u syscall.Rusage
		if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
			b.Fatal(err)
		}
		return time.Duration(u.Utime.Nano() + u.Stime.Nano())
	}
	start := used()
	return func() {
		b.ReportMetric(float64(used()-start)/float64(b.N)/float64(rows), "cpu-ns/row")
	}
}
