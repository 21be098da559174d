package interop

import (
	"database/sql"
	"fmt"
	"io"
	"math"
	"os"
	"reflect"

	pq "github.com/parquet-go/parquet-go"
)

func openParquetGo(path string) (*pq.File, *os.File, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, nil, err
	}
	info, err := f.Stat()
	if err != nil {
		return nil, nil, err
	}
	p, err := pq.OpenFile(f, info.Size())
	return p, f, err
}

func judgeParquetGo(_ *sql.DB, in, out string) error {
	a, fa, err := openParquetGo(in)
	if err != nil {
		return errCannot{err}
	}
	defer fa.Close()
	b, fb, err := openParquetGo(out)
	if err != nil {
		return err
	}
	defer fb.Close()
	if len(a.RowGroups()) != len(b.RowGroups()) {
		return fmt.Errorf("%d row groups of %d", len(b.RowGroups()), len(a.RowGroups()))
	}
	if (len(a.OffsetIndexes()) == 0) != (len(b.OffsetIndexes()) == 0) {
		return fmt.Errorf("%d offset indexes became %d", len(a.OffsetIndexes()), len(b.OffsetIndexes()))
	}
	row := int64(0)
	for g := range a.RowGroups() {
		ca, cb := a.RowGroups()[g].ColumnChunks(), b.RowGroups()[g].ColumnChunks()
		if len(ca)+3 != len(cb) {
			return fmt.Errorf("%d columns over %d", len(cb), len(ca))
		}
		for c := range ca {
			was, err := pageValues(ca[c])
			if err != nil {
				return errCannot{err}
			}
			is, err := pageValues(cb[c])
			if err != nil {
				return err
			}
			if again, err := pageValues(ca[c]); err != nil || !reflect.DeepEqual(texts(again), texts(was)) {
				return errCannot{fmt.Errorf("column %d of the input reads differently each time (%v)", c, err)}
			}
			if len(was) != len(is) {
				return fmt.Errorf("row group %d, column %d: %d values of %d", g, c, len(is), len(was))
			}
			for i := range was {
				if !pq.DeepEqual(was[i], is[i]) && was[i].String() != is[i].String() {
					return fmt.Errorf("row group %d, column %d, value %d: %v, was %v", g, c, i, is[i], was[i])
				}
			}
		}
		if row, err = checkPages(cb[len(ca):], row); err != nil {
			return err
		}
		if err := seekPages(cb[len(ca)], row-b.RowGroups()[g].NumRows(), b.RowGroups()[g].NumRows()); err != nil {
			return err
		}
	}
	return nil
}

func texts(values []pq.Value) []string {
	all := make([]string, len(values))
	for i, v := range values {
		all[i] = v.String()
	}
	return all
}

// pageValues reads one column chunk through parquet-go.
func pageValues(c pq.ColumnChunk) ([]pq.Value, error) {
	pages := c.Pages()
	defer pages.Close()
	var all []pq.Value
	for {
		p, err := pages.ReadPage()
		if err == io.EOF {
			return all, nil
		}
		if err != nil {
			return nil, err
		}
		buf := make([]pq.Value, p.NumValues())
		n, err := p.Values().ReadValues(buf)
		if err != nil && err != io.EOF {
			return nil, err
		}
		for _, v := range buf[:n] {
			all = append(all, v.Clone())
		}
		pq.Release(p)
	}
}

func checkPages(cols []pq.ColumnChunk, row int64) (int64, error) {
	var v [3][]pq.Value
	for i := range v {
		var err error
		if v[i], err = pageValues(cols[i]); err != nil {
			return row, err
		}
	}
	for i := range v[0] {
		x, flag := math.NaN(), false
		if !v[0][i].IsNull() {
			x = v[0][i].Double()
		}
		if !v[1][i].IsNull() {
			flag = v[1][i].Boolean()
		}
		if err := check(row, x, flag, !v[1][i].IsNull(), v[2][i].Int32()); err != nil {
			return row, err
		}
		row++
	}
	return row, nil
}

// seekPages seeks to rows of the new column, which uses its offset index.
func seekPages(c pq.ColumnChunk, first, rows int64) error {
	for k := int64(0); k < 20 && rows > 0; k++ {
		at := (k * 7919) % rows
		pages := c.Pages()
		if err := pages.SeekToRow(at); err != nil {
			return fmt.Errorf("seeking to row %d: %w", at, err)
		}
		p, err := pages.ReadPage()
		if err != nil {
			return fmt.Errorf("reading at row %d: %w", at, err)
		}
		buf := make([]pq.Value, 1)
		if n, err := p.Values().ReadValues(buf); n != 1 {
			return fmt.Errorf("reading at row %d: %w", at, err)
		}
		x := math.NaN()
		if !buf[0].IsNull() {
			x = buf[0].Double()
		}
		if !same(x, wantValue(first+at)) {
			return fmt.Errorf("row %d by seeking: %v, want %v", first+at, x, wantValue(first+at))
		}
		pages.Close()
	}
	return nil
}
