package readers

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"slices"
	"sort"
	"sync"
	"sync/atomic"

	"catenrich/internal/fault"
	"catenrich/internal/parquetfoot"
	"catenrich/internal/table"
)

// ParquetSlice is how many rows a chunk of a Parquet file has, but for the
// last of a row group. It is a constant of the format, because the writer makes
// one data page of each slice.
const ParquetSlice = 65536

// A Parquet is a [table.Source] of one Parquet file.
//
// Next only counts rows. The columns that are needed are decoded by Decode, on
// the worker that goes on with the slice: a row group has one cursor, which
// moves forward only, and whoever comes for a slice ahead of it decodes the
// slices between and parks them for their owners. No worker ever waits for a
// slice that nobody may come for.
//
// Begin reading here; parquet_cursor.go decodes a row group, parquet_values.go
// turns its values into columns of a batch.
type Parquet struct {
	path   string
	file   *os.File
	opened stamp
	footer *parquetfoot.Footer
	schema table.Schema
	leaf   []int // of each field of the schema; -1 for a group

	wants  []table.Want
	added  []table.Field
	leaves []int // the leaves that are wanted, in rising order, each once

	group  int // of the next chunk
	within int64
	seq    int64
	now    *parquetCursor

	locating sync.Mutex
	located  *parquetCursor // of the last Locate

	failed atomic.Pointer[error] // the first failure of reading the file
}

// OpenParquet opens a file and checks its footer. A file that is not there is
// a fault.NoInput; one that is not Parquet, is damaged, or has what cannot be
// grafted onto (encryption, columns in other files) is a fault.Data.
func OpenParquet(path string) (*Parquet, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, fault.NoInput.Wrap(err)
	}
	p := &Parquet{path: path, file: f}
	if err := p.open(); err != nil {
		f.Close()
		return nil, err
	}
	return p, nil
}

func (p *Parquet) open() error {
	info, err := p.file.Stat()
	if err == nil && !info.Mode().IsRegular() {
		err = fmt.Errorf("%s is no regular file", p.path)
	}
	if err != nil {
		return fault.NoInput.Wrap(err)
	}
	if p.opened, err = stampFile(p.file); err != nil {
		return err
	}
	if p.footer, err = parquetfoot.Read(p, p.opened.size); err != nil {
		if failed := p.failed.Load(); failed != nil {
			return fault.IO.Errorf("reading %s: %w", p.path, *failed)
		}
		return fault.Data.Errorf("%s: %w", p.path, err)
	}
	p.schema.File = p.path
	for i := range p.footer.Columns {
		node := &p.footer.Columns[i]
		field := table.Field{Name: node.Name, Type: table.Other}
		if node.Leaf >= 0 {
			field.Type = typeOfLeaf(&p.footer.Leaves[node.Leaf])
		}
		p.schema.Fields = append(p.schema.Fields, field)
		p.leaf = append(p.leaf, node.Leaf)
	}
	return nil
}

// ReadAt reads the file and remembers a failure that is not its end, so that a
// bad disk is not taken for a bad file.
func (p *Parquet) ReadAt(b []byte, off int64) (int, error) {
	n, err := p.file.ReadAt(b, off)
	if err != nil && !errors.Is(err, io.EOF) {
		p.failed.CompareAndSwap(nil, &err)
	}
	return n, err
}

// Schema lists every column in file order: a group by its own name and of type
// Other, then what is in it, named with dots.
func (p *Parquet) Schema() *table.Schema { return &p.schema }

// Rows returns how many rows the footer says there are.
func (p *Parquet) Rows() int64 { return p.footer.Rows }

// Footer returns the file's footer, for the writer that extends it.
func (p *Parquet) Footer() *parquetfoot.Footer { return p.footer }

// File returns the open file and its size, for the writer that copies it.
func (p *Parquet) File() (*os.File, int64) { return p.file, p.opened.size }

// Select implements [table.Source]. A column that cannot be had in the wanted
// way is a fault.Data.
func (p *Parquet) Select(wants []table.Want, added []table.Field) error {
	p.wants, p.added, p.leaves = wants, added, nil
	for _, w := range wants {
		if w.Field < 0 || w.Field >= len(p.schema.Fields) {
			return fault.Internal.Errorf("readers: column %d of %s was asked for, and it has %d", w.Field, p.path, len(p.schema.Fields))
		}
		f := &p.schema.Fields[w.Field]
		if err := canHave(f.Type, w.As); err != nil {
			return fault.Data.Errorf("%s: column %q %w", p.path, f.Name, err)
		}
		p.leaves = append(p.leaves, p.leaf[w.Field])
	}
	sort.Ints(p.leaves)
	p.leaves = slices.Compact(p.leaves)
	return nil
}

// canHave says why a column of type t cannot be had as kind k.
func canHave(t table.Type, k table.Kind) error {
	switch {
	case t == table.Other:
		return errors.New("is repeated, nested or of a type that holds neither numbers nor text: name another column")
	case k == table.Float && !t.Numeric():
		return fmt.Errorf("is %v, and a number is needed: name another column", t)
	case k != table.Float && k != table.Bytes:
		return fmt.Errorf("cannot be had as kind %d", k)
	}
	return nil
}

// A parquetSlice is what a chunk of this source is decoded from.
type parquetSlice struct {
	cursor *parquetCursor
	index  int // of the slice in its row group
}

// Next implements [table.Source]. Row groups without rows have no chunk.
func (p *Parquet) Next(ctx context.Context) (*table.Chunk, error) {
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	for ; p.group < p.footer.Groups(); p.group++ {
		first, rows := p.footer.GroupRows(p.group)
		if p.within == rows {
			p.within, p.now = 0, nil
			continue
		}
		if p.now == nil {
			p.now = newParquetCursor(p, p.group, rows)
		}
		c := sliceChunk(p.now, first, rows, int(p.within/ParquetSlice), p.seq)
		p.seq++
		p.within += int64(c.Rows)
		return c, nil
	}
	return nil, io.EOF
}

// sliceChunk describes one slice of a row group.
func sliceChunk(cursor *parquetCursor, first, rows int64, index int, seq int64) *table.Chunk {
	at := int64(index) * ParquetSlice
	n := min(ParquetSlice, rows-at)
	return &table.Chunk{Seq: seq, FirstRow: first + at, Rows: int(n), Group: cursor.group, Last: at+n == rows,
		Cols: parquetSlice{cursor, index}}
}

// Decode implements [table.Source]. A page that cannot be decoded is a
// fault.Data that names row group and column.
func (p *Parquet) Decode(c *table.Chunk, b *table.Batch) error {
	s := c.Cols.(parquetSlice)
	b.Reset(c.Rows, p.wants, p.added)
	return s.cursor.take(s.index, b)
}

// Release implements [table.Source].
func (p *Parquet) Release(c *table.Chunk) {
	s := c.Cols.(parquetSlice)
	s.cursor.forget(s.index)
}

// Locate implements [table.Source]. Rows asked for in rising order share one
// pass over their row group.
func (p *Parquet) Locate(row int64) (*table.Chunk, int, error) {
	if row < 0 || row >= p.footer.Rows {
		return nil, 0, fault.Data.Errorf("%s has %d rows: there is no row %d", p.path, p.footer.Rows, row+1)
	}
	seq, g := int64(0), 0
	first, rows := p.footer.GroupRows(0)
	for row >= first+rows {
		seq += (rows + ParquetSlice - 1) / ParquetSlice
		g++
		first, rows = p.footer.GroupRows(g)
	}
	index := int((row - first) / ParquetSlice)
	p.locating.Lock()
	defer p.locating.Unlock()
	if p.located == nil || p.located.group != g || !p.located.reaches(index) {
		p.located = newParquetCursor(p, g, rows)
		p.located.skipping = true
	}
	c := sliceChunk(p.located, first, rows, index, seq+int64(index))
	return c, int(row - c.FirstRow), nil
}

// Digest implements [table.Source]: only the writer reads the whole file.
func (p *Parquet) Digest() (size int64, sum [32]byte, ok bool) { return p.opened.size, sum, false }

// Check implements [table.Source].
func (p *Parquet) Check() error { return p.opened.check(p.file) }

// Close implements [table.Source].
func (p *Parquet) Close() error {
	p.now, p.located = nil, nil
	return p.file.Close()
}
