// Package writertest is the suite that every writer must pass: what a
// [table.Sink] promises, whatever its format. A format's tests say how to
// write a small input, how to open it, how to make the sink, and how somebody
// else reads the output; and call [Test].
package writertest

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"sync"
	"testing"

	"catenrich/internal/table"
	"catenrich/readers/readertest"
)

// A Format is a pair of input and output format under test.
type Format struct {
	Write func(t testing.TB, dir string, tb readertest.Table) (path string)
	Open  func(path string) (table.Source, error)
	Sink  func(src table.Source, spec table.Spec) table.Sink

	// Read reads an output by means that share as little as possible with the
	// writer. Nulls are NaN, flags 0 and 1.
	Read func(t testing.TB, output []byte) readertest.Table
}

// Test runs the suite.
func Test(t *testing.T, f Format) {
	t.Run("what went in and what was added come back", func(t *testing.T) { f.testRoundTrip(t, 5000) })
	t.Run("no rows", func(t *testing.T) { f.testRoundTrip(t, 0) })
	t.Run("the same bytes at any order of encoding", f.testOrder)
	t.Run("an output that fails", f.testFailures)
}

// Added are the columns that the suite adds.
var Added = []table.Field{
	{Name: "added_length", Kind: table.Float, Type: table.Float64, Unit: "Mpc", Description: "a length of the suite"},
	{Name: "added_flag", Kind: table.Flag, Type: table.Bool},
	{Name: "added_status", Kind: table.Int, Type: table.Integer},
}

// Fill fills the columns of [Added] in a batch whose first row is row from.
func Fill(b *table.Batch, from int64) {
	for i := range b.Rows {
		row := from + int64(i)
		b.Out[0].Float[i] = math.Sqrt(float64(row)) * 1000
		b.Out[1].Flag[i] = uint8(row % 2)
		if row%7 == 0 {
			b.Out[0].Float[i] = math.NaN()
			b.Out[1].Flag[i] = table.Null
		}
		b.Out[2].Int[i] = int32(row % 1000)
	}
}

// added returns what [Fill] fills as a table.
func added(rows int) (tb readertest.Table) {
	tb.Columns = make([][]float64, len(Added))
	for _, f := range Added {
		tb.Names = append(tb.Names, f.Name)
	}
	for row := range rows {
		length, flag := math.Sqrt(float64(row))*1000, float64(row%2)
		if row%7 == 0 {
			length, flag = math.NaN(), math.NaN()
		}
		for i, v := range []float64{length, flag, float64(row % 1000)} {
			tb.Columns[i] = append(tb.Columns[i], v)
		}
	}
	return tb
}

// Run takes an input through a sink, with the columns of [Added]. Up to
// workers goroutines encode at once, the last chunks first.
func Run(src table.Source, sink table.Sink, out table.Output, workers int) error {
	if err := src.Select([]table.Want{{Field: 0, As: table.Float}}, Added); err != nil {
		return err
	}
	if err := sink.Begin(out); err != nil {
		return err
	}
	var chunks []*table.Chunk
	for {
		c, err := src.Next(context.Background())
		if err == io.EOF {
			break
		}
		if err != nil {
			return err
		}
		chunks = append(chunks, c)
	}
	batches := make([]table.Batch, len(chunks))
	row := int64(0)
	for i, c := range chunks {
		if err := src.Decode(c, &batches[i]); err != nil {
			return err
		}
		Fill(&batches[i], row)
		row += int64(batches[i].Rows)
	}
	pieces := make([]table.Piece, len(chunks))
	errs := make([]error, len(chunks))
	var wg sync.WaitGroup
	for worker := range workers {
		wg.Go(func() {
			for i := len(chunks) - 1 - worker; i >= 0; i -= workers {
				pieces[i], errs[i] = sink.Encode(chunks[i], &batches[i])
			}
		})
	}
	wg.Wait()
	for i, c := range chunks {
		if err := errors.Join(errs[i], sink.Append(pieces[i], c, &batches[i])); err != nil {
			return fmt.Errorf("chunk %d: %w", i, err)
		}
		src.Release(c)
	}
	return sink.Finish()
}

// run writes a table, and takes it through the sink.
func (f Format) run(t *testing.T, path string, out *Output, workers int) error {
	t.Helper()
	src, err := f.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	return Run(src, f.Sink(src, table.Spec{Added: Added}), out, workers)
}

func (f Format) testRoundTrip(t *testing.T, rows int) {
	tb := readertest.Random(rows, 4)
	out := NewOutput(t)
	if err := f.run(t, f.Write(t, t.TempDir(), tb), out, 1); err != nil {
		t.Fatal(err)
	}
	got, more := f.Read(t, out.Bytes), added(rows)
	want := readertest.Table{Names: append(tb.Names, more.Names...), Columns: append(tb.Columns, more.Columns...)}
	if fmt.Sprint(got.Names) != fmt.Sprint(want.Names) {
		t.Fatalf("the columns are %q, want %q", got.Names, want.Names)
	}
	if got.Rows() != rows {
		t.Fatalf("%d rows, want %d", got.Rows(), rows)
	}
	for i := range want.Columns {
		for row := range rows {
			if g, w := got.Columns[i][row], want.Columns[i][row]; math.Float64bits(g) != math.Float64bits(w) && !(g != g && w != w) {
				t.Fatalf("row %d, column %q: %v, want %v", row, want.Names[i], g, w)
			}
		}
	}
}

func (f Format) testOrder(t *testing.T) {
	path := f.Write(t, t.TempDir(), readertest.Random(5000, 4))
	var want []byte
	for _, workers := range []int{1, 2, 7} {
		out := NewOutput(t)
		if err := f.run(t, path, out, workers); err != nil {
			t.Fatal(err)
		}
		if want == nil {
			want = out.Bytes
		}
		if !bytes.Equal(out.Bytes, want) {
			t.Errorf("%d goroutines encode to other bytes than one", workers)
		}
	}
}

func (f Format) testFailures(t *testing.T) {
	path := f.Write(t, t.TempDir(), readertest.Random(500, 4))
	whole := NewOutput(t)
	if err := f.run(t, path, whole, 1); err != nil {
		t.Fatal(err)
	}
	for n := 1; n <= whole.Calls; n++ {
		out := NewOutput(t)
		out.FailAt = n
		if err := f.run(t, path, out, 1); !errors.Is(err, ErrInjected) {
			t.Errorf("when operation %d fails, the sink returns %v", n, err)
		}
	}
}
