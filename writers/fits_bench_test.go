package writers

import (
	"fmt"
	"os"
	"path/filepath"
	"testing"

	"catenrich/internal/table"
	"catenrich/readers"
	"catenrich/readers/fitstest"
	"catenrich/writers/writertest"
)

// makeBenchFITS writes a table of random doubles.
func makeBenchFITS(t testing.TB, rows, columns int) string {
	tb := fitstest.Table{Rows: rows, Cards: sumCards}
	for c := range columns {
		cells := make([]float64, rows)
		for i := range cells {
			cells[i] = (noise(int64(i)*64+int64(c)) - 1) * 3
		}
		tb.Columns = append(tb.Columns, fitstest.Doubles(fmt.Sprintf("c%02d", c), cells...))
	}
	return writeTemp(t, t.TempDir(), "bench.fits", fitstest.File(tb.HDU()))
}

// BenchmarkFITS is everything but the cosmology: reading and digesting the
// input, and writing the output, sums included.
//
//	BENCH_ROWS=5000000 BENCH_COLUMNS=10 go test ./writers -run - -bench FITS -benchtime 3x
func BenchmarkFITS(b *testing.B) {
	rows, columns := benchSize("BENCH_ROWS", 500_000), benchSize("BENCH_COLUMNS", 10)
	path := makeBenchFITS(b, rows, columns)
	for _, codec := range []string{"", "gzip"} {
		for _, workers := range []int{1, 2} {
			b.Run(fmt.Sprintf("workers=%d/codec=%s", workers, codec), func(b *testing.B) {
				spec := table.Spec{Added: twelve(), Codec: codec}
				wants := []table.Want{{Field: 0, As: table.Float}}
				var size int64
				b.ReportAllocs()
				cpu := cpuTime(b)
				for b.Loop() {
					out := newFileOutput(b)
					if err := pumpFITS(path, spec, wants, out, workers); err != nil {
						b.Fatal(err)
					}
					size = out.offset
					out.f.Close()
					os.Remove(out.f.Name())
				}
				b.SetBytes(size)
				b.ReportMetric(float64(cpuTime(b)-cpu)/float64(rows*b.N), "cpu-ns/row")
				b.ReportMetric(float64(rows*b.N)/b.Elapsed().Seconds(), "rows/s")
			})
		}
	}
}

// pumpFITS is one run from a file to an output.
func pumpFITS(path string, spec table.Spec, wants []table.Want, out table.Output, workers int) error {
	src, err := readers.OpenFITS(path, readers.FITSOptions{})
	if err != nil {
		return err
	}
	defer src.Close()
	sink, err := NewFITS(src, spec)
	if err != nil {
		return err
	}
	if err := src.Select(wants, spec.Added); err != nil {
		return err
	}
	if err := sink.Begin(out); err != nil {
		return err
	}
	if err := writertest.Pump(src, sink, wants, spec.Added, workers, smooth); err != nil {
		return err
	}
	return sink.Finish()
}

// TestFITSSameBytes: chunks of the size of the format, workers in a race for
// them, plain and compressed.
func TestFITSSameBytes(t *testing.T) {
	path := makeBenchFITS(t, 120_000, 5)
	for _, codec := range []string{"", "gzip"} {
		var want [32]byte
		for _, workers := range []int{1, 2, 5, 16} {
			out := newFileOutput(t)
			if err := pumpFITS(path, table.Spec{Added: twelve(), Codec: codec}, []table.Want{{Field: 0, As: table.Float}}, out, workers); err != nil {
				t.Fatal(err)
			}
			if workers == 1 {
				want = out.Sum()
			} else if out.Sum() != want {
				t.Errorf("%s in %s: %d workers give other bytes than one", codec, filepath.Base(path), workers)
			}
		}
	}
}
