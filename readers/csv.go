// Package readers opens catalogues: one file format each, behind the one
// interface of internal/table, a Source. A reader knows its format and nothing
// of cosmology, of jobs, or of what the rows are for.
//
// [OpenCSV] reads delimited text. Begin there: csv.go has the life of a chunk,
// csv_head.go the header, csv_cut.go where the text is cut, csv_decode.go how
// records become columns, csv_locate.go the way back to one row; feed.go reads
// ahead and digests. [OpenParquet] reads Parquet (parquet.go), [OpenFITS] a
// table of a FITS file (fits.go).
package readers

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"strings"
	"sync"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"

	"catenrich/internal/delim"
	"catenrich/internal/fault"
	"catenrich/internal/table"
)

// A Header says where the names of the columns stand.
type Header uint8

const (
	// HeaderLine: the first line that is neither blank nor a comment.
	HeaderLine Header = iota
	// HeaderNone: there is none. Without CSVOptions.Names, the columns are
	// called by their numbers: 1, 2 and so on.
	HeaderNone
	// HeaderCommented: the last comment line before the first record.
	HeaderCommented
)

// CSVOptions say how a text is to be read. The zero value is RFC 4180 with a
// header line.
type CSVOptions struct {
	Delimiter       byte     // 0 is ','; ' ' is any run of spaces and tabs
	NoQuote         bool     // a double quote is text like any other
	Comment         string   // begins lines that are copied and are no rows; "" is none, or "#" with HeaderCommented
	Header          Header   // where the names stand
	HeaderDelimiter byte     // 0 is Delimiter
	Names           []string // one for each column; replaces what the header says

	// BlockSize is how much text a chunk is cut from, in bytes; 0 is
	// [CSVBlockSize]. Only tests set it.
	BlockSize int
}

const (
	// CSVBlockSize is the text from which a chunk is cut: as many whole
	// records as it holds, or one if it holds none. It is a constant of the
	// format, because a compressed output has one member for each chunk.
	CSVBlockSize = 1 << 20

	// MaxRecord is the longest record that is read, in bytes.
	MaxRecord = 128 << 20
)

// Validate returns an error that joins what is wrong with the options.
func (o CSVOptions) Validate() error {
	var faults []error
	d, h := o.dialects()
	if err := d.Validate(); err != nil {
		faults = append(faults, err)
	}
	if h.Delimiter != d.Delimiter {
		if err := h.Validate(); err != nil {
			faults = append(faults, fmt.Errorf("of the header: %w", err))
		}
	}
	if o.Header > HeaderCommented {
		faults = append(faults, fmt.Errorf("there is no kind of header %d", o.Header))
	}
	return errors.Join(faults...)
}

// dialects returns the punctuation of the records and that of the header.
func (o CSVOptions) dialects() (records, header delim.Dialect) {
	records = delim.Dialect{Delimiter: o.Delimiter, Quote: !o.NoQuote, Comment: o.Comment}
	if records.Delimiter == 0 {
		records.Delimiter = ','
	}
	if o.Header == HeaderCommented && o.Comment == "" {
		records.Comment = "#"
	}
	header = records
	if o.HeaderDelimiter != 0 {
		header.Delimiter = o.HeaderDelimiter
	}
	return records, header
}

// A CSV is a [table.Source] of delimited text.
//
// Next cuts the text into chunks of whole records, by searching for line ends
// and quotes alone; Decode, which runs on many cores, splits the records.
type CSV struct {
	name    string
	file    *os.File // nil for a stream
	opened  stamp
	options CSVOptions
	dialect delim.Dialect
	head    head
	schema  table.Schema
	wants   []table.Want
	added   []table.Field
	located int // fields of a record up to the last that is wanted

	feed    *feed
	text    io.Reader // the feed, decompressed
	ended   bool      // text has ended
	stash   []byte    // text that was read beyond the last chunk,
	stashed int       // and how much of it has been taken again
	seq     int64
	offset  int64 // of the next chunk
	line    int64 // of the next chunk
	pending error // what Next returns from now on

	finder *finder
}

// A csvChunk is a chunk with the memory that goes with it.
type csvChunk struct {
	table.Chunk
	buffer []byte
	rows   Rows
}

var csvChunks = sync.Pool{New: func() any { return new(csvChunk) }}

// OpenCSV opens a file. By the suffix of its name it is gzip (.gz, any number
// of members), zstd (.zst, any number of frames), or plain text. The header
// has been read when it returns. A file that is not there is a fault.NoInput,
// one without a header a fault.Data.
func OpenCSV(path string, o CSVOptions) (*CSV, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, fault.NoInput.Wrap(err)
	}
	info, err := f.Stat()
	if err == nil && !info.Mode().IsRegular() {
		err = fmt.Errorf("%s is no regular file: give a stream through standard input, as -", path)
	}
	if err != nil {
		f.Close()
		return nil, fault.NoInput.Wrap(err)
	}
	opened, err := stampFile(f)
	if err != nil {
		f.Close()
		return nil, err
	}
	return open(&CSV{name: path, file: f, opened: opened}, f, o)
}

// NewCSV reads plain text from a stream, as standard input, which name stands
// for in messages. The header has been read when it returns.
func NewCSV(name string, r io.ReadCloser, o CSVOptions) (*CSV, error) {
	return open(&CSV{name: name}, r, o)
}

// open starts reading, and reads the header. It closes r if it fails.
func open(s *CSV, r io.ReadCloser, o CSVOptions) (*CSV, error) {
	if err := o.Validate(); err != nil {
		r.Close()
		return nil, fault.Config.Errorf("%s: %w", s.name, err)
	}
	if o.BlockSize == 0 {
		o.BlockSize = CSVBlockSize
	}
	s.options = o
	s.dialect, _ = o.dialects()
	s.line = 1
	s.feed = newFeed(r)
	s.text = s.feed
	err := s.decompress()
	if err == nil {
		err = s.readHead()
	}
	if err != nil {
		s.Close()
		return nil, err
	}
	return s, nil
}

// decompress puts a decompressor before the feed where the name asks for one.
func (s *CSV) decompress() error {
	if s.file == nil {
		return nil
	}
	switch lower := strings.ToLower(s.name); {
	case strings.HasSuffix(lower, ".gz"):
		z, err := gzip.NewReader(s.feed)
		if err == io.EOF {
			return fault.Data.Errorf("%s is empty", s.name)
		}
		if err != nil {
			return s.readError(err)
		}
		s.text = z
	case strings.HasSuffix(lower, ".zst"):
		z, err := zstd.NewReader(s.feed, zstd.WithDecoderConcurrency(1), zstd.WithDecoderLowmem(true), zstd.WithDecoderMaxWindow(MaxRecord))
		if err != nil {
			return s.readError(err)
		}
		s.text = z
	}
	return nil
}

// readError says which failed, the reading or the decompressing.
func (s *CSV) readError(err error) error {
	if ctx := s.feed.ctx.Err(); ctx != nil {
		return ctx
	}
	if raw := s.feed.failure(); raw != nil {
		return fault.IO.Errorf("reading %s: %w", s.name, raw)
	}
	if errors.Is(err, errClosed) {
		return fault.IO.Errorf("reading %s: %w", s.name, err)
	}
	return fault.Data.Errorf("%s cannot be decompressed, it is damaged or cut short: %w", s.name, err)
}

// Schema lists the columns; every one is Untyped.
func (s *CSV) Schema() *table.Schema { return &s.schema }

// Select implements [table.Source].
func (s *CSV) Select(wants []table.Want, added []table.Field) error {
	s.located = 0
	for _, w := range wants {
		if w.Field < 0 || w.Field >= len(s.schema.Fields) {
			return fault.Internal.Errorf("readers: column %d of %s was asked for, and it has %d", w.Field, s.name, len(s.schema.Fields))
		}
		if w.As != table.Float && w.As != table.Bytes {
			return fault.Internal.Errorf("readers: text can be had as float or bytes, not as kind %d", w.As)
		}
		s.located = max(s.located, w.Field+1)
	}
	s.wants, s.added = wants, added
	return nil
}

// Next implements [table.Source]. Chunk.Rows is the number of lines, which is
// at least the number of rows; Chunk.FirstRow is not known and 0. A quote that
// is not closed and a record longer than [MaxRecord] are errors of class
// fault.Data, after the chunk of the records before them.
func (s *CSV) Next(ctx context.Context) (*table.Chunk, error) {
	if s.pending != nil {
		return nil, s.pending
	}
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	s.feed.ctx = ctx
	c := csvChunks.Get().(*csvChunk)
	n, err := s.cutChunk(c)
	if err != nil {
		s.pending = err
		if n == 0 {
			s.recycle(c)
			return nil, err
		}
	}
	raw := c.buffer[:n]
	ends := delim.CountLineEnds(raw)
	rows := ends
	if last := raw[n-1]; last != '\n' && last != '\r' {
		rows++
	}
	c.rows.reset()
	c.Chunk = table.Chunk{Seq: s.seq, Rows: rows, Raw: raw, Line: s.line, Offset: s.offset, Consumed: s.feed.taken, Cols: c}
	s.seq++
	s.line += int64(ends)
	s.offset += int64(n)
	return &c.Chunk, nil
}

// Release implements [table.Source].
func (s *CSV) Release(c *table.Chunk) { s.recycle(c.Cols.(*csvChunk)) }

// recycle keeps a chunk's memory, unless a long record made it large.
func (s *CSV) recycle(c *csvChunk) {
	if cap(c.buffer) <= 4*CSVBlockSize {
		csvChunks.Put(c)
	}
}

// Digest implements [table.Source]. Of a compressed file it is that of the
// compressed bytes.
func (s *CSV) Digest() (size int64, sum [32]byte, ok bool) {
	if s.pending != io.EOF {
		return 0, sum, false
	}
	return s.feed.Digest()
}

// Check implements [table.Source]. Of a stream there is nothing to check.
func (s *CSV) Check() error {
	if s.file == nil {
		return nil
	}
	return s.opened.check(s.file)
}

// Close implements [table.Source]. It may be called while Next waits for a
// stream, and ends that wait.
func (s *CSV) Close() error {
	err := s.feed.Close(s.file != nil)
	if s.finder != nil {
		err = errors.Join(err, s.finder.close())
	}
	return err
}
