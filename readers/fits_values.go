package readers

import (
	"bytes"
	"encoding/binary"
	"math"
	"strconv"

	"catenrich/internal/fitshead"
	"catenrich/internal/table"
)

// typeOfFITS says what a column holds. Arrays, complex numbers, bits and
// descriptors of the heap are Other.
func typeOfFITS(c *fitshead.Column) table.Type {
	if c.Code == 'A' && c.Repeat > 0 {
		return table.Text
	}
	if c.Repeat != 1 {
		return table.Other
	}
	switch c.Code {
	case 'L':
		return table.Bool
	case 'B', 'I', 'J', 'K':
		if c.Scaled() && !c.OffsetInteger() {
			return table.Float64
		}
		return table.Integer
	case 'E':
		if c.Scaled() {
			return table.Float64
		}
		return table.Float32
	case 'D':
		return table.Float64
	}
	return table.Other
}

// Decode implements [table.Source].
func (f *FITS) Decode(c *table.Chunk, b *table.Batch) error {
	b.Reset(c.Rows, f.wants, f.added)
	for i, w := range f.wants {
		column := &f.table.Columns[w.Field]
		cells := fitsCells{raw: c.Raw[column.Offset:], step: int(f.table.RowBytes), rows: c.Rows, column: column}
		if w.As == table.Bytes {
			cells.texts(&b.In[i])
			continue
		}
		cells.numbers(&b.In[i])
		f.report(&b.In[i], column.Name, b)
	}
	return nil
}

// report adds the malformed cells of a column, as far as there is room.
func (f *FITS) report(col *table.Column, name string, b *table.Batch) {
	for row := 0; row < b.Rows && len(b.Cells) < table.MaxCells; row++ {
		if col.State[row] == table.Malformed {
			b.Cells = append(b.Cells, table.CellError{File: f.path, Column: name, Value: "infinite or too large", Row: int64(row) + 1, Err: errNotFinite})
		}
	}
}

// fitsCells are the cells of one column in a chunk: the first begins raw, and
// each of the others step bytes behind the one before it.
type fitsCells struct {
	raw    []byte
	step   int
	rows   int
	column *fitshead.Column
}

// numbers fills a column of floats.
func (c fitsCells) numbers(dst *table.Column) {
	switch c.column.Code {
	case 'D', 'E':
		for row := range c.rows {
			dst.SetFloat(row, c.real(row))
		}
	default:
		for row := range c.rows {
			if stored, ok := c.whole(row); ok {
				dst.SetFloat(row, c.value(stored))
			} else {
				dst.SetBad(row, table.Missing)
			}
		}
	}
}

// real returns the number of a row that stores a float.
func (c fitsCells) real(row int) float64 {
	p := c.raw[row*c.step:]
	var v float64
	if c.column.Code == 'D' {
		v = math.Float64frombits(binary.BigEndian.Uint64(p))
	} else {
		v = float64(math.Float32frombits(binary.BigEndian.Uint32(p)))
	}
	if c.column.Scaled() {
		v = float64(c.column.Scale*v) + c.column.Zero
	}
	return v
}

// value returns the number that a stored whole number stands for.
func (c fitsCells) value(stored int64) float64 {
	if c.column.Code == 'K' && c.column.OffsetInteger() {
		return float64(uint64(stored) ^ 1<<63) // rounded once
	}
	return float64(c.column.Scale*float64(stored)) + c.column.Zero
}

// whole returns the whole number that a row stores; ok is false for the one
// that stands for none.
func (c fitsCells) whole(row int) (stored int64, ok bool) {
	p := c.raw[row*c.step:]
	switch c.column.Code {
	case 'B':
		stored = int64(p[0])
	case 'I':
		stored = int64(int16(binary.BigEndian.Uint16(p)))
	case 'J':
		stored = int64(int32(binary.BigEndian.Uint32(p)))
	case 'K':
		stored = int64(binary.BigEndian.Uint64(p))
	}
	return stored, !c.column.HasNull || stored != c.column.Null
}

// texts fills a column of bytes: strings as they stand, up to a zero byte and
// without blanks at their end, the rest spelled out.
func (c fitsCells) texts(dst *table.Column) {
	var room []byte
	for row := range c.rows {
		p := c.raw[row*c.step:]
		from := len(room)
		ok := true
		switch c.column.Code {
		case 'A':
			text, _, _ := bytes.Cut(p[:c.column.Width], []byte{0})
			text = bytes.TrimRight(text, " ")
			dst.Bytes[row], dst.State[row] = text, table.Good
			if len(text) == 0 {
				dst.SetBad(row, table.Missing)
			}
			continue
		case 'L':
			ok = p[0] == 'T' || p[0] == 'F'
			room = strconv.AppendBool(room, p[0] == 'T')
		default:
			room, ok = c.spell(room, row)
		}
		if !ok {
			dst.SetBad(row, table.Missing)
			continue
		}
		dst.Bytes[row], dst.State[row] = room[from:len(room):len(room)], table.Good
	}
}

// spell appends a number; ok is false where there is none.
func (c fitsCells) spell(dst []byte, row int) (_ []byte, ok bool) {
	if c.column.Code == 'D' || c.column.Code == 'E' {
		v, size := c.real(row), 64
		if c.column.Code == 'E' && !c.column.Scaled() {
			size = 32
		}
		return strconv.AppendFloat(dst, v, 'g', -1, size), v == v
	}
	stored, ok := c.whole(row)
	switch {
	case !c.column.Scaled():
		return strconv.AppendInt(dst, stored, 10), ok
	case c.column.Code == 'K' && c.column.OffsetInteger():
		return strconv.AppendUint(dst, uint64(stored)^1<<63, 10), ok
	case c.column.OffsetInteger():
		return strconv.AppendInt(dst, stored+int64(c.column.Zero), 10), ok
	}
	return strconv.AppendFloat(dst, c.value(stored), 'g', -1, 64), ok
}
