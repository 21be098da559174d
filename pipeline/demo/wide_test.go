package demo

import (
	"crypto/sha256"
	"math"
	"os"
	"slices"
	"strconv"
	"testing"

	"github.com/apache/arrow-go/v18/parquet/file"
	"github.com/apache/arrow-go/v18/parquet/schema"
)

// TestWideHasTheSameNumbers reads each number of the Parquet catalogue and
// compares it, bit for bit, with what the text of the CSV catalogue says.
func TestWideHasTheSameNumbers(t *testing.T) {
	dir := t.TempDir()
	if _, err := WriteParquet(dir, Options{}); err != nil {
		t.Fatal(err)
	}
	in, err := file.OpenParquetFile(join(dir, WideCatalogue), false)
	if err != nil {
		t.Fatal(err)
	}
	defer in.Close()
	s := survey20k(t)
	if n := int(in.NumRows()); n != len(s.rows) {
		t.Fatalf("%d rows, the CSV has %d whole records", n, len(s.rows))
	}
	if n := in.MetaData().Schema.Root().NumFields(); n != 60 {
		t.Errorf("%d columns, want 60", n)
	}
	if in.NumRowGroups() < 2 {
		t.Errorf("%d row groups, want several", in.NumRowGroups())
	}
	for name, values := range readDoubles(t, in) {
		if !slices.Contains(columnNames[:], name) {
			continue
		}
		for i, r := range s.rows {
			want, err := strconv.ParseFloat(r.seen[name], 64)
			if got := values[i]; err == nil != (got != nil) || err == nil && math.Float64bits(*got) != math.Float64bits(want) {
				t.Fatalf("row %d, %s: %v in Parquet, %q in CSV", i, name, got, r.seen[name])
			}
		}
	}
}

// readDoubles returns the values of the flat columns of doubles; nil for null.
func readDoubles(t *testing.T, in *file.Reader) map[string][]*float64 {
	t.Helper()
	out := make(map[string][]*float64)
	for g := range in.NumRowGroups() {
		group := in.RowGroup(g)
		rows := group.NumRows()
		for c := range in.MetaData().Schema.NumColumns() {
			chunk, err := group.Column(c)
			if err != nil {
				t.Fatal(err)
			}
			doubles, ok := chunk.(*file.Float64ColumnChunkReader)
			if d := chunk.Descriptor(); !ok || d.MaxRepetitionLevel() > 0 || len(d.ColumnPath()) > 1 {
				continue
			}
			values, def := make([]float64, rows), make([]int16, rows)
			got, read, err := doubles.ReadBatch(rows, values, def, nil)
			if err != nil || got != rows {
				t.Fatalf("%s: %d rows of %d: %v", chunk.Descriptor().Name(), got, rows, err)
			}
			values = values[:read]
			for _, level := range def {
				var v *float64
				if level == 1 {
					v, values = &values[0], values[1:]
				}
				out[chunk.Descriptor().Name()] = append(out[chunk.Descriptor().Name()], v)
			}
		}
	}
	return out
}

// TestWideIsWhole reads every leaf and holds that nested levels add up to rows.
func TestWideIsWhole(t *testing.T) {
	dir := t.TempDir()
	if _, err := WriteParquet(dir, Options{Rows: 2000}); err != nil {
		t.Fatal(err)
	}
	in, err := file.OpenParquetFile(join(dir, WideCatalogue), false)
	if err != nil {
		t.Fatal(err)
	}
	defer in.Close()
	group := in.RowGroup(0)
	for c := range in.MetaData().Schema.NumColumns() {
		chunk, err := group.Column(c)
		if err != nil {
			t.Fatal(err)
		}
		values, err := in.MetaData().RowGroup(0).ColumnChunk(c)
		if err != nil {
			t.Fatal(err)
		}
		rep := make([]int16, values.NumValues())
		if chunk.Descriptor().MaxRepetitionLevel() == 0 {
			if values.NumValues() != group.NumRows() {
				t.Errorf("%s: %d values in %d rows", chunk.Descriptor().Path(), values.NumValues(), group.NumRows())
			}
			continue
		}
		def := make([]int16, len(rep))
		switch r := chunk.(type) {
		case *file.Float64ColumnChunkReader:
			_, _, err = r.ReadBatch(int64(len(rep)), make([]float64, len(rep)), def, rep)
		case *file.Float32ColumnChunkReader:
			_, _, err = r.ReadBatch(int64(len(rep)), make([]float32, len(rep)), def, rep)
		default:
			continue // texts: their levels are those of the numbers beside them
		}
		starts, top := int64(0), int16(0)
		for i, level := range rep {
			if level == 0 {
				starts++
			}
			top = max(top, def[i])
		}
		if err != nil || starts != group.NumRows() || top != chunk.Descriptor().MaxDefinitionLevel() {
			t.Errorf("%s: %d rows of %d, defined up to %d of %d: %v", chunk.Descriptor().Path(), starts, group.NumRows(), top, chunk.Descriptor().MaxDefinitionLevel(), err)
		}
	}
	if _, ok := in.MetaData().Schema.Root().Field(0).LogicalType().(schema.StringLogicalType); !ok {
		t.Error("object_id is not a string")
	}
}

// TestWideBytes holds that the file is the same each time.
func TestWideBytes(t *testing.T) {
	var first [32]byte
	for i := range 5 {
		dir := t.TempDir()
		files, err := WriteParquet(dir, Options{Rows: 2000})
		if err != nil {
			t.Fatal(err)
		}
		if want := []string{join(dir, WideCatalogue)}; !slices.Equal(files, want) {
			t.Errorf("WriteParquet returned %v, want %v", files, want)
		}
		content, err := os.ReadFile(join(dir, WideCatalogue))
		if err != nil {
			t.Fatal(err)
		}
		if sum := sha256.Sum256(content); i == 0 {
			first = sum
		} else if sum != first {
			t.Fatal("two files of the same survey differ")
		}
	}
}
