// Package writers makes outputs: one file format each, behind the one
// interface of internal/table, a Sink. A writer that copies the bytes of an
// input is built from that input's reader; a writer knows nothing of cosmology
// or of jobs.
//
// [NewCSV] appends fields to delimited text: csv.go has the records,
// compress.go the members of a compressed output. [NewParquet] grafts columns
// onto a Parquet file (parquet.go), [NewFITS] extends the rows of a FITS table
// (fits.go).
package writers

import (
	"fmt"
	"strconv"
	"sync"

	"catenrich/internal/delim"
	"catenrich/internal/fault"
	"catenrich/internal/table"
	"catenrich/readers"
)

// A CSV is a [table.Sink] of delimited text: every record of its source as it
// stands there, and behind it the added fields.
//
// What is no row, as blank lines and comments, is copied too; a record that
// the reader rejected is left out together with its line end. Numbers take the
// form of [delim.AppendFloat], flags are true and false. A null is an empty
// field, and nan where blanks separate the fields. A compressed output has one
// gzip member or zstd frame for the header and one for each chunk.
type CSV struct {
	src       *readers.CSV
	spec      table.Spec
	records   delim.Dialect
	null      string
	appendNum func([]byte, float64) []byte
	pack      *packer // nil for plain text
	out       table.Output
}

// NewCSV returns a sink of the records of src. Of spec it takes Added, Digits
// (0 to 17), Narrow (floats have the digits of a float32), Codec ("", "gzip" or
// "zst") and Level (of the codec, 0 is its default). What it cannot do is said
// by Begin.
func NewCSV(src *readers.CSV, spec table.Spec) *CSV {
	records, _ := src.Dialects()
	w := &CSV{src: src, spec: spec, records: records}
	if records.Delimiter == ' ' {
		w.null = "nan"
	}
	switch digits := spec.Digits; {
	case digits > 0 && spec.Narrow:
		digits = min(digits, 9)
		w.appendNum = func(dst []byte, v float64) []byte { return delim.AppendDigits32(dst, v, digits) }
	case digits > 0:
		w.appendNum = func(dst []byte, v float64) []byte { return delim.AppendDigits(dst, v, digits) }
	case spec.Narrow:
		w.appendNum = delim.AppendFloat32
	}
	return w
}

// Begin implements [table.Sink].
func (w *CSV) Begin(out table.Output) error {
	w.out = out
	if w.spec.Digits < 0 || w.spec.Digits > 17 {
		return fault.Config.Errorf("output.digits is %d, want 1 to 17, or 0 for as many as it takes", w.spec.Digits)
	}
	pack, err := newPacker(w.spec.Codec, w.spec.Level)
	if err != nil {
		return err
	}
	w.pack = pack
	text, err := w.head()
	if err != nil || len(text) == 0 {
		return err
	}
	_, err = out.Write(w.packed(text))
	return err
}

// head returns the text before the first chunk, with the new names in it.
func (w *CSV) head() ([]byte, error) {
	text, insert := w.src.Head()
	if insert < 0 {
		return text, nil
	}
	_, header := w.src.Dialects()
	head := append([]byte(nil), text[:insert]...)
	for _, f := range w.spec.Added {
		var ok bool
		head = append(head, header.Delimiter)
		if head, ok = header.AppendField(head, []byte(f.Name)); !ok {
			return nil, fault.Config.Errorf("the column name %q cannot stand in %s, whose fields have no quotes", f.Name, w.src.Schema().File)
		}
	}
	return append(head, text[insert:]...), nil
}

// packed returns text as it goes to the output.
func (w *CSV) packed(text []byte) []byte {
	if w.pack == nil {
		return text
	}
	return w.pack.append(nil, text)
}

// buffers are the texts of chunks, and the pieces that go to Append.
var buffers = sync.Pool{New: func() any { return new([]byte) }}

// maxKept is the largest buffer that is worth keeping.
const maxKept = 32 << 20

func recycle(p *[]byte) {
	if cap(*p) <= maxKept {
		buffers.Put(p)
	}
}

// Encode implements [table.Sink].
func (w *CSV) Encode(c *table.Chunk, b *table.Batch) (table.Piece, error) {
	text := buffers.Get().(*[]byte)
	var err error
	if *text, err = w.appendChunk((*text)[:0], c, b); err != nil {
		return table.Piece{}, err
	}
	if w.pack == nil {
		return table.Piece{Parts: [][]byte{*text}, Meta: text}, nil
	}
	packed := buffers.Get().(*[]byte)
	*packed = w.pack.append((*packed)[:0], *text)
	recycle(text)
	return table.Piece{Parts: [][]byte{*packed}, Meta: packed}, nil
}

// appendChunk appends the output of a chunk.
func (w *CSV) appendChunk(dst []byte, c *table.Chunk, b *table.Batch) ([]byte, error) {
	rows := w.src.Rows(c)
	if len(rows.Ends) != b.Rows || len(b.Out) != len(w.spec.Added) {
		return nil, fault.Internal.Errorf("writers: chunk %d has %d rows and %d columns to add, and its batch %d and %d",
			c.Seq, len(rows.Ends), len(w.spec.Added), b.Rows, len(b.Out))
	}
	const usual = 20 // bytes of a number with its delimiter
	if want := len(c.Raw) + b.Rows*len(b.Out)*usual; cap(dst) < want {
		dst = make([]byte, 0, want+want/8)
	}
	pos, drops := 0, rows.Drops
	for row, end := range rows.Ends {
		dst, pos, drops = appendKept(dst, c.Raw, pos, end, drops)
		var err error
		if dst, err = w.appendFields(dst, b.Out, row); err != nil {
			return nil, err
		}
	}
	dst, _, _ = appendKept(dst, c.Raw, pos, len(c.Raw), drops)
	return dst, nil
}

// appendKept appends raw[pos:end] without the dropped records in it.
func appendKept(dst, raw []byte, pos, end int, drops []delim.Span) (_ []byte, _ int, left []delim.Span) {
	for len(drops) > 0 && drops[0].Start < end {
		dst = append(dst, raw[pos:drops[0].Start]...)
		pos = drops[0].End
		drops = drops[1:]
	}
	return append(dst, raw[pos:end]...), end, drops
}

// appendFields appends the added fields of one row.
func (w *CSV) appendFields(dst []byte, out []table.Column, row int) ([]byte, error) {
	for i := range out {
		dst = append(dst, w.records.Delimiter)
		switch column := &out[i]; column.Kind {
		case table.Float:
			switch v := column.Float[row]; {
			case v-v != 0: // NaN; an infinity has no spelling either
				dst = append(dst, w.null...)
			case w.appendNum == nil:
				dst = delim.AppendFloat(dst, v)
			default:
				dst = w.appendNum(dst, v)
			}
		case table.Int:
			dst = strconv.AppendInt(dst, int64(column.Int[row]), 10)
		case table.Flag:
			dst = w.appendFlag(dst, column.Flag[row])
		case table.Bytes:
			value := column.Bytes[row]
			if value == nil {
				dst = append(dst, w.null...)
				continue
			}
			var ok bool
			if dst, ok = w.records.AppendField(dst, value); !ok {
				return nil, fault.Data.Errorf("column %q: the value %s cannot stand in a file whose fields have no quotes",
					w.spec.Added[i].Name, shown(value))
			}
		}
	}
	return dst, nil
}

func (w *CSV) appendFlag(dst []byte, flag uint8) []byte {
	switch flag {
	case table.True:
		return append(dst, "true"...)
	case table.False:
		return append(dst, "false"...)
	}
	return append(dst, w.null...)
}

// shown quotes the beginning of a value for a message.
func shown(value []byte) string { return fmt.Sprintf("%.80q", value) }

// Append implements [table.Sink].
func (w *CSV) Append(p table.Piece, _ *table.Chunk, _ *table.Batch) error {
	_, err := w.out.Write(p.Parts[0])
	recycle(p.Meta.(*[]byte))
	return err
}

// Finish implements [table.Sink]. The text is complete as it is.
func (w *CSV) Finish() error { return nil }

// Verbatim implements [table.Sink]: records are copied, but not in one piece.
func (w *CSV) Verbatim() (size int64, sum [32]byte) { return 0, sum }
