package writers

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"testing"
	"time"

	"github.com/apache/arrow-go/v18/parquet"
	"github.com/apache/arrow-go/v18/parquet/compress"
	"github.com/apache/arrow-go/v18/parquet/file"
	"github.com/apache/arrow-go/v18/parquet/schema"
	"golang.org/x/sys/unix"

	"catenrich/internal/table"
)

// twelve are as many columns as the usual job adds, and a status.
func twelve() []table.Field {
	var all []table.Field
	for i := range 12 {
		all = append(all, table.Field{Name: fmt.Sprintf("new_%02d", i), Kind: table.Float})
	}
	return append(all, table.Field{Name: "new_status", Kind: table.Int})
}

// smooth stands for the kernel: smooth functions of one column at a cost that
// does not hide the rest.
func smooth(b *table.Batch, _ int64) {
	for k := range 12 {
		out, a := b.Out[k].Float, 1+float64(k)/7
		for i, z := range b.In[0].Float {
			out[i] = math.Sqrt(a+z) * (3 + z*a)
		}
	}
	clear(b.Out[12].Int)
}

// benchSize reads a size from the environment, so that one benchmark serves as
// a quick check and as the measurement that design asks for:
//
//	BENCH_ROWS=10000000 BENCH_COLUMNS=8 go test ./writers -run - -bench Graft -benchtime 3x
func benchSize(name string, otherwise int) int {
	if n, err := strconv.Atoi(os.Getenv(name)); err == nil {
		return n
	}
	return otherwise
}

// makeBenchFile writes a catalogue of random doubles in row groups of 122880
// rows, as DuckDB does by default, or of BENCH_GROUP.
func makeBenchFile(t testing.TB, rows, columns, group int) string {
	path := filepath.Join(t.TempDir(), "bench.parquet")
	f, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	var fields schema.FieldList
	for i := range columns {
		fields = append(fields, schema.NewFloat64Node(fmt.Sprintf("c%02d", i), parquet.Repetitions.Optional, -1))
	}
	w := file.NewParquetWriter(f, schema.MustGroup(schema.NewGroupNode("schema", parquet.Repetitions.Required, fields, -1)),
		file.WithWriterProps(parquet.NewWriterProperties(parquet.WithDictionaryDefault(false), parquet.WithCompression(compress.Codecs.Snappy),
			parquet.WithStats(false))))
	values, defs := make([]float64, min(group, rows)), make([]int16, min(group, rows))
	for i := range defs {
		defs[i] = 1
	}
	for from := 0; from < rows; from += group {
		n := min(group, rows-from)
		g, err := w.AppendRowGroupChecked()
		if err != nil {
			t.Fatal(err)
		}
		for c := range columns {
			for i := range n {
				values[i] = (noise(int64(from+i)*64+int64(c)) - 1) * 3
			}
			column, err := g.NextColumn()
			if err != nil {
				t.Fatal(err)
			}
			if _, err := column.(*file.Float64ColumnChunkWriter).WriteBatch(values[:n], defs[:n], nil); err != nil {
				t.Fatal(err)
			}
			column.Close()
		}
		if err := g.Close(); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return path
}

// cpuTime is what the process has used so far: on a busy machine it says more
// than the clock does.
func cpuTime(b *testing.B) time.Duration {
	var u unix.Rusage
	if err := unix.Getrusage(unix.RUSAGE_SELF, &u); err != nil {
		b.Fatal(err)
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}

func BenchmarkGraft(b *testing.B) {
	rows, columns := benchSize("BENCH_ROWS", 500_000), benchSize("BENCH_COLUMNS", 8)
	path := makeBenchFile(b, rows, columns, benchSize("BENCH_GROUP", 122_880))
	for _, workers := range []int{1, 2} {
		for _, spec := range []table.Spec{{}, {Encoding: "plain"}, {Codec: "snappy"}, {Codec: "none"}} {
			b.Run(fmt.Sprintf("workers=%d/encoding=%s/codec=%s", workers, spec.Encoding, spec.Codec), func(b *testing.B) {
				spec.Added = twelve()
				job := graftJob{path: path, want: []string{"c00"}, spec: spec, kernel: smooth, workers: workers}
				var size int64
				b.ReportAllocs()
				cpu := cpuTime(b)
				for b.Loop() {
					out := newFileOutput(b)
					if _, err := job.run(out); err != nil {
						b.Fatal(err)
					}
					size = out.offset
					out.f.Close()
					os.Remove(out.f.Name())
				}
				b.ReportMetric(float64(cpuTime(b)-cpu)/float64(rows*b.N), "cpu-ns/row")
				info, err := os.Stat(path)
				if err != nil {
					b.Fatal(err)
				}
				b.ReportMetric(float64(rows*b.N)/b.Elapsed().Seconds()/1e6, "Mrows/s")
				b.ReportMetric(float64(size-info.Size())/float64(rows), "newbytes/row")
			})
		}
	}
}

// BenchmarkPage is the cost of one page of each kind.
func BenchmarkPage(b *testing.B) {
	const rows = 65536
	z := make([]float64, rows)
	for i := range z {
		z[i] = math.Sqrt(noise(int64(i))) * 1000
	}
	col := table.Column{Kind: table.Float, Float: z}
	for _, name := range []string{"zstd", "snappy", "none"} {
		id, _ := codecID(name, 0)
		b.Run(name, func(b *testing.B) {
			e := &pageEncoder{codec: newCodec(id, 0)}
			c := newColumnOf(&table.Field{Name: "v"}, false, false)
			var buf []byte
			b.SetBytes(8 * rows)
			cpu := cpuTime(b)
			for b.Loop() {
				buf, _, _ = e.encode(buf[:0], &c, &col, rows)
			}
			b.ReportMetric(float64(cpuTime(b)-cpu)/float64(b.N)/rows, "cpu-ns/value")
			b.ReportMetric(float64(len(buf)-headerRoom)/rows, "bytes/value")
		})
	}
}
