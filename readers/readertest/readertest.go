// Package readertest is the suite that every reader must pass: what a
// [table.Source] promises, whatever its format. A format's tests say how to
// write a small table in it and how to open that, and call [Test].
package readertest

import (
	"context"
	"crypto/sha256"
	"errors"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"sync"
	"testing"
	"time"

	"catenrich/internal/table"
)

// A Table is a small table of numbers. NaN is a missing value.
type Table struct {
	Names   []string
	Columns [][]float64
}

// Rows returns the number of rows.
func (tb *Table) Rows() int {
	if len(tb.Columns) == 0 {
		return 0
	}
	return len(tb.Columns[0])
}

// Random returns a table of so many rows and columns, the same every time,
// one cell in ten missing.
func Random(rows, columns int) Table {
	r := rand.New(rand.NewPCG(uint64(rows), uint64(columns)))
	tb := Table{}
	for i := range columns {
		tb.Names = append(tb.Names, "column_"+string(rune('a'+i%26))+string(rune('a'+i/26)))
		cells := make([]float64, rows)
		for j := range cells {
			if cells[j] = r.NormFloat64(); r.IntN(10) == 0 {
				cells[j] = math.NaN()
			}
		}
		tb.Columns = append(tb.Columns, cells)
	}
	return tb
}

// A Format is one file format under test.
type Format struct {
	// Write writes the table to a new file in dir. A large table must come to
	// several chunks.
	Write func(t testing.TB, dir string, tb Table) (path string)
	Open  func(path string) (table.Source, error)
	Lines bool // the format has lines, so batches have Marks
}

// Test runs the suite.
func Test(t *testing.T, f Format) {
	t.Run("values and numbering", f.testValues)
	t.Run("no rows", f.testNoRows)
	t.Run("chunks decoded at once, in any order, into used batches", f.testParallel)
	t.Run("a row by its number", f.testLocate)
	t.Run("digest", f.testDigest)
	t.Run("a changed file", f.testCheck)
	t.Run("a cancelled context", f.testCancel)
	t.Run("a column that is not there", f.testSelect)
	t.Run("a file that is not there", f.testAbsent)
}

const (
	testRows    = 5000
	testColumns = 7
)

// open writes a table, opens it, and asks for its columns of the given places.
func (f Format) open(t *testing.T, tb Table, fields ...int) (src table.Source, path string) {
	t.Helper()
	path = f.Write(t, t.TempDir(), tb)
	src, err := f.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { src.Close() })
	selectFields(t, src, fields...)
	return src, path
}

func selectFields(t *testing.T, src table.Source, fields ...int) {
	t.Helper()
	var wants []table.Want
	for _, i := range fields {
		wants = append(wants, table.Want{Field: i, As: table.Float})
	}
	if err := src.Select(wants, []table.Field{{Name: "new", Kind: table.Float}}); err != nil {
		t.Fatal(err)
	}
}

func (f Format) testValues(t *testing.T) {
	tb := Random(testRows, testColumns)
	fields := []int{5, 0, 3}
	src, _ := f.open(t, tb, fields...)
	if got := src.Schema().Names(); len(got) != testColumns || got[3] != tb.Names[3] {
		t.Fatalf("the columns are %q, want %q", got, tb.Names)
	}
	var b table.Batch
	var row, seq int64
	for {
		c, err := src.Next(context.Background())
		if err == io.EOF {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		if c.Seq != seq {
			t.Fatalf("chunk %d comes as number %d", seq, c.Seq)
		}
		if err := src.Decode(c, &b); err != nil {
			t.Fatal(err)
		}
		if b.Rows > c.Rows || b.Rows < 1 {
			t.Fatalf("chunk %d announces %d rows and has %d", seq, c.Rows, b.Rows)
		}
		if len(b.Out) != 1 || len(b.Out[0].Float) != b.Rows {
			t.Fatalf("chunk %d: the batch has no room for what is added", seq)
		}
		if f.Lines && len(b.Marks) != b.Rows {
			t.Fatalf("chunk %d: %d rows have %d marks", seq, b.Rows, len(b.Marks))
		}
		compare(t, tb, fields, row, &b)
		row += int64(b.Rows)
		seq++
		src.Release(c)
	}
	if row != testRows || seq < 2 {
		t.Errorf("%d rows in %d chunks, want %d in several", row, seq, testRows)
	}
	if _, err := src.Next(context.Background()); err != io.EOF {
		t.Errorf("after the end, Next returns %v, want io.EOF again", err)
	}
}

// compare checks a batch, whose first row is row from, against the table.
func compare(t *testing.T, tb Table, fields []int, from int64, b *table.Batch) {
	t.Helper()
	for i, field := range fields {
		for j := range b.Rows {
			want, got := tb.Columns[field][from+int64(j)], b.In[i].Float[j]
			state := table.Good
			if math.IsNaN(want) {
				state = table.Missing
			}
			if math.Float64bits(got) != math.Float64bits(want) && !(got != got && want != want) || b.In[i].State[j] != state {
				t.Fatalf("row %d, column %q: %v, state %d, want %v, state %d", from+int64(j), tb.Names[field], got, b.In[i].State[j], want, state)
			}
		}
	}
}

func (f Format) testNoRows(t *testing.T) {
	src, _ := f.open(t, Random(0, testColumns), 1)
	if n := len(src.Schema().Fields); n != testColumns {
		t.Errorf("%d columns, want %d", n, testColumns)
	}
	for {
		c, err := src.Next(context.Background())
		if err == io.EOF {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		var b table.Batch
		if err := src.Decode(c, &b); err != nil || b.Rows != 0 {
			t.Fatalf("%d rows, %v, want none", b.Rows, err)
		}
	}
	if _, _, err := src.Locate(0); err == nil {
		t.Error("row 0 was found where there are no rows")
	}
}

func (f Format) testParallel(t *testing.T) {
	tb := Random(testRows, testColumns)
	fields := []int{6, 2}
	src, _ := f.open(t, tb, fields...)
	var chunks []*table.Chunk
	for {
		c, err := src.Next(context.Background())
		if err == io.EOF {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		chunks = append(chunks, c)
	}
	batches := make([]table.Batch, len(chunks))
	var wg sync.WaitGroup
	for worker := range 4 {
		wg.Go(func() {
			for i := len(chunks) - 1 - worker; i >= 0; i -= 4 {
				batches[i].Reset(3, []table.Want{{As: table.Float}, {As: table.Bytes}, {As: table.Float}}, nil)
				if err := src.Decode(chunks[i], &batches[i]); err != nil {
					t.Error(err)
				}
			}
		})
	}
	wg.Wait()
	row := int64(0)
	for i := range batches {
		compare(t, tb, fields, row, &batches[i])
		row += int64(batches[i].Rows)
	}
	if row != testRows {
		t.Errorf("%d rows, want %d", row, testRows)
	}
}

func (f Format) testLocate(t *testing.T) {
	tb := Random(testRows, testColumns)
	fields := []int{1, 4}
	src, _ := f.open(t, tb, fields...)
	for _, row := range []int64{0, testRows - 1, 17, 17, testRows / 2, testRows/2 + 1} {
		c, within, err := src.Locate(row)
		if err != nil {
			t.Fatal(err)
		}
		var b table.Batch
		if err := src.Decode(c, &b); err != nil {
			t.Fatal(err)
		}
		compare(t, tb, fields, row-int64(within), &b)
		src.Release(c)
	}
	for _, row := range []int64{-1, testRows} {
		if _, _, err := src.Locate(row); err == nil {
			t.Errorf("row %d of %d was found", row, testRows)
		}
	}
}

// drain reads a source to its end.
func drain(t *testing.T, src table.Source) {
	t.Helper()
	var b table.Batch
	for {
		c, err := src.Next(context.Background())
		if err == io.EOF {
			return
		}
		if err != nil {
			t.Fatal(err)
		}
		if err := src.Decode(c, &b); err != nil {
			t.Fatal(err)
		}
		src.Release(c)
	}
}

func (f Format) testDigest(t *testing.T) {
	src, path := f.open(t, Random(testRows, testColumns), 0)
	if _, _, ok := src.Digest(); ok {
		t.Error("there is a digest before anything was read")
	}
	drain(t, src)
	size, sum, ok := src.Digest()
	if !ok {
		return // the sink knows
	}
	content, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if want := sha256.Sum256(content); sum != want || size != int64(len(content)) {
		t.Errorf("digest %x of %d bytes, want %x of %d", sum, size, want, len(content))
	}
}

func (f Format) testCheck(t *testing.T) {
	changes := map[string]func(path string) error{
		"appended to": func(path string) error {
			file, err := os.OpenFile(path, os.O_APPEND|os.O_WRONLY, 0)
			if err != nil {
				return err
			}
			defer file.Close()
			_, err = file.WriteString("x")
			return err
		},
		"truncated": func(path string) error { return os.Truncate(path, 10) },
		"removed":   os.Remove,
		"replaced by its copy": func(path string) error {
			content, err := os.ReadFile(path)
			if err != nil {
				return err
			}
			info, err := os.Stat(path)
			if err != nil {
				return err
			}
			other := filepath.Join(filepath.Dir(path), "other")
			return errors.Join(os.WriteFile(other, content, 0o666), os.Chtimes(other, info.ModTime(), info.ModTime()), os.Rename(other, path))
		},
		"touched": func(path string) error { return os.Chtimes(path, time.Now(), time.Now().Add(time.Hour)) },
	}
	for name, change := range changes {
		t.Run(name, func(t *testing.T) {
			src, path := f.open(t, Random(testRows, testColumns), 0)
			drain(t, src)
			if err := src.Check(); err != nil {
				t.Fatal(err)
			}
			if err := change(path); err != nil {
				t.Fatal(err)
			}
			if src.Check() == nil {
				t.Error("nobody noticed")
			}
		})
	}
}

func (f Format) testCancel(t *testing.T) {
	src, _ := f.open(t, Random(testRows, testColumns), 0)
	ctx, stop := context.WithCancel(context.Background())
	if _, err := src.Next(ctx); err != nil {
		t.Fatal(err)
	}
	stop()
	if _, err := src.Next(ctx); !errors.Is(err, context.Canceled) {
		t.Errorf("Next returns %v, want context.Canceled", err)
	}
	if err := src.Close(); err != nil {
		t.Error(err)
	}
}

func (f Format) testSelect(t *testing.T) {
	src, _ := f.open(t, Random(10, testColumns), 0)
	for _, field := range []int{-1, testColumns} {
		if src.Select([]table.Want{{Field: field, As: table.Float}}, nil) == nil {
			t.Errorf("column %d of %d could be selected", field, testColumns)
		}
	}
}

func (f Format) testAbsent(t *testing.T) {
	for _, path := range []string{filepath.Join(t.TempDir(), "absent"), t.TempDir()} {
		if src, err := f.Open(path); err == nil {
			src.Close()
			t.Errorf("%s was opened", path)
		}
	}
}
