package readers

import (
	"context"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/klauspost/compress/gzip"
)

// TestConsumed: progress counts the bytes of the file, compressed or not,
// never falls, and ends at the file's size.
func TestConsumed(t *testing.T) {
	text := "id,z\n" + strings.Repeat("1234567,0.123456789\n", 20_000)
	dir := t.TempDir()
	plain, packed := filepath.Join(dir, "a.csv"), filepath.Join(dir, "a.csv.gz")
	if err := os.WriteFile(plain, []byte(text), 0o666); err != nil {
		t.Fatal(err)
	}
	f, err := os.Create(packed)
	if err != nil {
		t.Fatal(err)
	}
	z := gzip.NewWriter(f)
	io.WriteString(z, text)
	z.Close()
	f.Close()
	for _, path := range []string{plain, packed} {
		info, err := os.Stat(path)
		if err != nil {
			t.Fatal(err)
		}
		src, err := OpenCSV(path, CSVOptions{BlockSize: 10_000})
		if err != nil {
			t.Fatal(err)
		}
		last, chunks := int64(0), 0
		for ; ; chunks++ {
			c, err := src.Next(context.Background())
			if err == io.EOF {
				break
			}
			if err != nil {
				t.Fatal(err)
			}
			if c.Consumed < last || c.Consumed > info.Size() {
				t.Errorf("%s: chunk %d has consumed %d bytes after %d, of %d", path, c.Seq, c.Consumed, last, info.Size())
			}
			last = c.Consumed
			src.Release(c)
		}
		if last != info.Size() || chunks < 30 {
			t.Errorf("%s: %d of %d bytes in %d chunks", path, last, info.Size(), chunks)
		}
		src.Close()
	}
}
