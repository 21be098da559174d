package parquetfoot

import (
	"encoding/binary"
	"errors"
	"fmt"
)

// The wire types of the Thrift compact protocol. A boolean field has its value
// in its type and no bytes of its own; a boolean in a list is one byte.
const (
	typeStop   = 0
	typeTrue   = 1
	typeFalse  = 2
	typeByte   = 3
	typeI16    = 4
	typeI32    = 5
	typeI64    = 6
	typeDouble = 7
	typeBinary = 8
	typeList   = 9
	typeSet    = 10
	typeMap    = 11
	typeStruct = 12
	typeUUID   = 13
)

// maxDepth bounds how deeply structures may nest. The footer's own fields
// nest eight deep; the rest is room for fields that nobody knows yet.
const maxDepth = 48

var (
	errShort = errors.New("the footer ends in the middle of a field")
	errDeep  = fmt.Errorf("the footer nests deeper than %d levels", maxDepth)
)

// A cursor walks over compact Thrift without building anything. The first
// error sticks: every later call returns zeros, so callers check err once.
type cursor struct {
	b   []byte
	pos int
	err error
}

func (c *cursor) fail(err error) {
	if c.err == nil {
		c.err = err
	}
	c.pos = len(c.b)
}

func (c *cursor) byte() byte {
	if c.pos >= len(c.b) {
		c.fail(errShort)
		return 0
	}
	v := c.b[c.pos]
	c.pos++
	return v
}

func (c *cursor) advance(n int) {
	if n < 0 || n > len(c.b)-c.pos {
		c.fail(errShort)
		return
	}
	c.pos += n
}

func (c *cursor) uvarint() uint64 {
	if c.pos < len(c.b) && c.b[c.pos] < 0x80 { // nearly all of them
		c.pos++
		return uint64(c.b[c.pos-1])
	}
	v, n := binary.Uvarint(c.b[c.pos:])
	if n <= 0 {
		c.fail(errShort)
		return 0
	}
	c.pos += n
	return v
}

// integer reads a zigzag varint, the form of i16, i32 and i64.
func (c *cursor) integer() int64 {
	v := c.uvarint()
	return int64(v>>1) ^ -int64(v&1)
}

// binary reads a byte string, which aliases the footer.
func (c *cursor) binary() []byte {
	n := c.uvarint()
	if n > uint64(len(c.b)-c.pos) {
		c.fail(errShort)
		return nil
	}
	from := c.pos
	c.pos += int(n)
	return c.b[from:c.pos:c.pos]
}

// list reads a list's header. Every element takes at least one byte, so a
// count beyond the bytes that are left is refused before anyone allocates.
func (c *cursor) list() (n int, elem byte) {
	h := c.byte()
	size := uint64(h >> 4)
	if size == 15 {
		size = c.uvarint()
	}
	if size > uint64(len(c.b)-c.pos) {
		c.fail(errShort)
		return 0, 0
	}
	return int(size), h & 0x0f
}

// structs reads the header of a list of structs.
func (c *cursor) structs() int {
	n, elem := c.list()
	if n > 0 && elem != typeStruct {
		c.fail(fmt.Errorf("a list of Thrift type %d stands where structures should", elem))
		return 0
	}
	return n
}

// fields calls f for each field of the struct at the cursor and skips the
// values that f leaves unread. f must read all of a value or nothing of it.
func (c *cursor) fields(f func(id int16, typ byte)) {
	last := int16(0)
	for c.err == nil {
		id, typ := c.fieldHeader(last)
		if typ == typeStop {
			return
		}
		last = id
		at := c.pos
		f(id, typ)
		if c.pos == at && typ != typeTrue && typ != typeFalse {
			c.skip(typ, 1)
		}
	}
}

func (c *cursor) fieldHeader(last int16) (id int16, typ byte) {
	h := c.byte()
	if h == typeStop {
		return 0, typeStop
	}
	if delta := h >> 4; delta != 0 {
		return last + int16(delta), h & 0x0f
	}
	return int16(c.integer()), h & 0x0f
}

// want reports whether typ is the wanted type and fails the cursor otherwise.
func (c *cursor) want(typ, wanted byte, what string) bool {
	if typ == wanted {
		return true
	}
	c.fail(fmt.Errorf("%s has Thrift type %d instead of %d", what, typ, wanted))
	return false
}

// skip passes over one value.
func (c *cursor) skip(typ byte, depth int) {
	if depth > maxDepth {
		c.fail(errDeep)
		return
	}
	switch typ {
	case typeTrue, typeFalse, typeByte:
		c.advance(1) // as an element; as a field, a boolean has no bytes
	case typeI16, typeI32, typeI64:
		c.uvarint()
	case typeDouble:
		c.advance(8)
	case typeUUID:
		c.advance(16)
	case typeBinary:
		c.binary()
	case typeList, typeSet:
		n, elem := c.list()
		for i := 0; i < n && c.err == nil; i++ {
			c.skip(elem, depth+1)
		}
	case typeMap:
		c.skipMap(depth)
	case typeStruct:
		last := int16(0)
		for c.err == nil {
			id, t := c.fieldHeader(last)
			if t == typeStop {
				return
			}
			if last = id; t != typeTrue && t != typeFalse {
				c.skip(t, depth+1)
			}
		}
	default:
		c.fail(fmt.Errorf("the footer has a field of unknown Thrift type %d", typ))
	}
}

func (c *cursor) skipMap(depth int) {
	n := c.uvarint()
	if n == 0 {
		return
	}
	if n > uint64(len(c.b)-c.pos) {
		c.fail(errShort)
		return
	}
	types := c.byte()
	for i := uint64(0); i < n && c.err == nil; i++ {
		c.skip(types>>4, depth+1)
		c.skip(types&0x0f, depth+1)
	}
}

// A span is a piece of the footer by its offsets.
type span struct{ from, to int }

// A field is one field of a struct: its header starts at head, its value at
// value, and both end before end.
type field struct {
	id, prev         int16 // prev is the id before it, from which its header counts
	typ              byte
	head, value, end int
}

// split finds the borders of the fields of the struct at the cursor. An id
// that stands twice is refused: readers disagree on which one counts. The result
// uses the memory of all.
func (c *cursor) split(all []field) []field {
	all = all[:0]
	last := int16(0)
	for c.err == nil {
		f := field{prev: last, head: c.pos}
		f.id, f.typ = c.fieldHeader(last)
		if f.typ == typeStop {
			break
		}
		f.value = c.pos
		if f.typ != typeTrue && f.typ != typeFalse {
			c.skip(f.typ, 1)
		}
		f.end = c.pos
		for i := range all {
			if all[i].id == f.id {
				c.fail(fmt.Errorf("field %d of a footer structure stands twice", f.id))
			}
		}
		last = f.id
		if all = append(all, f); len(all) > 1<<10 {
			c.fail(errors.New("a footer structure has more than 1024 fields"))
		}
	}
	return all
}
