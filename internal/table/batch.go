package table

import (
	"fmt"
	"math"
)

// A Kind is how a [Batch] holds a column.
type Kind uint8

// Numbers go in and out as float64; a status goes out as int32, a flag as a
// Bool; text comes in for positions in sexagesimal, quality marks and keys.
const (
	Float Kind = iota
	Int
	Flag
	Bytes
)

// A State says whether an input cell could be used.
type State uint8

// Missing is null, NaN, or an empty field. Malformed is text that is no
// number, or an infinity. Sentinels are the job's business, not the reader's.
const (
	Good State = iota
	Missing
	Malformed
)

// The values of a Flag cell.
const (
	False uint8 = iota
	True
	Null
)

// A Column is one column of a [Batch]. Only the slice of its Kind is set.
type Column struct {
	Kind  Kind
	Float []float64 // NaN where the cell is null
	Int   []int32   // never null
	Flag  []uint8   // False, True or Null
	Bytes [][]byte  // valid until the batch is reset; nil where null

	// State is set in input columns only, one entry a row.
	State []State
}

// Resize gives the column n rows of kind k, keeping its memory. The cells
// hold anything.
func (c *Column) Resize(k Kind, n int) {
	c.Kind = k
	switch k {
	case Float:
		c.Float = grow(c.Float, n)
	case Int:
		c.Int = grow(c.Int, n)
	case Flag:
		c.Flag = grow(c.Flag, n)
	case Bytes:
		c.Bytes = grow(c.Bytes, n)
	}
}

// grow returns s with length n, reallocated only where it is too small.
func grow[T any](s []T, n int) []T {
	if cap(s) < n {
		return make([]T, n, n+n/4)
	}
	return s[:n]
}

// SetFloat stores an input number. Infinities become Malformed, NaN Missing.
func (c *Column) SetFloat(row int, v float64) {
	c.Float[row], c.State[row] = v, Good
	switch {
	case v != v:
		c.State[row] = Missing
	case v > math.MaxFloat64 || v < -math.MaxFloat64:
		c.SetBad(row, Malformed)
	}
}

// SetBad marks an input cell as unusable.
func (c *Column) SetBad(row int, s State) {
	c.State[row] = s
	if c.Kind == Float {
		c.Float[row] = math.NaN()
	} else {
		c.Bytes[row] = nil
	}
}

// A Want is one input column that the job needs, and how it needs it.
type Want struct {
	Field int  // index into the Schema
	As    Kind // Float or Bytes
}

// A Batch is the decoded part of a [Chunk] and what was made of it. Batches
// are pooled: everything in one is overwritten by its next use.
type Batch struct {
	Rows    int      // rows that are really there, without the rejects
	In      []Column // one for each Want, in order
	Out     []Column // one for each added column, in order
	Rejects []Reject // records that have no row
	Cells   []CellError
	Marks   []int64 // line of each row where the format has lines; else empty
}

// MaxCells bounds the [CellError]s a batch keeps: they are for messages, and
// every bad cell is counted in the status column besides.
const MaxCells = 8

// Reset prepares the batch for a chunk of up to rows rows.
func (b *Batch) Reset(rows int, wants []Want, added []Field) {
	b.Rows, b.Rejects, b.Cells, b.Marks = rows, b.Rejects[:0], b.Cells[:0], b.Marks[:0]
	b.In, b.Out = grow(b.In, len(wants)), grow(b.Out, len(added))
	b.Resize(rows, wants, added)
}

// Resize gives every column n rows, once the reader knows how many there are.
func (b *Batch) Resize(n int, wants []Want, added []Field) {
	b.Rows = n
	for i, w := range wants {
		b.In[i].Resize(w.As, n)
		b.In[i].State = grow(b.In[i].State, n)
	}
	for i := range added {
		b.Out[i].Resize(added[i].Kind, n)
	}
}

// A Reject is a record that could not be made into a row.
type Reject struct {
	Line   int64 // from 1
	Offset int64 // of the record's first byte in the (uncompressed) input
	Reason string
	Record []byte // its own copy of the record's bytes, without the line end
}

// A CellError says which cell of which catalogue could not be used, and why.
// Its row is kept; the derived columns that needed the cell are null.
type CellError struct {
	File, Column, Value string // Value as it stands in the file
	Line                int64  // from 1; 0 if the format has no lines
	Row                 int64  // data rows, from 1; within the batch until the collector adds the rows before it
	Err                 error
}

func (e *CellError) Error() string {
	place := e.File
	if e.Line > 0 {
		place = fmt.Sprintf("%s:%d", e.File, e.Line)
	}
	return fmt.Sprintf("%s: row %d, column %q: value %q: %v (row kept, derived columns left empty)", place, e.Row, e.Column, e.Value, e.Err)
}

func (e *CellError) Unwrap() error { return e.Err }
