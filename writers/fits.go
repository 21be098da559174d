package writers

import (
	"encoding/binary"
	"fmt"
	"io"
	"math"

	"catenrich/internal/fault"
	"catenrich/internal/fitshead"
	"catenrich/internal/table"
	"catenrich/readers"
)

// A FITS is a [table.Sink] of a FITS file: every byte of every row of its
// source, and behind each row the new fields. The table's header is extended
// (internal/fitshead), its heap follows the longer rows, and every other
// header-data unit is copied as it stands.
//
// Floats become D, or E where they are narrow, flags L, and numbers of a
// status J; a null is NaN, or the zero byte that L has for it. Metadata that
// fit on a line become HISTORY. Where the table's header has CHECKSUM or
// DATASUM they are summed chunk by chunk and written over at the end. The
// output is plain, or one gzip member (fits_gzip.go).
type FITS struct {
	src    *readers.FITS
	spec   table.Spec
	level  int
	packed bool

	width  int // of an old row, in bytes
	grown  int // of a new one
	header *fitshead.Extended
	sum    fitshead.Sum // of the data so far
	out    fitsOutput
}

// A fitsOutput is the uncompressed output. What was kept can be patched.
type fitsOutput interface {
	io.Writer
	keep(p []byte) error
	patch(off int64, p []byte) error // off counts from the beginning of what was kept
	finish() error
}

// NewFITS returns a sink of the rows of src. Of spec it takes Added, Narrow,
// Metadata, Codec ("" or "gzip") and Level (of gzip, 0 is its default). Too
// many columns, or text that a FITS header cannot hold, are errors.
func NewFITS(src *readers.FITS, spec table.Spec) (*FITS, error) {
	w := &FITS{src: src, spec: spec, width: int(src.Table().RowBytes)}
	switch spec.Codec {
	case "":
	case "gzip":
		if w.packed, w.level = true, spec.Level; w.level == 0 {
			w.level = defaultGzip
		}
		if w.level < 1 || w.level > 9 {
			return nil, fault.Config.Errorf("output.level is %d, want 1 to 9 for gzip", spec.Level)
		}
	default:
		return nil, fault.Config.Errorf("output.codec is %q, want gzip for FITS", spec.Codec)
	}
	var added []fitshead.NewColumn
	for i := range spec.Added {
		f := &spec.Added[i]
		form, err := w.form(f)
		if err != nil {
			return nil, err
		}
		if !fitshead.Printable(f.Name) || f.Name == "" {
			return nil, fault.Config.Errorf("the column name %q cannot stand in a FITS header, which holds ASCII text: choose another prefix or name", f.Name)
		}
		added = append(added, fitshead.NewColumn{Name: f.Name, Form: form, Unit: f.Unit, UCD: f.UCD, Comment: toASCII(f.Meaning())})
	}
	var err error
	if w.header, err = src.Table().Extend(added, w.history()); err != nil {
		return nil, fault.Data.Errorf("%s: %w", src.Schema().File, err)
	}
	w.grown = int(w.header.RowBytes)
	return w, nil
}

// form returns the TFORM of a new column.
func (w *FITS) form(f *table.Field) (string, error) {
	switch f.Kind {
	case table.Float:
		if w.spec.Narrow {
			return "E", nil
		}
		return "D", nil
	case table.Flag:
		return "L", nil
	case table.Int:
		return "J", nil
	}
	return "", fault.Internal.Errorf("writers: the new column %q holds text, which is not offered", f.Name)
}

// history returns the metadata that fit on a line each.
func (w *FITS) history() (lines []string) {
	const room = fitshead.CardSize - len("HISTORY ")
	for _, m := range w.spec.Metadata {
		if len(m.Key) <= room && len(m.Value) <= room && fitshead.Printable(m.Key+m.Value) {
			lines = append(lines, m.Key, m.Value)
		}
	}
	return lines
}

// toASCII spells what a description may hold in the characters of a header.
func toASCII(text string) string {
	if fitshead.Printable(text) {
		return text
	}
	plain := make([]byte, 0, len(text))
	for _, c := range text {
		switch {
		case c >= ' ' && c <= '~':
			plain = append(plain, byte(c))
		case c == '−' || c == '–' || c == '—':
			plain = append(plain, '-')
		case c == '’' || c == '‘':
			plain = append(plain, '\'')
		case c == '×':
			plain = append(plain, 'x')
		default:
			plain = append(plain, '?')
		}
	}
	return string(plain)
}

// Begin implements [table.Sink]: all that precedes the rows.
func (w *FITS) Begin(out table.Output) error {
	w.out = &plainFITS{Output: out}
	if w.packed {
		member, err := newGzipMember(out, w.level)
		if err != nil {
			return err
		}
		w.out = member
	}
	if err := w.src.CopyBefore(w.out); err != nil {
		return err
	}
	if w.header.Sums() {
		return w.out.keep(w.header.Text())
	}
	_, err := w.out.Write(w.header.Text())
	return err
}

// A fitsPiece is what Append needs of a chunk.
type fitsPiece struct {
	buffer *[]byte
	sum    fitshead.Sum
	packed packedPiece // of a compressed output
}

// Encode implements [table.Sink].
func (w *FITS) Encode(c *table.Chunk, b *table.Batch) (table.Piece, error) {
	if b.Rows != c.Rows || len(c.Raw) != c.Rows*w.width || len(b.Out) != len(w.spec.Added) {
		return table.Piece{}, fault.Internal.Errorf("writers: chunk %d has %d rows and %d columns to add, and its batch %d and %d",
			c.Seq, c.Rows, len(w.spec.Added), b.Rows, len(b.Out))
	}
	rows := buffers.Get().(*[]byte)
	if size := c.Rows * w.grown; cap(*rows) < size {
		*rows = make([]byte, size)
	} else {
		*rows = (*rows)[:size]
	}
	w.fill(*rows, c, b)
	piece := fitsPiece{buffer: rows}
	if w.header.Sums() {
		piece.sum = fitshead.SumOf(*rows)
	}
	if member, ok := w.out.(*gzipMember); ok {
		packed := buffers.Get().(*[]byte)
		piece.packed = member.pack((*packed)[:0], *rows)
		*packed = piece.packed.bytes
		recycle(rows)
		piece.buffer = packed
	}
	return table.Piece{Parts: [][]byte{*piece.buffer}, Meta: piece}, nil
}

// fill lays out the new rows. A few hundred at a time stay in the cache while
// one new column after the other goes into them.
func (w *FITS) fill(dst []byte, c *table.Chunk, b *table.Batch) {
	const together = 256
	for from := 0; from < c.Rows; from += together {
		to := min(from+together, c.Rows)
		for row := from; row < to; row++ {
			copy(dst[row*w.grown:], c.Raw[row*w.width:(row+1)*w.width])
		}
		at := w.width
		for i := range b.Out {
			at += putFITS(dst, &b.Out[i], from, to, at, w.grown, w.spec.Narrow)
		}
	}
}

// putFITS writes the cells of rows [from, to) of a column at an offset in each
// row of so many bytes. It returns the width of the field.
func putFITS(dst []byte, col *table.Column, from, to, at, step int, narrow bool) (width int) {
	at += from * step
	switch {
	case col.Kind == table.Float && narrow:
		for _, v := range col.Float[from:to] {
			binary.BigEndian.PutUint32(dst[at:], narrowBits(v))
			at += step
		}
		return 4
	case col.Kind == table.Float:
		for _, v := range col.Float[from:to] {
			bits := math.Float64bits(v)
			if v-v != 0 { // NaN; an infinity is no value either
				bits = nullBits
			}
			binary.BigEndian.PutUint64(dst[at:], bits)
			at += step
		}
		return 8
	case col.Kind == table.Int:
		for _, v := range col.Int[from:to] {
			binary.BigEndian.PutUint32(dst[at:], uint32(v))
			at += step
		}
		return 4
	}
	for _, flag := range col.Flag[from:to] {
		dst[at] = [...]byte{table.False: 'F', table.True: 'T', table.Null: 0}[flag]
		at += step
	}
	return 1
}

// The NaN of a null: one of them, so that no processor's own choice shows.
const (
	nullBits       = 0x7ff8000000000000
	nullBitsNarrow = 0x7fc00000
)

// narrowBits returns v as a float32. What is beyond its range is infinite, as
// in the other formats.
func narrowBits(v float64) uint32 {
	if v-v != 0 {
		return nullBitsNarrow
	}
	return math.Float32bits(float32(v))
}

// Append implements [table.Sink].
func (w *FITS) Append(p table.Piece, _ *table.Chunk, _ *table.Batch) error {
	piece := p.Meta.(fitsPiece)
	defer recycle(piece.buffer)
	w.sum = w.sum.Join(piece.sum)
	if member, ok := w.out.(*gzipMember); ok {
		return member.append(piece.packed)
	}
	_, err := w.out.Write(*piece.buffer)
	return err
}

// Finish implements [table.Sink]: heap, sums, and the other units.
func (w *FITS) Finish() error {
	if err := w.src.CopyHeap(summing{w}); err != nil {
		return err
	}
	t := w.src.Table()
	size := w.header.RowBytes*t.Rows + t.PCount()
	if _, err := w.out.Write(make([]byte, fitshead.Padded(size)-size)); err != nil {
		return err
	}
	if err := w.header.Seal(w.sum, w.out.patch); err != nil {
		return err
	}
	if err := w.src.CopyAfter(w.out); err != nil {
		return err
	}
	return w.out.finish()
}

// summing writes to the output of a sink and adds to its sum.
type summing struct{ w *FITS }

func (s summing) Write(p []byte) (int, error) {
	if s.w.header.Sums() {
		s.w.sum = s.w.sum.Join(fitshead.SumOf(p))
	}
	return s.w.out.Write(p)
}

// Warnings are what a user should know of the output.
func (w *FITS) Warnings() []string {
	warnings := w.src.Warnings()
	if stale := w.header.Stale; len(stale) > 0 {
		warnings = append(warnings, fmt.Sprintf("the header speaks of columns beyond TFIELDS, first with %s: such records (%d) are left out, they would describe the new columns", stale[0], len(stale)))
	}
	return warnings
}

// Verbatim implements [table.Sink]: rows are copied, but not in one piece.
func (w *FITS) Verbatim() (size int64, sum [32]byte) { return 0, sum }

// plainFITS is an output that is not compressed.
type plainFITS struct {
	table.Output
	kept int64
}

func (o *plainFITS) keep(p []byte) error {
	o.kept = o.Offset()
	_, err := o.Write(p)
	return err
}

func (o *plainFITS) patch(off int64, p []byte) error { return o.Patch(o.kept+off, p) }

func (o *plainFITS) finish() error { return nil }
