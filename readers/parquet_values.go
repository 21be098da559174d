package readers

import (
	"encoding/binary"
	"errors"
	"fmt"
	"math"
	"strconv"

	"github.com/apache/arrow-go/v18/parquet"
	"github.com/apache/arrow-go/v18/parquet/file"

	"catenrich/internal/parquetfoot"
	"catenrich/internal/table"
)

// maxSliceText bounds the text of one column in one slice, which a small file
// can make large by repeating one long entry of a dictionary.
const maxSliceText = 256 << 20

var errNotFinite = errors.New("not a finite number")

// typeOfLeaf says what a leaf holds. An annotation that is not known makes it
// Other: it may change what the numbers mean.
func typeOfLeaf(l *parquetfoot.Leaf) table.Type {
	if l.MaxRep > 0 {
		return table.Other
	}
	switch l.Logical {
	case parquetfoot.Plain:
		switch l.Physical {
		case parquetfoot.Boolean:
			return table.Bool
		case parquetfoot.Int32, parquetfoot.Int64:
			return table.Integer
		case parquetfoot.Float:
			return table.Float32
		case parquetfoot.Double:
			return table.Float64
		}
	case parquetfoot.Integer, parquetfoot.Unsigned:
		if l.Physical == parquetfoot.Int32 || l.Physical == parquetfoot.Int64 {
			return table.Integer
		}
	case parquetfoot.String:
		if l.Physical == parquetfoot.ByteArray {
			return table.Text
		}
	case parquetfoot.Float16:
		if l.Physical == parquetfoot.FixedLenByteArray && l.Length == 2 {
			return table.Float16
		}
	case parquetfoot.Decimal:
		switch {
		case l.Physical == parquetfoot.Int32, l.Physical == parquetfoot.Int64, l.Physical == parquetfoot.ByteArray,
			l.Physical == parquetfoot.FixedLenByteArray && l.Length > 0 && l.Length <= maxDecimal:
			return table.Decimal
		}
	}
	return table.Other
}

// A leafColumn decodes one column of one row group.
type leafColumn interface {
	read(n int) error             // the next n rows, into its own memory
	fill(dst *table.Column) error // with those rows
	close()
}

// A pager is one of the library's readers of a column chunk.
type pager[T any] interface {
	file.ColumnChunkReader
	ReadBatchInPage(batchSize int64, values []T, defLvls, repLvls []int16) (int64, int, error)
}

// leafOf is a leafColumn of physical type T.
type leafOf[T any] struct {
	pages  pager[T]
	maxDef int16
	levels []int16
	values []T // those that are there, without gaps
	rows   int
	have   int

	keep   func([]T) error              // takes values out of a page's memory
	number func(T) float64              // NaN where a cell holds no number
	text   func(dst []byte, v T) []byte // nil for text, which is its own
	own    func(v T) []byte             // of text
}

// newLeafColumn pairs a reader of pages with the meaning of its values.
func newLeafColumn(l *parquetfoot.Leaf, pages file.ColumnChunkReader, room int) (leafColumn, error) {
	switch r := pages.(type) {
	case *file.BooleanColumnChunkReader:
		c := newLeafOf[bool](l, r, room)
		c.text = strconv.AppendBool
		return c, nil
	case *file.Int32ColumnChunkReader:
		c := newLeafOf[int32](l, r, room)
		switch l.Logical {
		case parquetfoot.Unsigned:
			c.number = func(v int32) float64 { return float64(uint32(v)) }
			c.text = func(b []byte, v int32) []byte { return strconv.AppendUint(b, uint64(uint32(v)), 10) }
		case parquetfoot.Decimal:
			c.number = func(v int32) float64 { return smallDecimal(int64(v), l.Scale) }
		default:
			c.number = func(v int32) float64 { return float64(v) }
			c.text = func(b []byte, v int32) []byte { return strconv.AppendInt(b, int64(v), 10) }
		}
		return c.withText(), nil
	case *file.Int64ColumnChunkReader:
		c := newLeafOf[int64](l, r, room)
		switch l.Logical {
		case parquetfoot.Unsigned:
			c.number = func(v int64) float64 { return float64(uint64(v)) }
			c.text = func(b []byte, v int64) []byte { return strconv.AppendUint(b, uint64(v), 10) }
		case parquetfoot.Decimal:
			c.number = func(v int64) float64 { return smallDecimal(v, l.Scale) }
		default:
			c.number = func(v int64) float64 { return float64(v) }
			c.text = func(b []byte, v int64) []byte { return strconv.AppendInt(b, v, 10) }
		}
		return c.withText(), nil
	case *file.Float32ColumnChunkReader:
		c := newLeafOf[float32](l, r, room)
		c.number = func(v float32) float64 { return float64(v) }
		c.text = func(b []byte, v float32) []byte { return strconv.AppendFloat(b, float64(v), 'g', -1, 32) }
		return c, nil
	case *file.Float64ColumnChunkReader:
		c := newLeafOf[float64](l, r, room)
		c.number = func(v float64) float64 { return v }
		return c.withText(), nil
	case *file.ByteArrayColumnChunkReader:
		c := newLeafOf[parquet.ByteArray](l, r, room)
		c.keep = keepBytes[parquet.ByteArray]
		if l.Logical == parquetfoot.Decimal {
			c.number = func(v parquet.ByteArray) float64 { return bigDecimal(v, l.Scale) }
			return c.withText(), nil
		}
		c.own = func(v parquet.ByteArray) []byte { return v }
		return c, nil
	case *file.FixedLenByteArrayColumnChunkReader:
		c := newLeafOf[parquet.FixedLenByteArray](l, r, room)
		c.keep = keepBytes[parquet.FixedLenByteArray]
		c.number = func(v parquet.FixedLenByteArray) float64 { return bigDecimal(v, l.Scale) }
		if l.Logical == parquetfoot.Float16 {
			c.number = func(v parquet.FixedLenByteArray) float64 { return float16(binary.LittleEndian.Uint16(v)) }
		}
		return c.withText(), nil
	}
	return nil, fmt.Errorf("has physical type %d, which holds neither numbers nor text", l.Physical)
}

func newLeafOf[T any](l *parquetfoot.Leaf, pages pager[T], room int) *leafOf[T] {
	c := &leafOf[T]{pages: pages, maxDef: int16(l.MaxDef), values: make([]T, room)}
	if l.MaxDef > 0 {
		c.levels = make([]int16, room)
	}
	return c
}

// withText spells numbers that have no other spelling as their shortest one.
func (c *leafOf[T]) withText() *leafOf[T] {
	if c.text == nil {
		c.text = func(b []byte, v T) []byte { return strconv.AppendFloat(b, c.number(v), 'g', -1, 64) }
	}
	return c
}

func (c *leafOf[T]) read(n int) error {
	c.rows, c.have = 0, 0
	for c.rows < n {
		var levels []int16
		if c.maxDef > 0 {
			levels = c.levels[c.rows:]
		}
		rows, have, err := c.pages.ReadBatchInPage(int64(n-c.rows), c.values[c.have:], levels, nil)
		if err == nil {
			err = c.pages.Err()
		}
		if err != nil {
			return err
		}
		if rows == 0 {
			return fmt.Errorf("its pages end %d rows before the row group does", n-c.rows)
		}
		if c.keep != nil {
			if err := c.keep(c.values[c.have : c.have+have]); err != nil {
				return err
			}
		}
		c.rows += int(rows)
		c.have += have
	}
	return nil
}

// fill spreads the values over the rows.
func (c *leafOf[T]) fill(dst *table.Column) error {
	if c.maxDef == 0 && c.have != c.rows {
		return c.miscounted()
	}
	next := 0
	var text []byte
	for row := range c.rows {
		if c.maxDef > 0 && c.levels[row] != c.maxDef {
			dst.SetBad(row, table.Missing)
			continue
		}
		if next == c.have {
			return c.miscounted()
		}
		v := c.values[next]
		next++
		switch {
		case dst.Kind == table.Float:
			dst.SetFloat(row, c.number(v))
		case c.own != nil:
			dst.Bytes[row], dst.State[row] = c.own(v), table.Good
		default:
			from := len(text)
			text = c.text(text, v)
			dst.Bytes[row], dst.State[row] = text[from:len(text):len(text)], table.Good
		}
	}
	if next != c.have {
		return c.miscounted()
	}
	return nil
}

func (c *leafOf[T]) miscounted() error {
	return fmt.Errorf("a page's %d values and its nulls do not make %d rows", c.have, c.rows)
}

func (c *leafOf[T]) close() { c.pages.Close() }

// keepBytes moves values out of the page that they lie in, which the next page
// will overwrite.
func keepBytes[T ~[]byte](values []T) error {
	total := 0
	for _, v := range values {
		if total += len(v); total > maxSliceText {
			return fmt.Errorf("its text is longer than %d bytes in %d rows", maxSliceText, len(values))
		}
	}
	room := make([]byte, 0, total)
	for i, v := range values {
		from := len(room)
		room = append(room, v...)
		values[i] = T(room[from:len(room):len(room)])
	}
	return nil
}

// float16 widens an IEEE 754 binary16, exactly.
func float16(h uint16) float64 {
	sign, exponent, fraction := uint64(h>>15)<<63, int(h>>10&0x1f), uint64(h&0x3ff)
	switch exponent {
	case 0: // zero and subnormal: fraction times 2^-24
		v := float64(fraction) * 0x1p-24
		return math.Float64frombits(math.Float64bits(v) | sign)
	case 0x1f:
		return math.Float64frombits(sign | 0x7ff<<52 | fraction<<42)
	}
	return math.Float64frombits(sign | uint64(exponent+1008)<<52 | fraction<<42)
}
