package main

import (
	"errors"
	"fmt"
	"math"
	"os"

	"github.com/apache/arrow-go/v18/parquet"
	"github.com/apache/arrow-go/v18/parquet/compress"
	"github.com/apache/arrow-go/v18/parquet/file"
	"github.com/apache/arrow-go/v18/parquet/schema"
)

// reencode decodes every column of a file, as the bench makes them, and
// encodes it again with the new ones behind. One row group is decoded while the
// one before it is encoded.
func reencode(in, out string) error {
	r, err := file.OpenParquetFile(in, false)
	if err != nil {
		return err
	}
	defer r.Close()
	f, err := os.Create(out)
	if err != nil {
		return err
	}
	w, err := newWriter(f, r)
	if err != nil {
		return err
	}
	type decoded struct {
		columns []any
		err     error
	}
	groups := make(chan decoded)
	quit := make(chan struct{})
	defer close(quit)
	go func() {
		defer close(groups)
		for g := range r.NumRowGroups() {
			columns, err := decode(r, g)
			select {
			case groups <- decoded{columns, err}:
			case <-quit:
				return
			}
		}
	}()
	for g := range groups {
		if g.err != nil {
			return g.err
		}
		if err := encode(w, g.columns); err != nil {
			return err
		}
	}
	return w.Close() // which closes the file
}

// newWriter has the columns of r and the new ones.
func newWriter(f *os.File, r *file.Reader) (*file.Writer, error) {
	optional := parquet.Repetitions.Optional
	var fields schema.FieldList
	root := r.MetaData().Schema.Root()
	for i := range root.NumFields() {
		fields = append(fields, root.Field(i))
	}
	for k := range added {
		fields = append(fields, schema.NewFloat64Node(fmt.Sprintf("new_%02d", k), optional, -1))
	}
	node, err := schema.NewGroupNode("schema", parquet.Repetitions.Required, fields, -1)
	if err != nil {
		return nil, err
	}
	return file.NewParquetWriter(f, node, file.WithWriterProps(parquet.NewWriterProperties(
		parquet.WithDictionaryDefault(false), parquet.WithCompression(compress.Codecs.Snappy)))), nil
}

// decode returns the columns of a row group, the new ones behind, as slices.
func decode(r *file.Reader, g int) ([]any, error) {
	group := r.RowGroup(g)
	rows := int(group.NumRows())
	var all []any
	var z []float64
	for i := range r.MetaData().Schema.NumColumns() {
		c, err := group.Column(i)
		if err != nil {
			return nil, err
		}
		var column any
		switch c := c.(type) {
		case *file.Int64ColumnChunkReader:
			column, err = values(rows, c.ReadBatch)
		case *file.Float32ColumnChunkReader:
			column, err = values(rows, c.ReadBatch)
		case *file.Float64ColumnChunkReader:
			var v []float64
			if v, err = values(rows, c.ReadBatch); c.Descriptor().Name() == redshift {
				z = v
			}
			column = v
		default:
			err = fmt.Errorf("the column %s has a type that the bench does not make", c.Descriptor().Name())
		}
		if err = errors.Join(err, c.Err()); err != nil {
			return nil, err
		}
		all = append(all, column)
	}
	for k := range added {
		v, a := make([]float64, rows), constant(k)
		for i := range z {
			v[i] = math.Sqrt(a+z[i]) * (3 + z[i]*a)
		}
		all = append(all, v)
	}
	return all, nil
}

// values reads one column that has no nulls.
func values[T any](rows int, read func(int64, []T, []int16, []int16) (int64, int, error)) ([]T, error) {
	v, levels := make([]T, rows), make([]int16, rows)
	for n := 0; n < rows; {
		_, have, err := read(int64(rows-n), v[n:], levels[n:], nil)
		if err != nil {
			return nil, err
		}
		if have == 0 {
			return nil, errors.New("a column ends before its row group, or has nulls")
		}
		n += have
	}
	return v, nil
}

// encode writes one row group.
func encode(w *file.Writer, columns []any) error {
	g, err := w.AppendRowGroupChecked()
	if err != nil {
		return err
	}
	var levels []int16
	for _, column := range columns {
		c, err := g.NextColumn()
		if err != nil {
			return err
		}
		switch v := column.(type) {
		case []int64:
			levels = ones(levels, len(v))
			_, err = c.(*file.Int64ColumnChunkWriter).WriteBatch(v, levels, nil)
		case []float32:
			levels = ones(levels, len(v))
			_, err = c.(*file.Float32ColumnChunkWriter).WriteBatch(v, levels, nil)
		case []float64:
			levels = ones(levels, len(v))
			_, err = c.(*file.Float64ColumnChunkWriter).WriteBatch(v, levels, nil)
		}
		if err = errors.Join(err, c.Close()); err != nil {
			return err
		}
	}
	return g.Close()
}

// ones are the definition levels of values that are all there.
func ones(levels []int16, n int) []int16 {
	for len(levels) < n {
		levels = append(levels, 1)
	}
	return levels[:n]
}
