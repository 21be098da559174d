package parquetfoot

import (
	"bufio"
	"fmt"
	"io"
)

// A Column is a new top-level column. Its values are optional, it has no
// annotation and no field_id.
type Column struct {
	Name     string
	Physical Physical
}

// An Extension is what [Footer.Extend] adds to a footer.
type Extension struct {
	Columns []Column
	Entries []Entry // all of them, the old ones included

	// Group returns what row group g gets. It is called once for each row
	// group, in order, and its result used before the next call.
	Group func(g int) (GroupExtension, error)
}

// A GroupExtension is what is added to one row group.
type GroupExtension struct {
	Chunks                   [][]byte // the encoded ColumnChunk of each new column
	Uncompressed, Compressed int64    // bytes of their pages

	// Moved says where copies of the old chunks' page indexes stand, or is
	// nil. Some readers take all indexes of one kind for one run of bytes, so
	// old and new ones must stand together.
	Moved []MovedIndexes
}

// MovedIndexes are the new offsets of one chunk's page indexes.
type MovedIndexes struct{ OffsetIndex, ColumnIndex int64 }

// Extend writes a footer that is the old one with new columns: the root of the
// schema has more children, the schema more elements, every row group more
// chunks and greater sizes, column_orders (where there are any) more orders, and
// page indexes may have moved.
// All else is written as it was read. It returns the bytes written and fails
// with [ErrTooLarge] if they are too many.
func (f *Footer) Extend(w io.Writer, x *Extension) (int64, error) {
	return f.extend(w, x, MaxSize)
}

func (f *Footer) extend(w io.Writer, x *Extension, max int64) (int64, error) {
	out := &counter{w: bufio.NewWriterSize(w, 1<<16), max: max}
	last, keys := int16(0), len(x.Entries) > 0
	for _, fd := range f.fields {
		if keys && fd.id >= metaKeyValues {
			last, keys = f.writeEntries(out, last, x.Entries), false
		}
		if fd.id == metaKeyValues {
			continue
		}
		out.write(f.header(nil, fd, last))
		last = fd.id
		switch fd.id {
		case metaSchema:
			b, err := f.extendSchema(x.Columns)
			if err != nil {
				return out.n, err
			}
			out.write(b)
		case metaGroups:
			if err := f.writeGroups(out, x); err != nil {
				return out.n, err
			}
		case metaOrders:
			out.write(f.extendOrders(fd, len(x.Columns)))
		default:
			out.write(f.raw[fd.value:fd.end])
		}
	}
	if keys {
		f.writeEntries(out, last, x.Entries)
	}
	out.write([]byte{typeStop})
	if out.err == nil {
		out.err = out.w.Flush()
	}
	return out.n, out.err
}

// ErrTooLarge says that a footer would have more bytes than readers can take.
var ErrTooLarge = fmt.Errorf("the new footer would have more than %d bytes: merge row groups or add fewer columns", MaxSize)

// A counter writes until the first error, or until a footer is too large.
type counter struct {
	w   *bufio.Writer
	n   int64
	max int64
	err error
}

func (c *counter) write(p []byte) {
	if c.n += int64(len(p)); c.n > c.max && c.err == nil {
		c.err = ErrTooLarge
	}
	if c.err == nil {
		_, c.err = c.w.Write(p)
	}
}

// header appends a field's header: the bytes that were read, unless the field
// before it is another one now.
func (f *Footer) header(b []byte, fd field, last int16) []byte {
	if fd.prev == last {
		return append(b, f.raw[fd.head:fd.value]...)
	}
	return appendHeader(b, last, fd.id, fd.typ)
}

func (f *Footer) writeEntries(out *counter, last int16, entries []Entry) int16 {
	b := appendHeader(nil, last, metaKeyValues, typeList)
	b = appendListHeader(b, len(entries), typeStruct)
	for i := range entries {
		b = entries[i].append(b)
	}
	out.write(b)
	return metaKeyValues
}

func (e *Entry) append(b []byte) []byte {
	if e.raw != nil {
		return append(b, e.raw...)
	}
	x := Encoder{B: b}
	x.Binary(1, []byte(e.Key))
	x.Binary(2, []byte(e.Value))
	x.End()
	return x.B
}

// extendSchema returns the list of schema elements with the new columns.
func (f *Footer) extendSchema(columns []Column) ([]byte, error) {
	b := appendListHeader(nil, len(f.elements)+len(columns), typeStruct)
	top := 0
	for i := range f.Columns {
		if f.Columns[i].parent < 0 {
			top++
		}
	}
	root := f.elements[0]
	b, err := f.setRootChildren(b, root, top+len(columns))
	if err != nil {
		return nil, err
	}
	b = append(b, f.raw[root.to:f.elements[len(f.elements)-1].to]...)
	for _, col := range columns {
		x := Encoder{B: b}
		x.I32(elemType, int32(col.Physical))
		x.I32(elemRepeat, optional)
		x.Binary(elemName, []byte(col.Name))
		x.End()
		b = x.B
	}
	return b, nil
}

// setRootChildren appends the root element with another num_children. A root
// that lacks the field, having no children, gets it as its last one.
func (f *Footer) setRootChildren(b []byte, root span, n int) ([]byte, error) {
	c := &cursor{b: f.raw[:root.to], pos: root.from}
	last, done := int16(0), false
	for _, fd := range c.split(nil) {
		b = f.header(b, fd, last)
		last = fd.id
		if fd.id == elemChildren {
			b, done = appendInteger(b, int64(n)), true
			continue
		}
		b = append(b, f.raw[fd.value:fd.end]...)
	}
	if !done {
		b = appendInteger(appendHeader(b, last, elemChildren, typeI32), int64(n))
	}
	return append(b, typeStop), c.err
}

// writeGroups writes the list of row groups, one at a time.
func (f *Footer) writeGroups(out *counter, x *Extension) error {
	out.write(appendListHeader(nil, len(f.groups), typeStruct))
	var b []byte
	for g := range f.groups {
		more, err := x.Group(g)
		if err != nil {
			return err
		}
		if len(more.Chunks) != len(x.Columns) {
			return fmt.Errorf("row group %d has %d new chunks for %d new columns", g, len(more.Chunks), len(x.Columns))
		}
		if b, err = f.extendGroup(b[:0], f.groups[g].span, &more); err != nil {
			return fmt.Errorf("row group %d: %w", g, err)
		}
		if out.write(b); out.err != nil {
			return out.err
		}
	}
	return nil
}

// extendGroup appends one RowGroup with more chunks and greater sizes.
func (f *Footer) extendGroup(b []byte, s span, more *GroupExtension) ([]byte, error) {
	c := &cursor{b: f.raw[:s.to], pos: s.from}
	last := int16(0)
	for _, fd := range c.split(nil) {
		b = f.header(b, fd, last)
		last = fd.id
		in := &cursor{b: f.raw[:fd.end], pos: fd.value}
		switch fd.id {
		case groupColumns:
			n, _ := in.list()
			b = appendListHeader(b, n+len(more.Chunks), typeStruct)
			if more.Moved == nil {
				b = append(b, f.raw[in.pos:fd.end]...)
			} else {
				b = moveIndexes(b, in, more.Moved[:n])
			}
			for _, k := range more.Chunks {
				b = append(b, k...)
			}
		case groupTotal:
			b = appendInteger(b, in.integer()+more.Uncompressed)
		case groupCompressed:
			b = appendInteger(b, in.integer()+more.Compressed)
		default:
			b = append(b, f.raw[fd.value:fd.end]...)
		}
	}
	return append(b, typeStop), c.err
}

// moveIndexes appends the chunks at the cursor with other places for their
// page indexes.
func moveIndexes(b []byte, c *cursor, moved []MovedIndexes) []byte {
	for i := range moved {
		last := int16(0)
		for c.err == nil {
			head := c.pos
			id, typ := c.fieldHeader(last)
			last = id
			b = append(b, c.b[head:c.pos]...)
			if typ == typeStop {
				break
			}
			value := c.pos
			if typ != typeTrue && typ != typeFalse {
				c.skip(typ, 1)
			}
			switch id {
			case chunkOffsetIndex:
				b = appendInteger(b, moved[i].OffsetIndex)
			case chunkColumnIndex:
				b = appendInteger(b, moved[i].ColumnIndex)
			default:
				b = append(b, c.b[value:c.pos]...)
			}
		}
	}
	return b
}

// extendOrders returns column_orders with one TypeDefinedOrder for each new
// column.
func (f *Footer) extendOrders(fd field, more int) []byte {
	in := &cursor{b: f.raw[:fd.end], pos: fd.value}
	n, _ := in.list()
	b := appendListHeader(nil, n+more, typeStruct)
	b = append(b, f.raw[in.pos:fd.end]...)
	for range more {
		var x Encoder
		x.Struct(1)
		x.End()
		x.End()
		b = append(b, x.B...)
	}
	return b
}
