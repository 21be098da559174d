package publish

import (
	"context"
	"errors"
	"os"
	"path/filepath"
	"testing"
	"time"
)

// TestStopWhileCopying: a large input, of which nothing is on the disk, is not
// copied or hashed to its end when the run is told to stop, or fails.
func TestStopWhileCopying(t *testing.T) {
	dir := t.TempDir()
	src, err := os.Create(filepath.Join(dir, "src"))
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	const size = 1 << 40
	if err := src.Truncate(size); err != nil {
		t.Skip("this filesystem has no file of a tebibyte: ", err)
	}
	for _, c := range []struct {
		name string
		stop func(o *Output, cancel func()) error
		want error
	}{
		{"told before", func(o *Output, cancel func()) error {
			cancel()
			return o.CopyRange(src, 0, size)
		}, context.Canceled},
		{"told meanwhile", func(o *Output, cancel func()) error {
			time.AfterFunc(50*time.Millisecond, cancel)
			return o.CopyRange(src, 1, size-1) // a part cannot be shared
		}, context.Canceled},
		{"a disk that is full at once", func(o *Output, cancel func()) error {
			full, err := os.OpenFile("/dev/full", os.O_RDWR, 0)
			if err != nil {
				t.Skip("this system has no /dev/full")
			}
			o.file.Close()
			o.file = osFile{File: full}
			return o.CopyRange(src, 1, size-1)
		}, nil},
	} {
		t.Run(c.name, func(t *testing.T) {
			ctx, cancel := context.WithCancel(t.Context())
			defer cancel()
			r, err := Begin(OS, filepath.Join(dir, "out", "o"), Options{Context: ctx})
			if err != nil {
				t.Fatal(err)
			}
			o, err := r.Create("")
			if err != nil {
				t.Fatal(err)
			}
			start := time.Now()
			if err := c.stop(o, cancel); err == nil || c.want != nil && !errors.Is(err, c.want) {
				t.Errorf("copying ends with %v, want %v", err, c.want)
			}
			if err := r.Abort(); err != nil {
				t.Error(err)
			}
			if took := time.Since(start); took > 20*time.Second { // hashing all would take minutes
				t.Errorf("it took %v", took)
			}
			wantFiles(t, filepath.Join(dir, "out"), nil)
		})
	}
}
