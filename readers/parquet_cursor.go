package readers

import (
	"fmt"
	"io"
	"math"
	"sync"

	"github.com/apache/arrow-go/v18/arrow/memory"
	"github.com/apache/arrow-go/v18/parquet"
	"github.com/apache/arrow-go/v18/parquet/file"
	"github.com/apache/arrow-go/v18/parquet/metadata"

	"catenrich/internal/fault"
	"catenrich/internal/parquetfoot"
	"catenrich/internal/table"
)

// A parquetCursor decodes the wanted columns of one row group, slice by slice,
// forward only: going back, or seeking without an offset index, would read the
// row group from its start again.
type parquetCursor struct {
	src      *Parquet
	group    int
	rows     int64
	skipping bool // slices that were passed over are dropped, not parked

	mu      sync.Mutex
	next    int // slice
	columns []leafColumn
	column  string // being decoded, for messages
	parked  map[int]*parkedSlice
	spare   []*parkedSlice
	err     error
}

// A parkedSlice was decoded on the way to a later one.
type parkedSlice struct {
	in    []table.Column
	cells []table.CellError
}

func newParquetCursor(p *Parquet, group int, rows int64) *parquetCursor {
	return &parquetCursor{src: p, group: group, rows: rows}
}

// take fills b.In and b.Cells with a slice, which can be taken once.
func (c *parquetCursor) take(index int, b *table.Batch) error {
	c.mu.Lock()
	defer c.mu.Unlock()
	if c.skipping && c.next > index {
		c.close()
		c.columns, c.next = nil, 0 // from the start again
	}
	for c.err == nil && c.next < index {
		s := c.parking()
		c.err = c.decode(s.in, &s.cells)
		if c.skipping {
			c.spare = append(c.spare, s)
		} else {
			c.parked[c.next-1] = s
		}
	}
	if s := c.parked[index]; s != nil && c.err == nil {
		delete(c.parked, index)
		b.In, s.in = s.in, b.In
		b.Cells = append(b.Cells, s.cells...)
		c.spare = append(c.spare, s)
		return nil
	}
	if c.err == nil && c.next != index {
		c.err = fault.Internal.Errorf("readers: slice %d of row group %d was asked for again", index, c.group)
	}
	if c.err == nil {
		c.err = c.decode(b.In, &b.Cells)
	}
	return c.err
}

// parking returns room for a slice.
func (c *parquetCursor) parking() *parkedSlice {
	if c.parked == nil {
		c.parked = make(map[int]*parkedSlice)
	}
	if n := len(c.spare); n > 0 {
		s := c.spare[n-1]
		c.spare = c.spare[:n-1]
		s.cells = s.cells[:0]
		return s
	}
	return &parkedSlice{in: make([]table.Column, len(c.src.wants))}
}

// forget drops a parked slice that nobody came for.
func (c *parquetCursor) forget(index int) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if s := c.parked[index]; s != nil {
		delete(c.parked, index)
		c.spare = append(c.spare, s)
	}
}

// reaches reports whether a slice is still ahead.
func (c *parquetCursor) reaches(index int) bool {
	c.mu.Lock()
	defer c.mu.Unlock()
	return c.err == nil && index >= c.next
}

// decode reads the next slice into the columns of in, one for each want. A
// panic of the library becomes an error like any other.
func (c *parquetCursor) decode(in []table.Column, cells *[]table.CellError) (err error) {
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("cannot be decoded: %v", r)
		}
		if err != nil {
			err = c.explain(err)
		}
	}()
	if c.columns == nil {
		if err := c.open(); err != nil {
			return err
		}
	}
	n := int(min(ParquetSlice, c.rows-int64(c.next)*ParquetSlice))
	for i, leaf := range c.src.leaves {
		c.column = c.src.footer.Leaves[leaf].Name
		if err := c.columns[i].read(n); err != nil {
			return err
		}
		for w := range c.src.wants {
			if c.src.leaf[c.src.wants[w].Field] == leaf {
				resize(&in[w], c.src.wants[w].As, n)
				if err := c.columns[i].fill(&in[w]); err != nil {
					return err
				}
				c.report(&in[w], cells)
			}
		}
	}
	c.next++
	if int64(c.next)*ParquetSlice >= c.rows {
		c.close()
	}
	return nil
}

// resize gives an input column n rows of a kind.
func resize(c *table.Column, k table.Kind, n int) {
	c.Resize(k, n)
	if cap(c.State) < n {
		c.State = make([]table.State, n)
	}
	c.State = c.State[:n]
}

// report adds the malformed cells of a column, as far as there is room.
func (c *parquetCursor) report(col *table.Column, cells *[]table.CellError) {
	for row := 0; row < len(col.State) && len(*cells) < table.MaxCells; row++ {
		if col.State[row] == table.Malformed {
			*cells = append(*cells, table.CellError{File: c.src.path, Column: c.column, Value: "infinite or too large",
				Row: int64(row) + 1, Err: errNotFinite})
		}
	}
}

// explain says where an error of decoding arose, and whose fault it is.
func (c *parquetCursor) explain(err error) error {
	if failed := c.src.failed.Load(); failed != nil {
		return fault.IO.Errorf("reading %s: %w", c.src.path, *failed)
	}
	return fault.Data.Errorf("%s: row group %d, column %q: %w", c.src.path, c.group, c.column, err)
}

// open makes a decoder for each wanted leaf, which sees a footer of this row
// group and these leaves alone.
func (c *parquetCursor) open() error {
	c.columns = []leafColumn{}
	if len(c.src.leaves) == 0 {
		return nil
	}
	c.column = c.src.footer.Leaves[c.src.leaves[0]].Name
	chunks, err := c.src.footer.Chunks(c.group, nil)
	if err != nil {
		return err
	}
	meta, err := metadata.NewFileMetaData(c.src.footer.Subset(c.group, c.src.leaves, chunks), nil)
	if err != nil {
		return err
	}
	meta.SetSourceFileSize(c.src.opened.size)
	r, err := file.NewParquetReader(io.NewSectionReader(c.src, 0, c.src.opened.size),
		file.WithMetadata(meta), file.WithReadProps(c.limits(chunks)))
	if err != nil {
		return err
	}
	group := r.RowGroup(0)
	for i, leaf := range c.src.leaves {
		c.column = c.src.footer.Leaves[leaf].Name
		pages, err := group.Column(i)
		if err != nil {
			return err
		}
		room := int(min(ParquetSlice, c.rows))
		column, err := newLeafColumn(&c.src.footer.Leaves[leaf], pages, room)
		if err != nil {
			return err
		}
		c.columns = append(c.columns, column)
	}
	return nil
}

// limits sets how large a page may be. The library's own limits refuse files
// that are in use, with a page of 99.9 MB in a row group of 20 M rows; but what a
// page says of its size must fit what the column chunk can hold, so that a
// damaged byte does not ask for all memory.
func (c *parquetCursor) limits(chunks []parquetfoot.Chunk) *parquet.ReaderProperties {
	props := parquet.NewReaderProperties(memory.NewGoAllocator())
	props.BufferedStreamEnabled = true
	stored, unpacked := int64(1), int64(1)
	for _, leaf := range c.src.leaves {
		stored = max(stored, chunks[leaf].Compressed+128) // old writers leave out a header
		unpacked = max(unpacked, roomOf(&c.src.footer.Leaves[leaf], &chunks[leaf]))
	}
	props.MaxCompressedPageSize = min(stored, math.MaxInt32)
	props.MaxUncompressedPageSize = min(unpacked, math.MaxInt32)
	return props
}

// roomOf returns the most bytes that an unpacked page of a chunk can have:
// values of fixed width and two levels each, or what the chunk says where
// values have any length.
func roomOf(leaf *parquetfoot.Leaf, k *parquetfoot.Chunk) int64 {
	width := int64(8)
	switch leaf.Physical {
	case parquetfoot.ByteArray:
		return max(parquet.DefaultMaxUncompressedPageSize, min(k.Uncompressed, math.MaxInt32)+1<<16)
	case parquetfoot.FixedLenByteArray:
		width = max(8, int64(leaf.Length))
	}
	if k.Values > math.MaxInt32/(width+8) {
		return math.MaxInt32
	}
	// A dictionary may have more entries than the chunk has values.
	return max(1<<20+k.Values*(width+8), min(k.Uncompressed, parquet.DefaultMaxUncompressedPageSize))
}

func (c *parquetCursor) close() {
	for _, column := range c.columns {
		column.close()
	}
	c.columns, c.spare = []leafColumn{}, nil
}
