package writers

import (
	"bytes"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/apache/arrow-go/v18/parquet"
	"github.com/apache/arrow-go/v18/parquet/file"
	"github.com/apache/arrow-go/v18/parquet/schema"

	"catenrich/internal/table"
	"catenrich/readers"
	"catenrich/readers/readertest"
	"catenrich/writers/writertest"
)

func TestParquetSink(t *testing.T) {
	writertest.Test(t, writertest.Format{
		Write: writeWide,
		Open:  func(path string) (table.Source, error) { return readers.OpenParquet(path) },
		Sink: func(src table.Source, spec table.Spec) table.Sink {
			w, err := NewParquet(src.(*readers.Parquet), spec)
			if err != nil {
				t.Fatal(err)
			}
			return w
		},
		Read: readWide,
	})
}

// writeWide writes a table of optional doubles in row groups of 1800 rows.
func writeWide(t testing.TB, dir string, tb readertest.Table) string {
	t.Helper()
	var fields schema.FieldList
	for _, name := range tb.Names {
		fields = append(fields, schema.NewFloat64Node(name, parquet.Repetitions.Optional, -1))
	}
	path := filepath.Join(dir, "in.parquet")
	f, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	w := file.NewParquetWriter(f, schema.MustGroup(schema.NewGroupNode("schema", parquet.Repetitions.Required, fields, -1)))
	const size = 1800
	for from := 0; from < tb.Rows(); from += size {
		g, err := w.AppendRowGroupChecked()
		if err != nil {
			t.Fatal(err)
		}
		for i := range tb.Columns {
			cells := tb.Columns[i][from:min(from+size, tb.Rows())]
			values, defs := []float64{}, make([]int16, len(cells))
			for row, v := range cells {
				if v == v {
					values, defs[row] = append(values, v), 1
				}
			}
			c, err := g.NextColumn()
			if err != nil {
				t.Fatal(err)
			}
			c.(*file.Float64ColumnChunkWriter).WriteBatch(values, defs, nil)
			c.Close()
		}
		g.Close()
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return path
}

// readWide reads every column through arrow-go as numbers.
func readWide(t testing.TB, out []byte) (tb readertest.Table) {
	t.Helper()
	r, err := file.NewParquetReader(bytes.NewReader(out))
	if err != nil {
		t.Fatal(err)
	}
	for i := range r.MetaData().Schema.NumColumns() {
		tb.Names = append(tb.Names, r.MetaData().Schema.Column(i).Name())
		var cells []float64
		for g := range r.NumRowGroups() {
			rows := int(r.RowGroup(g).NumRows())
			c, err := r.RowGroup(g).Column(i)
			if err != nil {
				t.Fatal(err)
			}
			values, defs := make([]float64, rows), make([]int16, rows)
			switch c := c.(type) {
			case *file.Float64ColumnChunkReader:
				c.ReadBatch(int64(rows), values, defs, nil)
			case *file.BooleanColumnChunkReader:
				flags := make([]bool, rows)
				c.ReadBatch(int64(rows), flags, defs, nil)
				for row, v := range flags {
					if v {
						values[row] = 1
					}
				}
			case *file.Int32ColumnChunkReader:
				ints := make([]int32, rows)
				c.ReadBatch(int64(rows), ints, defs, nil)
				for row, v := range ints {
					values[row] = float64(v)
				}
			}
			if c.Err() != nil {
				t.Fatal(c.Err())
			}
			next := 0
			for _, d := range defs {
				if d == 0 {
					cells = append(cells, math.NaN())
					continue
				}
				cells = append(cells, values[next])
				next++
			}
		}
		tb.Columns = append(tb.Columns, cells)
	}
	return tb
}
