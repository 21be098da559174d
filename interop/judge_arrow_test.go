package interop

import (
	"database/sql"
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"

	"github.com/apache/arrow-go/v18/parquet"
	"github.com/apache/arrow-go/v18/parquet/file"
)

func judgeArrow(_ *sql.DB, in, out string) error {
	// The limits are those of the format: see readers.
	props := parquet.NewReaderProperties(nil)
	props.MaxCompressedPageSize, props.MaxUncompressedPageSize = math.MaxInt32, math.MaxInt32
	var a *file.Reader
	err := caught(func() (err error) {
		a, err = file.OpenParquetFile(in, false, file.WithReadProps(props))
		return err
	})
	if err != nil {
		return errCannot{err}
	}
	defer a.Close()
	b, err := file.OpenParquetFile(out, false, file.WithReadProps(props))
	if err != nil {
		return err
	}
	defer b.Close()
	old := a.MetaData().Schema.NumColumns()
	if a.NumRowGroups() != b.NumRowGroups() || old+3 != b.MetaData().Schema.NumColumns() {
		return fmt.Errorf("%d row groups of %d, %d columns over %d", b.NumRowGroups(), a.NumRowGroups(), b.MetaData().Schema.NumColumns(), old)
	}
	row := int64(0)
	for g := range a.NumRowGroups() {
		for c := range old {
			was, err := readLeaf(a, g, c)
			if err != nil {
				return errCannot{err}
			}
			is, err := readLeaf(b, g, c)
			if err != nil {
				return err
			}
			if !reflect.DeepEqual(was, is) {
				return fmt.Errorf("row group %d, column %d differs", g, c)
			}
		}
		var cols [3]leaf
		for i := range cols {
			if cols[i], err = readLeaf(b, g, old+i); err != nil {
				return err
			}
		}
		if row, err = checkLeaves(cols, row, int(b.RowGroup(g).NumRows())); err != nil {
			return err
		}
	}
	return splitsFindEveryGroup(b)
}

func checkLeaves(cols [3]leaf, row int64, rows int) (int64, error) {
	var next [2]int
	for i := range rows {
		v, flag := math.NaN(), false
		if cols[0].defs[i] == 1 {
			v = cols[0].values.([]float64)[next[0]]
			next[0]++
		}
		if cols[1].defs[i] == 1 {
			flag = cols[1].values.([]bool)[next[1]]
			next[1]++
		}
		if err := check(row, v, flag, cols[1].defs[i] == 1, cols[2].values.([]int32)[i]); err != nil {
			return row, err
		}
		row++
	}
	return row, nil
}

// A leaf is what one column chunk holds.
type leaf struct {
	values     any
	bits       any // floats bit by bit, so that NaN equals itself
	defs, reps []int16
}

// readLeaf reads one column chunk through arrow-go.
func readLeaf(r *file.Reader, group, column int) (l leaf, err error) {
	chunk, err := r.RowGroup(group).MetaData().ColumnChunk(column)
	if err != nil {
		return l, err
	}
	c, err := r.RowGroup(group).Column(column)
	if err != nil {
		return l, err
	}
	n := chunk.NumValues()
	l.defs, l.reps = make([]int16, n), make([]int16, n)
	read := func(read func() (int64, int, error)) int {
		var total int64
		var have int
		if total, have, err = read(); err == nil && total != n {
			err = fmt.Errorf("%d of %d values", total, n)
		}
		return have
	}
	switch c := c.(type) {
	case *file.Float64ColumnChunkReader:
		v := make([]float64, n)
		v = v[:read(func() (int64, int, error) { return c.ReadBatch(n, v, l.defs, l.reps) })]
		bits := make([]uint64, len(v))
		for i, x := range v {
			bits[i] = math.Float64bits(x)
		}
		l.values, l.bits = v, bits
	case *file.Float32ColumnChunkReader:
		v := make([]float32, n)
		l.values = v[:read(func() (int64, int, error) { return c.ReadBatch(n, v, l.defs, l.reps) })]
	case *file.Int32ColumnChunkReader:
		v := make([]int32, n)
		l.values = v[:read(func() (int64, int, error) { return c.ReadBatch(n, v, l.defs, l.reps) })]
	case *file.Int64ColumnChunkReader:
		v := make([]int64, n)
		l.values = v[:read(func() (int64, int, error) { return c.ReadBatch(n, v, l.defs, l.reps) })]
	case *file.Int96ColumnChunkReader:
		v := make([]parquet.Int96, n)
		l.values = v[:read(func() (int64, int, error) { return c.ReadBatch(n, v, l.defs, l.reps) })]
	case *file.BooleanColumnChunkReader:
		v := make([]bool, n)
		l.values = v[:read(func() (int64, int, error) { return c.ReadBatch(n, v, l.defs, l.reps) })]
	case *file.ByteArrayColumnChunkReader:
		v := make([]parquet.ByteArray, n)
		l.values = v[:read(func() (int64, int, error) { return c.ReadBatch(n, v, l.defs, l.reps) })]
	case *file.FixedLenByteArrayColumnChunkReader:
		v := make([]parquet.FixedLenByteArray, n)
		l.values = v[:read(func() (int64, int, error) { return c.ReadBatch(n, v, l.defs, l.reps) })]
	}
	if err == nil {
		err = c.Err()
	}
	return l, err
}

// splitsFindEveryGroup cuts the file at random places, as Hadoop's engines do,
// which take the row groups whose middle lies in their part.
func splitsFindEveryGroup(r *file.Reader) error {
	size := r.MetaData().GetSourceFileSize()
	rng := rand.New(rand.NewPCG(1, 2))
	for range 20 {
		found := make([]int, r.NumRowGroups())
		for from := int64(0); from < size; {
			to := min(size, from+1+rng.Int64N(size/3+1))
			for g := range found {
				meta := r.MetaData().RowGroup(g)
				if meta.NumColumns() == 0 {
					continue
				}
				first, err := meta.ColumnChunk(0)
				if err != nil {
					return err
				}
				start := first.DataPageOffset()
				if first.HasDictionaryPage() {
					start = min(start, first.DictionaryPageOffset())
				}
				stored := int64(0)
				for c := range meta.NumColumns() {
					k, err := meta.ColumnChunk(c)
					if err != nil {
						return err
					}
					stored += k.TotalCompressedSize()
				}
				if middle := start + stored/2; middle >= from && middle < to {
					found[g]++
				}
			}
			from = to
		}
		for g, n := range found {
			if n != 1 {
				return fmt.Errorf("row group %d is found %d times by splits", g, n)
			}
		}
	}
	return nil
}
