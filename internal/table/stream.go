package table

import (
	"context"
	"io"
	"os"
)

// A Chunk is a run of consecutive rows of one input, in input order.
type Chunk struct {
	Seq      int64 // from 0, without gaps
	FirstRow int64 // from 0; known beforehand only where the format counts its rows
	Rows     int   // exact where the format counts its rows, else an upper bound
	Group    int   // row group, where the format has them
	Last     bool  // the last chunk of its row group
	Raw      []byte
	Line     int64 // line of Raw's first byte, from 1, where the format has lines
	Offset   int64 // of Raw's first byte in the uncompressed input
	Consumed int64 // bytes of the input file read so far, for progress
	Cols     any   // what its Source needs to Decode it; nobody else looks
}

// A Source reads one input. One goroutine calls Next; any number may call
// Decode at once, each with its own chunk and batch.
type Source interface {
	// Schema is known as soon as the source is open.
	Schema() *Schema

	// Select names the columns that Decode will fill, before the first Next.
	// added is what the sink will append, so that batches can be sized.
	Select(wants []Want, added []Field) error

	// Next returns the next chunk, or io.EOF after the last. The chunk is the
	// caller's until it gives it to Release.
	Next(context.Context) (*Chunk, error)

	// Decode fills b.In, b.Rows, b.Rejects and b.Cells from the chunk. The
	// batch may point into the chunk.
	Decode(c *Chunk, b *Batch) error

	// Release returns a chunk's memory. Nothing may use it, or a batch that
	// was decoded from it, afterwards.
	Release(c *Chunk)

	// Locate returns the chunk that holds a data row, and the row's place among
	// the rows that Decode makes of it. For verify and explain, not for speed.
	Locate(row int64) (c *Chunk, within int, err error)

	// Digest returns size and SHA-256 of the input as it stands in its file,
	// after the last chunk; ok is false where nobody read the whole of it,
	// and the sink, which copied it, knows.
	Digest() (size int64, sum [32]byte, ok bool)

	// Check proves that the file is the one that was opened, unchanged: same
	// size, modification and change times, and inode.
	Check() error

	io.Closer
}

// A Spec is what a sink is told of the columns it appends.
type Spec struct {
	Added    []Field
	Digits   int    // significant digits of floats in text; 0 is shortest round trip
	Narrow   bool   // floats are stored as float32
	Encoding string // format-specific names, validated by the job
	Codec    string
	Level    int

	// Metadata that the format can carry: keys in order, values as they are.
	Metadata []KeyValue
}

// A KeyValue is one entry of a file's key-value metadata.
type KeyValue struct{ Key, Value string }

// A Piece is a chunk's part of the output, ready to be written: one part, or
// one for each new column.
type Piece struct {
	Parts [][]byte
	Meta  any // what its Sink needs to Append it; nobody else looks
}

// A Sink writes one output. Any number of goroutines may call Encode at once;
// one calls the rest, Append in chunk order.
type Sink interface {
	Begin(Output) error                   // the header, or the verbatim input
	Encode(*Chunk, *Batch) (Piece, error) // the heavy work; the piece is its own memory
	Append(Piece, *Chunk, *Batch) error
	Finish() error // indexes, footer, padding

	// Verbatim returns how many bytes at the start of the output are the
	// whole input, byte for byte, and their SHA-256; 0 where the format does
	// not copy the input whole. It is known after Begin.
	Verbatim() (size int64, sum [32]byte)
}

// An Output is a file under construction. It hashes what is written to it, and
// becomes visible only when its publisher says so. Tests inject faults here.
type Output interface {
	io.Writer
	Offset() int64

	// CopyRange appends n bytes of src from off, sharing or copying them in
	// the kernel where the filesystem can.
	CopyRange(src *os.File, off, n int64) error

	// Patch overwrites bytes that were written before. It costs a second
	// read of the file for its digest, so only headers of known size use it.
	Patch(off int64, p []byte) error

	// Sum returns the SHA-256 of what has been written so far.
	Sum() [32]byte

	// Scratch returns an unlinked temporary file beside the output.
	Scratch() (*os.File, error)
}
