package publish

import (
	"bytes"
	"os"
	"path/filepath"
	"testing"
)

// TestWriteBackCountsAndStops: the goroutine starts with the first large span,
// spans follow on each other without gaps, and it is gone once the file is
// closed. That the bytes are right, the tests of outputs show.
func TestWriteBackCountsAndStops(t *testing.T) {
	f, err := OS.Create(filepath.Join(t.TempDir(), "out"))
	if err != nil {
		t.Fatal(err)
	}
	back := f.(osFile).back
	block := bytes.Repeat([]byte("row\n"), writeBackStep/16)
	for written := int64(0); written < 5*writeBackStep; {
		n, err := f.Write(block)
		if written += int64(n); err != nil {
			t.Fatal(err)
		}
		if back.written != written || back.handed > written || written-back.handed >= 5*writeBackStep {
			t.Fatalf("of %d bytes it counts %d, and handed on %d", written, back.written, back.handed)
		}
		if started := back.todo != nil; started != (written >= writeBackStep) {
			t.Fatalf("after %d bytes: started is %v", written, started)
		}
	}
	done := back.done
	if err := f.Sync(); err != nil {
		t.Fatal(err)
	}
	if err := f.Close(); err != nil {
		t.Fatal(err)
	}
	select {
	case <-done:
	default:
		t.Error("the goroutine outlives the file")
	}
}

// TestWriteBackOfCopies: what the kernel copies is counted as what is written.
func TestWriteBackOfCopies(t *testing.T) {
	dir := t.TempDir()
	src, err := os.Create(filepath.Join(dir, "in"))
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	const size = 2*writeBackStep + 12345
	if err := src.Truncate(size); err != nil {
		t.Fatal(err)
	}
	f, err := OS.Create(filepath.Join(dir, "out"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	if _, err := f.Write([]byte("x")); err != nil { // so that the file is not shared as a whole
		t.Fatal(err)
	}
	for done := int64(0); done < size; {
		n, err := f.CopyRange(src, done, size-done)
		if n < 1 || n > copyStep || err != nil {
			t.Fatalf("%d bytes, %v", n, err)
		}
		done += n
	}
	if back := f.(osFile).back; back.written != size+1 || back.todo == nil {
		t.Errorf("it counts %d bytes, want %d, and is started: %v", back.written, size+1, back.todo != nil)
	}
}
