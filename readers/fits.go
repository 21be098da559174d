package readers

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"sync"

	"catenrich/internal/fault"
	"catenrich/internal/fitshead"
	"catenrich/internal/table"
)

// FITSOptions say which table of a FITS file is read. The zero value is the
// first binary table.
type FITSOptions struct {
	// HDU is the table's number, 0 being the primary header, or its EXTNAME:
	// the first that bears it, compared without case.
	HDU string

	// ChunkSize is how many bytes of rows a chunk has at most; 0 is
	// [FITSChunkSize]. Only tests set it.
	ChunkSize int
}

const (
	// FITSChunkSize is how many bytes of rows make a chunk; a longer row is
	// one of its own. It is a constant of the format, because a compressed
	// output is compressed chunk by chunk.
	FITSChunkSize = 1 << 20

	maxFITSRows = 1 << 16 // of a chunk
)

// A FITS is a [table.Source] of one binary table in a FITS file, plain or
// compressed by gzip.
//
// The file is read twice: as far as the header of the table when it is opened
// (fits_find.go), and then from its beginning to its end, so that the writer
// can copy what stands before and behind the rows, and all bytes are digested
// on the way (fits_stream.go). Decode takes numbers out of the rows
// (fits_values.go).
type FITS struct {
	path    string
	file    *os.File
	opened  stamp
	packed  bool // the file is compressed
	options FITSOptions
	hdu     int   // of the table
	at      int64 // of its header in the uncompressed file
	table   *fitshead.Table
	schema  table.Schema

	wants []table.Want
	added []table.Field

	chunkRows int64
	stream    *fitsStream // nil before the first byte is asked for
	row       int64       // of the next chunk
	pending   error       // what Next returns from now on
	warnings  []string

	locating sync.Mutex
	finder   *fitsStream // of a compressed file
}

// A fitsChunk is a chunk with the memory that goes with it.
type fitsChunk struct {
	table.Chunk
	buffer []byte
}

var fitsChunks = sync.Pool{New: func() any { return new(fitsChunk) }}

// OpenFITS opens a file and finds its table. A file that is not there is a
// fault.NoInput; one that is not FITS, is cut short, or has no such table is a
// fault.Data.
func OpenFITS(path string, o FITSOptions) (*FITS, error) {
	file, err := os.Open(path)
	if err != nil {
		return nil, fault.NoInput.Wrap(err)
	}
	f := &FITS{path: path, file: file, options: o}
	if err := f.open(); err != nil {
		file.Close()
		return nil, err
	}
	return f, nil
}

func (f *FITS) open() error {
	info, err := f.file.Stat()
	if err == nil && !info.Mode().IsRegular() {
		err = fmt.Errorf("%s is no regular file", f.path)
	}
	if err != nil {
		return fault.NoInput.Wrap(err)
	}
	if f.opened, err = stampFile(f.file); err != nil {
		return err
	}
	if err := f.find(); err != nil {
		return err
	}
	if f.options.ChunkSize == 0 {
		f.options.ChunkSize = FITSChunkSize
	}
	f.chunkRows = max(1, min(int64(f.options.ChunkSize)/max(f.table.RowBytes, 1), maxFITSRows))
	f.schema.File = f.path
	for i := range f.table.Columns {
		c := &f.table.Columns[i]
		f.schema.Fields = append(f.schema.Fields, table.Field{Name: c.Name, Type: typeOfFITS(c), Unit: c.Unit, UCD: c.UCD, Description: c.Comment})
	}
	return nil
}

// Schema lists every column of the table in file order.
func (f *FITS) Schema() *table.Schema { return &f.schema }

// Table returns the table's header, for the writer that extends it.
func (f *FITS) Table() *fitshead.Table { return f.table }

// Warnings are what a user should know of the file; known after its end.
func (f *FITS) Warnings() []string { return f.warnings }

// Select implements [table.Source]. A column that cannot be had in the wanted
// way is a fault.Data.
func (f *FITS) Select(wants []table.Want, added []table.Field) error {
	for _, w := range wants {
		if w.Field < 0 || w.Field >= len(f.schema.Fields) {
			return fault.Internal.Errorf("readers: column %d of %s was asked for, and it has %d", w.Field, f.path, len(f.schema.Fields))
		}
		field := &f.schema.Fields[w.Field]
		if err := canHave(field.Type, w.As); err != nil {
			return fault.Data.Errorf("%s: column %q %w", f.path, field.Name, err)
		}
	}
	f.wants, f.added = wants, added
	return nil
}

// Next implements [table.Source]. Every chunk but the last has equally many
// rows.
func (f *FITS) Next(ctx context.Context) (*table.Chunk, error) {
	if f.pending != nil {
		return nil, f.pending
	}
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	err := f.start(ctx)
	if err == nil {
		err = f.copyTo(io.Discard, f.rowOffset(f.row))
	}
	if err != nil {
		f.pending = err
		return nil, err
	}
	if f.row == f.table.Rows {
		f.pending = io.EOF
		return nil, io.EOF
	}
	c := f.chunk(f.row)
	if _, err := io.ReadFull(f.stream, c.Raw); err != nil {
		fitsChunks.Put(c.Cols.(*fitsChunk))
		f.pending = f.readError(f.stream, err)
		return nil, f.pending
	}
	c.Consumed = f.stream.raw
	f.row += int64(c.Rows)
	return c, nil
}

// chunk returns the chunk that begins with a row, without the row's bytes.
func (f *FITS) chunk(row int64) *table.Chunk {
	rows := min(f.chunkRows, f.table.Rows-row)
	size := int(rows * f.table.RowBytes)
	c := fitsChunks.Get().(*fitsChunk)
	if cap(c.buffer) < size {
		c.buffer = make([]byte, size)
	}
	c.Chunk = table.Chunk{Seq: row / f.chunkRows, FirstRow: row, Rows: int(rows), Raw: c.buffer[:size], Offset: f.rowOffset(row), Cols: c}
	return &c.Chunk
}

// rowOffset is where a row begins in the uncompressed file.
func (f *FITS) rowOffset(row int64) int64 {
	return f.at + f.table.Header.Size() + row*f.table.RowBytes
}

// Release implements [table.Source].
func (f *FITS) Release(c *table.Chunk) {
	if own := c.Cols.(*fitsChunk); cap(own.buffer) <= 4*FITSChunkSize {
		fitsChunks.Put(own)
	}
}

// Locate implements [table.Source]. In a compressed file, rows asked for in
// rising order share one pass.
func (f *FITS) Locate(row int64) (*table.Chunk, int, error) {
	if row < 0 || row >= f.table.Rows {
		return nil, 0, fault.Data.Errorf("%s has %d rows: there is no row %d", f.path, f.table.Rows, row+1)
	}
	within := row % f.chunkRows
	c := f.chunk(row - within)
	var err error
	if f.packed {
		err = f.fillPacked(c)
	} else if _, err = f.file.ReadAt(c.Raw, c.Offset); errors.Is(err, io.EOF) {
		err = f.cutShort()
	} else if err != nil {
		err = fault.IO.Errorf("reading %s: %w", f.path, err)
	}
	if err != nil {
		f.Release(c)
		return nil, 0, err
	}
	return c, int(within), nil
}

// fillPacked reads a chunk out of a compressed file.
func (f *FITS) fillPacked(c *table.Chunk) error {
	f.locating.Lock()
	defer f.locating.Unlock()
	if f.finder == nil || f.finder.at > c.Offset {
		finder, err := f.newStream(nil)
		if err != nil {
			return err
		}
		f.finder = finder
	}
	err := f.finder.copy(io.Discard, c.Offset-f.finder.at)
	if err == nil {
		_, err = io.ReadFull(f.finder, c.Raw)
	}
	if err != nil {
		err = f.readError(f.finder, err)
		f.finder = nil
	}
	return err
}

// Digest implements [table.Source]. It reads what is left behind the rows,
// unless the writer has done so.
func (f *FITS) Digest() (size int64, sum [32]byte, ok bool) {
	if f.pending != io.EOF || f.stream == nil {
		return 0, sum, false
	}
	if f.start(context.Background()) != nil || f.stream.drain() != nil {
		return 0, sum, false
	}
	return f.stream.feed.Digest()
}

// Check implements [table.Source].
func (f *FITS) Check() error { return f.opened.check(f.file) }

// Close implements [table.Source].
func (f *FITS) Close() error {
	if f.stream != nil {
		return f.stream.feed.Close(true)
	}
	return f.file.Close()
}
