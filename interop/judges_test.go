package interop

import (
	"database/sql"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"reflect"
	"strings"

	"github.com/apache/arrow-go/v18/parquet"
	"github.com/apache/arrow-go/v18/parquet/file"
	pq "github.com/parquet-go/parquet-go"
	"github.com/xitongsys/parquet-go/reader"
	"github.com/xitongsys/parquet-go/source"
)

// A judge reads input and output by one library and returns what differs. An
// input that the library itself cannot read is no verdict: errCannot.
type judge struct {
	name  string
	judge func(db *sql.DB, in, out string) error
}

type errCannot struct{ err error }

func (e errCannot) Error() string { return e.err.Error() }

var judges = []judge{{"duckdb", judgeDuck}, {"arrow-go", judgeArrow}, {"parquet-go", judgeParquetGo}, {"xitongsys", judgeXitongsys}}

// caught turns a panic of a library into an error.
func caught(f func() error) (err error) {
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("panic: %v", r)
		}
	}()
	return f()
}

func same(a, b float64) bool { return math.Float64bits(a) == math.Float64bits(b) || a != a && b != b }

func judgeDuck(db *sql.DB, in, out string) error {
	rows, err := db.Query(fmt.Sprintf("SELECT column_name FROM (DESCRIBE SELECT * FROM '%s')", in))
	if err != nil {
		return errCannot{err}
	}
	var differ []string
	for rows.Next() {
		var name string
		if err := rows.Scan(&name); err != nil {
			return err
		}
		q := `"` + strings.ReplaceAll(name, `"`, `""`) + `"`
		differ = append(differ, fmt.Sprintf("a.%s::VARCHAR IS DISTINCT FROM b.%s::VARCHAR", q, q))
	}
	if err := rows.Err(); err != nil {
		return err
	}
	var n, total, before int64
	err = db.QueryRow(fmt.Sprintf(`SELECT count(*) FILTER (%s), count(*), (SELECT count(*) FROM '%s')
		FROM read_parquet('%s', file_row_number = true) a JOIN read_parquet('%s', file_row_number = true) b USING (file_row_number)`,
		strings.Join(differ, " OR "), in, in, out)).Scan(&n, &total, &before)
	if err != nil {
		return err
	}
	if n != 0 || total != before {
		return fmt.Errorf("%d of %d rows differ, the input has %d", n, total, before)
	}
	return duckGrafted(db, out, total)
}

func duckGrafted(db *sql.DB, out string, total int64) error {
	rows, err := db.Query(fmt.Sprintf("SELECT file_row_number, grafted_value, grafted_flag, grafted_status FROM read_parquet('%s', file_row_number = true) ORDER BY 1", out))
	if err != nil {
		return err
	}
	defer rows.Close()
	n, above := int64(0), int64(0)
	for ; rows.Next(); n++ {
		var row int64
		var v sql.NullFloat64
		var flag sql.NullBool
		var status int32
		if err := rows.Scan(&row, &v, &flag, &status); err != nil {
			return err
		}
		if !v.Valid {
			v.Float64 = math.NaN()
		}
		if err := check(row, v.Float64, flag.Bool, flag.Valid, status); err != nil {
			return err
		}
		if v.Float64 > 50 {
			above++
		}
	}
	if n != total {
		return fmt.Errorf("%d rows of %d", n, total)
	}
	var pruned int64 // by the statistics, if they are wrong too many
	if err := db.QueryRow(fmt.Sprintf("SELECT count(*) FROM '%s' WHERE grafted_value > 50", out)).Scan(&pruned); err != nil {
		return err
	}
	if pruned != above {
		return fmt.Errorf("a filter finds %d rows, there are %d", pruned, above)
	}
	return rows.Err()
}

// check compares a row of the grafted columns with what it must be.
func check(row int64, v float64, flag, hasFlag bool, status int32) error {
	f := wantFlag(row)
	if !same(v, wantValue(row)) || hasFlag != (f != 2) || hasFlag && flag != (f == 1) || status != wantStatus(row) {
		return fmt.Errorf("row %d: %v, %v (%v), %d", row, v, flag, hasFlag, status)
	}
	return nil
}

func judgeArrow(_ *sql.DB, in, out string) error {
	// The limits are those of the format: see readers.
	props := parquet.NewReaderProperties(nil)
	props.MaxCompressedPageSize, props.MaxUncompressedPageSize = math.MaxInt32, math.MaxInt32
	a, err := file.OpenParquetFile(in, false, file.WithReadProps(props))
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

// judgeXitongsys reads the new columns only: the library has no way to compare
// old ones without a Go struct for each file.
func judgeXitongsys(_ *sql.DB, in, out string) error {
	if err := caught(func() error { _, _, err := openXitongsys(in); return err }); err != nil {
		return errCannot{err}
	}
	r, n, err := openXitongsys(out)
	if err != nil {
		return err
	}
	defer r.ReadStop()
	var cols [3][]any
	for i, f := range added {
		path := r.SchemaHandler.GetRootExName() + "\x01" + f.Name
		if cols[i], _, _, err = r.ReadColumnByPath(path, n); err != nil {
			return fmt.Errorf("column %s: %w", f.Name, err)
		}
		if int64(len(cols[i])) != n {
			return fmt.Errorf("column %s: %d of %d values", f.Name, len(cols[i]), n)
		}
	}
	for row := range n {
		v, isV := cols[0][row].(float64)
		if !isV {
			v = math.NaN()
		}
		flag, has := cols[1][row].(bool)
		status, _ := cols[2][row].(int32)
		if err := check(row, v, flag, has, status); err != nil {
			return err
		}
	}
	return nil
}

func openXitongsys(path string) (*reader.ParquetReader, int64, error) {
	f, err := openLocal(path)
	if err != nil {
		return nil, 0, err
	}
	r, err := reader.NewParquetColumnReader(f, 1)
	if err != nil {
		return nil, 0, err
	}
	return r, r.GetNumRows(), nil
}

// localFile is a source.ParquetFile on disk.
type localFile struct {
	*os.File
	path string
}

func openLocal(path string) (source.ParquetFile, error) {
	f, err := os.Open(path)
	return localFile{f, path}, err
}

func (f localFile) Open(name string) (source.ParquetFile, error) {
	if name == "" {
		name = f.path
	}
	return openLocal(name)
}

func (f localFile) Create(string) (source.ParquetFile, error) { return nil, os.ErrPermission }
