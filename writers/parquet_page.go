package writers

import (
	"encoding/binary"
	"math"

	"catenrich/internal/parquetfoot"
	"catenrich/internal/table"
)

// Encodings and page types of parquet.thrift.
const (
	encodingPlain = 0
	encodingRLE   = 3
	encodingSplit = 9 // BYTE_STREAM_SPLIT

	pageData = 0
)

// headerRoom is left before a page's body for its header, which says how long
// the body came out.
const headerRoom = 160

// A pageMeta is what the row group's metadata needs to know of one data page.
type pageMeta struct {
	rows, nulls int
	lo, hi      float64 // of the values that are there; exact for every type of column
	unpacked    int     // bytes of header and body before compression
	stored      int     // bytes of header and body in the file
}

func (m *pageMeta) empty() bool { return m.nulls == m.rows }

// A newColumn is how an added field is stored.
type newColumn struct {
	name     string
	kind     table.Kind
	physical parquetfoot.Physical
	encoding int32
}

// newColumnOf decides how a field is stored. BYTE_STREAM_SPLIT is for floats
// alone: readers that know it for integers are few.
func newColumnOf(f *table.Field, narrow, plain bool) newColumn {
	c := newColumn{name: f.Name, kind: f.Kind, encoding: encodingPlain}
	switch f.Kind {
	case table.Int:
		c.physical = parquetfoot.Int32
	case table.Flag:
		c.physical = parquetfoot.Boolean
	default:
		if c.physical = parquetfoot.Double; narrow {
			c.physical = parquetfoot.Float
		}
		if !plain {
			c.encoding = encodingSplit
		}
	}
	return c
}

// A pageEncoder makes data pages (version 1) of optional columns. It is used
// by one goroutine at a time and keeps its buffers from page to page.
type pageEncoder struct {
	codec      codec
	statistics bool // in the page header: for files without page indexes

	body   []byte
	bits   []byte
	wide   []float64 // the values of a column with nulls
	narrow []uint32
	planes planes // of the body, if it is split
	header parquetfoot.Encoder
}

// encode appends the page of one column's slice to dst, and returns where it
// begins there: some bytes before it are left over.
func (e *pageEncoder) encode(dst []byte, c *newColumn, col *table.Column, rows int) (out []byte, from int, m pageMeta) {
	m = pageMeta{rows: rows, lo: math.Inf(1), hi: math.Inf(-1)}
	e.body, e.planes = e.body[:0], planes{}
	switch c.physical {
	case parquetfoot.Double:
		e.doubles(&m, col.Float[:rows], c.encoding == encodingSplit)
	case parquetfoot.Float:
		e.floats(&m, col.Float[:rows], c.encoding == encodingSplit)
	case parquetfoot.Int32:
		e.ints(&m, col.Int[:rows])
	case parquetfoot.Boolean:
		e.flags(&m, col.Flag[:rows])
	}
	at := len(dst) + headerRoom
	dst = append(dst, make([]byte, headerRoom)...)
	dst = e.codec.append(dst, e.body, e.planes)
	e.writeHeader(c, &m, len(e.body), len(dst)-at)
	from = at - len(e.header.B)
	copy(dst[from:], e.header.B)
	m.unpacked = len(e.header.B) + len(e.body)
	m.stored = len(dst) - from
	return dst, from, m
}

// writeHeader makes the PageHeader.
func (e *pageEncoder) writeHeader(c *newColumn, m *pageMeta, unpacked, stored int) {
	h := &e.header
	h.B = h.B[:0]
	h.I32(1, pageData)
	h.I32(2, int32(unpacked))
	h.I32(3, int32(stored))
	h.Struct(5) // data_page_header
	h.I32(1, int32(m.rows))
	h.I32(2, c.encoding)
	h.I32(3, encodingRLE)
	h.I32(4, encodingRLE)
	if e.statistics {
		h.Struct(5)
		writeStatistics(h, c.physical, int64(m.nulls), m.lo, m.hi, !m.empty())
		h.End()
	}
	h.End()
	h.End()
}

// levels appends the definition levels of a page with their length, as runs:
// a long run of cells that are alike is a count, the rest single bits.
func (e *pageEncoder) levels(rows, nulls int, null func(row int) bool) {
	e.body = append(e.body, 0, 0, 0, 0)
	if nulls == 0 || nulls == rows {
		e.body = appendRun(e.body, rows, nulls == 0)
	} else {
		e.bits = e.bits[:0]
		for row := 0; row < rows; row += 8 {
			bits := byte(0)
			for i := row; i < min(row+8, rows); i++ {
				if !null(i) {
					bits |= 1 << (i - row)
				}
			}
			e.bits = append(e.bits, bits)
		}
		e.body = appendRuns(e.body, e.bits, rows)
	}
	binary.LittleEndian.PutUint32(e.body, uint32(len(e.body)-4))
}

// appendRun appends n equal levels.
func appendRun(b []byte, n int, present bool) []byte {
	b = binary.AppendUvarint(b, uint64(n)<<1)
	if present {
		return append(b, 1)
	}
	return append(b, 0)
}

// shortestRun is how many bytes of equal bits are worth a run of their own.
const shortestRun = 4

// appendRuns appends levels given as bits, eight to a byte.
func appendRuns(b, bits []byte, rows int) []byte {
	single := 0 // bytes from here to at are not yet appended
	flush := func(at int) {
		if at > single {
			b = binary.AppendUvarint(b, uint64(at-single)<<1|1)
			b = append(b, bits[single:at]...)
		}
	}
	for at := 0; at < len(bits); {
		end := at + 1
		if v := bits[at]; v == 0 || v == 0xff {
			for end < len(bits) && bits[end] == v {
				end++
			}
			if end-at >= shortestRun {
				flush(at)
				b = appendRun(b, min(8*end, rows)-8*at, v == 0xff)
				single = end
			}
		}
		at = end
	}
	flush(len(bits))
	return b
}

// doubles appends levels and values of float64; NaN is null.
func (e *pageEncoder) doubles(m *pageMeta, v []float64, split bool) {
	lo, hi, nulls := m.lo, m.hi, 0
	for _, x := range v {
		if x != x {
			nulls++
		}
		if x < lo {
			lo = x
		}
		if x > hi {
			hi = x
		}
	}
	m.lo, m.hi, m.nulls = lo, hi, nulls
	e.levels(len(v), nulls, func(row int) bool { return v[row] != v[row] })
	if nulls > 0 {
		e.wide = e.wide[:0]
		for _, x := range v {
			if x == x {
				e.wide = append(e.wide, x)
			}
		}
		v = e.wide
	}
	from := len(e.body)
	e.body = grow(e.body, 8*len(v))
	if split {
		e.planes = planes{from, len(v)}
		split8(e.body[from:], v)
		return
	}
	for i, x := range v {
		binary.LittleEndian.PutUint64(e.body[from+8*i:], math.Float64bits(x))
	}
}

// floats is doubles for float32. A value beyond float32 becomes infinite.
func (e *pageEncoder) floats(m *pageMeta, v []float64, split bool) {
	e.narrow = e.narrow[:0]
	for _, x := range v {
		if x != x {
			continue
		}
		y := float32(x)
		e.narrow = append(e.narrow, math.Float32bits(y))
		if w := float64(y); w < m.lo {
			m.lo = w
		}
		if w := float64(y); w > m.hi {
			m.hi = w
		}
	}
	m.nulls = len(v) - len(e.narrow)
	e.levels(len(v), m.nulls, func(row int) bool { return v[row] != v[row] })
	from := len(e.body)
	e.body = grow(e.body, 4*len(e.narrow))
	if split {
		e.planes = planes{from, len(e.narrow)}
		split4(e.body[from:], e.narrow)
		return
	}
	for i, x := range e.narrow {
		binary.LittleEndian.PutUint32(e.body[from+4*i:], x)
	}
}

// ints appends levels and values of int32, none of which is null.
func (e *pageEncoder) ints(m *pageMeta, v []int32) {
	e.levels(len(v), 0, nil)
	for _, x := range v {
		m.lo, m.hi = min(m.lo, float64(x)), max(m.hi, float64(x))
		e.body = binary.LittleEndian.AppendUint32(e.body, uint32(x))
	}
}

// flags appends levels and values of booleans, packed eight to a byte.
func (e *pageEncoder) flags(m *pageMeta, v []uint8) {
	for _, x := range v {
		if x == table.Null {
			m.nulls++
		}
	}
	e.levels(len(v), m.nulls, func(row int) bool { return v[row] == table.Null })
	bits, n := byte(0), 0
	for _, x := range v {
		if x == table.Null {
			continue
		}
		bits |= x << (n % 8)
		if n++; n%8 == 0 {
			e.body = append(e.body, bits)
			bits = 0
		}
		m.lo, m.hi = min(m.lo, float64(x)), max(m.hi, float64(x))
	}
	if n%8 != 0 {
		e.body = append(e.body, bits)
	}
}

// grow returns b with n more bytes, which hold anything.
func grow(b []byte, n int) []byte {
	if cap(b)-len(b) < n {
		b = append(make([]byte, 0, len(b)+n+n/8), b...)
	}
	return b[:len(b)+n]
}
