package parquetfoot

import "encoding/binary"

// An Encoder appends compact Thrift to B: the page headers, column metadata
// and page indexes of new columns. Fields must come in rising order of id.
type Encoder struct {
	B     []byte
	last  int16
	outer []int16 // last of each enclosing struct
}

func (e *Encoder) field(id int16, typ byte) {
	e.B = appendHeader(e.B, e.last, id, typ)
	e.last = id
}

// I32 appends an integer field; enumerations are integers too.
func (e *Encoder) I32(id int16, v int32) {
	e.field(id, typeI32)
	e.B = appendInteger(e.B, int64(v))
}

// I64 appends a wide integer field.
func (e *Encoder) I64(id int16, v int64) {
	e.field(id, typeI64)
	e.B = appendInteger(e.B, v)
}

// Binary appends a field of bytes or text.
func (e *Encoder) Binary(id int16, v []byte) {
	e.field(id, typeBinary)
	e.B = appendBinary(e.B, v)
}

// Struct opens a field that is a struct; End closes it.
func (e *Encoder) Struct(id int16) {
	e.field(id, typeStruct)
	e.Element()
}

// Encoded appends a field that is a struct, encoded elsewhere.
func (e *Encoder) Encoded(id int16, v []byte) {
	e.field(id, typeStruct)
	e.B = append(e.B, v...)
}

// Element opens a struct that is an element of a list; End closes it.
func (e *Encoder) Element() {
	e.outer = append(e.outer, e.last)
	e.last = 0
}

// End closes a struct. The outermost one is closed by End too.
func (e *Encoder) End() {
	e.B = append(e.B, typeStop)
	e.last = 0
	if n := len(e.outer); n > 0 {
		e.last, e.outer = e.outer[n-1], e.outer[:n-1]
	}
}

// Structs opens a list of n structs, each to be written by Element and End.
func (e *Encoder) Structs(id int16, n int) {
	e.field(id, typeList)
	e.B = appendListHeader(e.B, n, typeStruct)
}

// I32s appends a list of integers.
func (e *Encoder) I32s(id int16, list ...int32) {
	e.field(id, typeList)
	e.B = appendListHeader(e.B, len(list), typeI32)
	for _, v := range list {
		e.B = appendInteger(e.B, int64(v))
	}
}

// I64s appends a list of wide integers.
func (e *Encoder) I64s(id int16, list []int64) {
	e.field(id, typeList)
	e.B = appendListHeader(e.B, len(list), typeI64)
	for _, v := range list {
		e.B = appendInteger(e.B, v)
	}
}

// Binaries appends a list of byte strings.
func (e *Encoder) Binaries(id int16, list [][]byte) {
	e.field(id, typeList)
	e.B = appendListHeader(e.B, len(list), typeBinary)
	for _, v := range list {
		e.B = appendBinary(e.B, v)
	}
}

// Bools appends a list of booleans.
func (e *Encoder) Bools(id int16, list []bool) {
	e.field(id, typeList)
	e.B = appendListHeader(e.B, len(list), typeTrue)
	for _, v := range list {
		b := byte(typeFalse)
		if v {
			b = typeTrue
		}
		e.B = append(e.B, b)
	}
}

func appendHeader(b []byte, last, id int16, typ byte) []byte {
	if delta := int(id) - int(last); delta > 0 && delta < 16 {
		return append(b, byte(delta)<<4|typ)
	}
	return appendInteger(append(b, typ), int64(id))
}

func appendInteger(b []byte, v int64) []byte {
	return binary.AppendUvarint(b, uint64(v)<<1^uint64(v>>63))
}

func appendBinary(b, v []byte) []byte {
	return append(binary.AppendUvarint(b, uint64(len(v))), v...)
}

func appendListHeader(b []byte, n int, elem byte) []byte {
	if n < 15 {
		return append(b, byte(n)<<4|elem)
	}
	return binary.AppendUvarint(append(b, 0xf0|elem), uint64(n))
}
