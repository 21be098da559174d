package publish

import (
	"bytes"
	"crypto/sha256"
	"os"
	"path/filepath"
	"testing"
)

const benchSize = 64 << 20

// BenchmarkSHA256 is the bar that BenchmarkWrite cannot pass.
func BenchmarkSHA256(b *testing.B) {
	p := bytes.Repeat([]byte("catalogue"), benchSize/9)
	b.SetBytes(int64(len(p)))
	for b.Loop() {
		sha256.Sum256(p)
	}
}

// benchRelease publishes one output that fill writes.
func benchRelease(b *testing.B, fill func(*Output) error) {
	target := filepath.Join(b.TempDir(), "out")
	b.SetBytes(benchSize)
	b.ReportAllocs()
	for b.Loop() {
		r, err := Begin(OS, target, Options{})
		if err != nil {
			b.Fatal(err)
		}
		o, err := r.Create("")
		if err != nil {
			b.Fatal(err)
		}
		if err := fill(o); err != nil {
			b.Fatal(err)
		}
		b.StopTimer()
		if o.digest != nil {
			b.StartTimer()
			o.Sum() // everything but the sync, which is the disk's speed
			b.StopTimer()
		}
		r.Abort()
		b.StartTimer()
	}
}

func BenchmarkWrite(b *testing.B) {
	for _, c := range []struct {
		name string
		size int
	}{{"4KiB", 4 << 10}, {"64KiB", 64 << 10}, {"1MiB", 1 << 20}} {
		p := bytes.Repeat([]byte("a"), c.size)
		b.Run(c.name, func(b *testing.B) {
			benchRelease(b, func(o *Output) error {
				for range benchSize / c.size {
					if _, err := o.Write(p); err != nil {
						return err
					}
				}
				return nil
			})
		})
	}
}

func BenchmarkCopyRange(b *testing.B) {
	path := filepath.Join(b.TempDir(), "src")
	if err := os.WriteFile(path, make([]byte, benchSize), 0o666); err != nil {
		b.Fatal(err)
	}
	src, err := os.Open(path)
	if err != nil {
		b.Fatal(err)
	}
	defer src.Close()
	benchRelease(b, func(o *Output) error { return o.CopyRange(src, 0, benchSize) })
}

// BenchmarkPublishSmall is what a small unit pays: three files' worth of syncs.
func BenchmarkPublishSmall(b *testing.B) {
	target := filepath.Join(b.TempDir(), "out")
	for b.Loop() {
		if err := publishFiles(OS, target, map[string]string{"": "x\n"}, Options{}); err != nil {
			b.Fatal(err)
		}
	}
}
