package writers

import (
	"bufio"
	"encoding/binary"
	"io"
	"math"

	"catenrich/internal/fault"
	"catenrich/internal/parquetfoot"
)

// A columnChunk is what is known of one new column in one row group once its
// pages are written.
type columnChunk struct {
	column  *newColumn
	codec   int32
	ordered bool  // min and max mean something: the file has column_orders
	offset  int64 // of the first page
	pages   []pageMeta
}

// total merges the metadata of the pages.
func (k *columnChunk) total() pageMeta {
	t := pageMeta{lo: math.Inf(1), hi: math.Inf(-1)}
	for i := range k.pages {
		p := &k.pages[i]
		t.rows += p.rows
		t.nulls += p.nulls
		t.lo, t.hi = min(t.lo, p.lo), max(t.hi, p.hi)
		t.unpacked += p.unpacked
		t.stored += p.stored
	}
	return t
}

// metadata encodes the ColumnMetaData.
func (k *columnChunk) metadata(e *parquetfoot.Encoder) {
	t := k.total()
	e.I32(1, int32(k.column.physical))
	if k.column.encoding == encodingPlain {
		e.I32s(2, encodingPlain, encodingRLE)
	} else {
		e.I32s(2, encodingRLE, k.column.encoding)
	}
	e.Binaries(3, [][]byte{[]byte(k.column.name)})
	e.I32(4, k.codec)
	e.I64(5, int64(t.rows))
	e.I64(6, int64(t.unpacked))
	e.I64(7, int64(t.stored))
	e.I64(9, k.offset)
	e.Struct(12)
	writeStatistics(e, k.column.physical, int64(t.nulls), t.lo, t.hi, k.ordered && !t.empty())
	e.End()
	if len(k.pages) > 0 {
		e.Structs(13, 1) // encoding_stats
		e.Element()
		e.I32(1, pageData)
		e.I32(2, k.column.encoding)
		e.I32(3, int32(len(k.pages)))
		e.End()
	}
	e.End()
}

// writeStatistics writes the fields of Statistics: the counts and, if there
// are values, their bounds under the old names and the new ones.
func writeStatistics(e *parquetfoot.Encoder, p parquetfoot.Physical, nulls int64, lo, hi float64, bounds bool) {
	if !bounds {
		e.I64(3, nulls)
		return
	}
	low, high := encodeBound(p, lo, false), encodeBound(p, hi, true)
	e.Binary(1, high)
	e.Binary(2, low)
	e.I64(3, nulls)
	e.Binary(5, high)
	e.Binary(6, low)
}

// encodeBound encodes a bound as a value of the column. The format asks for a
// zero to be -0 as a lower bound and +0 as an upper one, since it orders them
// and arithmetic does not.
func encodeBound(p parquetfoot.Physical, v float64, upper bool) []byte {
	if v == 0 {
		v = 0
		if !upper {
			v = math.Copysign(0, -1)
		}
	}
	switch p {
	case parquetfoot.Double:
		return binary.LittleEndian.AppendUint64(nil, math.Float64bits(v))
	case parquetfoot.Float:
		return binary.LittleEndian.AppendUint32(nil, math.Float32bits(float32(v)))
	case parquetfoot.Int32:
		return binary.LittleEndian.AppendUint32(nil, uint32(int32(v)))
	}
	return []byte{byte(v)}
}

// columnIndex encodes the ColumnIndex: the bounds of each page.
func (k *columnChunk) columnIndex(e *parquetfoot.Encoder) {
	nulls, low, high := make([]bool, len(k.pages)), make([][]byte, len(k.pages)), make([][]byte, len(k.pages))
	counts := make([]int64, len(k.pages))
	for i := range k.pages {
		p := &k.pages[i]
		nulls[i], counts[i] = p.empty(), int64(p.nulls)
		if !p.empty() {
			low[i], high[i] = encodeBound(k.column.physical, p.lo, false), encodeBound(k.column.physical, p.hi, true)
		}
	}
	e.Bools(1, nulls)
	e.Binaries(2, low)
	e.Binaries(3, high)
	e.I32(4, k.boundaryOrder())
	e.I64s(5, counts)
	e.End()
}

// Boundary orders of parquet.thrift.
const (
	unordered  = 0
	ascending  = 1
	descending = 2
)

// boundaryOrder says whether the bounds of the pages that have values rise or
// fall from page to page.
func (k *columnChunk) boundaryOrder() int32 {
	up, down := true, true
	last := -1
	for i := range k.pages {
		if k.pages[i].empty() {
			continue
		}
		if last >= 0 {
			a, b := &k.pages[last], &k.pages[i]
			up = up && a.lo <= b.lo && a.hi <= b.hi
			down = down && a.lo >= b.lo && a.hi >= b.hi
		}
		last = i
	}
	switch {
	case up:
		return ascending
	case down:
		return descending
	}
	return unordered
}

// offsetIndex encodes the OffsetIndex: where each page stands.
func (k *columnChunk) offsetIndex(e *parquetfoot.Encoder) {
	e.Structs(1, len(k.pages))
	at, row := k.offset, int64(0)
	for i := range k.pages {
		e.Element()
		e.I64(1, at)
		e.I32(2, int32(k.pages[i].stored))
		e.I64(3, row)
		e.End()
		at += int64(k.pages[i].stored)
		row += int64(k.pages[i].rows)
	}
	e.End()
}

// A chunkRecord is one column chunk's entry in the spool of new metadata,
// which waits there, encoded, for the footer.
type chunkRecord struct {
	meta                     []byte
	unpacked, stored         int64
	columnIndex, offsetIndex int64 // their lengths; 0 for none
}

func (r *chunkRecord) append(b []byte) []byte {
	for _, v := range []int64{int64(len(r.meta)), r.unpacked, r.stored, r.columnIndex, r.offsetIndex} {
		b = binary.AppendUvarint(b, uint64(v))
	}
	return append(b, r.meta...)
}

func (r *chunkRecord) read(in *bufio.Reader) error {
	n := int64(0)
	for _, into := range []*int64{&n, &r.unpacked, &r.stored, &r.columnIndex, &r.offsetIndex} {
		v, err := binary.ReadUvarint(in)
		if err != nil {
			return fault.IO.Errorf("reading metadata from a scratch file: %w", err)
		}
		*into = int64(v)
	}
	r.meta = grow(r.meta[:0], int(n))
	_, err := io.ReadFull(in, r.meta)
	return fault.IO.Wrap(err)
}

// An indexPlace is where the page indexes of the next column chunk stand.
type indexPlace struct{ column, offset int64 }

// encode appends the ColumnChunk and moves the place on.
func (r *chunkRecord) encode(e *parquetfoot.Encoder, at *indexPlace) {
	e.I64(2, 0) // file_offset: deprecated, 0 is what the format asks for
	e.Encoded(3, r.meta)
	if r.offsetIndex > 0 {
		e.I64(4, at.offset)
		e.I32(5, int32(r.offsetIndex))
		at.offset += r.offsetIndex
	}
	if r.columnIndex > 0 {
		e.I64(6, at.column)
		e.I32(7, int32(r.columnIndex))
		at.column += r.columnIndex
	}
	e.End()
}
