package parquetfoot

import (
	"errors"
	"fmt"
	"unicode/utf8"
)

// A Physical is the type in which a leaf's values are stored.
type Physical int32

// The physical types, numbered as in parquet.thrift.
const (
	Boolean Physical = iota
	Int32
	Int64
	Int96
	Float
	Double
	ByteArray
	FixedLenByteArray
)

// A Logical says what a leaf's values mean: parquet.thrift's LogicalType where
// a file has it, else the older ConvertedType.
type Logical int

// The meanings that matter to a reader of numbers and text. Opaque stands for
// all others, also those that this package does not know.
const (
	Plain Logical = iota
	String
	Integer
	Unsigned
	Decimal
	Float16
	Opaque
)

// Field ids of SchemaElement.
const (
	elemType      = 1
	elemLength    = 2
	elemRepeat    = 3
	elemName      = 4
	elemChildren  = 5
	elemConverted = 6
	elemScale     = 7
	elemLogical   = 10
)

// Repetition types.
const (
	required = 0
	optional = 1
	repeated = 2
)

// A Node is one element of the schema below the root.
type Node struct {
	Name   string // names from the top level down, joined by dots
	Depth  int    // 1 at the top level
	Leaf   int    // index into Leaves, -1 for a group
	simple []byte // what Subset writes for it
	parent int    // index into Columns, -1 at the top level
}

// A Leaf is a column that holds values.
type Leaf struct {
	Name     string
	Physical Physical
	Logical  Logical
	Length   int // bytes of a FixedLenByteArray
	Scale    int // of a Decimal
	MaxDef   int // definition level of a value that is there
	MaxRep   int // 0 if there is one value a row at most
	node     int
}

// element is a SchemaElement as far as it matters here.
type element struct {
	name                     string
	physical, length, repeat int64
	children, scale, convert int64
	hasType, hasLog          bool
	logical                  Logical
}

// scanSchema reads the flattened tree: each group is followed by its children.
func (f *Footer) scanSchema(c *cursor) {
	n := c.structs()
	if c.err != nil {
		return
	}
	if n == 0 {
		c.fail(errors.New("the schema is empty"))
		return
	}
	root := f.element(c)
	if root.hasType || root.children < 0 {
		c.fail(errors.New("the schema's root is not a group"))
		return
	}
	again := &cursor{b: c.b, pos: f.elements[0].from}
	if again.split(nil); again.err != nil { // it will be split when it is extended
		c.fail(again.err)
		return
	}
	type open struct {
		left           int64
		node, def, rep int
		name           string
		depth          int
	}
	stack := []open{{left: root.children, node: -1}}
	for i := 1; i < n && c.err == nil; i++ {
		for len(stack) > 0 && stack[len(stack)-1].left == 0 {
			stack = stack[:len(stack)-1]
		}
		if len(stack) == 0 {
			c.fail(errors.New("the schema has more elements than its groups have children"))
			return
		}
		top := &stack[len(stack)-1]
		top.left--
		e := f.element(c)
		def, rep := top.def, top.rep
		switch e.repeat {
		case required:
		case optional:
			def++
		case repeated:
			def, rep = def+1, rep+1
		default:
			c.fail(fmt.Errorf("column %q has the unknown repetition type %d", e.name, e.repeat))
			return
		}
		node := Node{Name: e.name, Depth: top.depth + 1, Leaf: -1, parent: top.node, simple: e.simple()}
		if top.node >= 0 {
			node.Name = top.name + "." + e.name
		}
		if node.Depth > maxDepth {
			c.fail(errDeep)
			return
		}
		if e.hasType {
			node.Leaf = len(f.Leaves)
			f.Leaves = append(f.Leaves, e.leaf(node.Name, def, rep, len(f.Columns)))
		}
		f.Columns = append(f.Columns, node)
		if !e.hasType && e.children > 0 {
			stack = append(stack, open{e.children, len(f.Columns) - 1, def, rep, node.Name, node.Depth})
		}
	}
	for _, s := range stack {
		if s.left != 0 && c.err == nil {
			c.fail(errors.New("the schema ends before its groups have all their children"))
		}
	}
}

// element reads one SchemaElement and remembers where it stands.
func (f *Footer) element(c *cursor) element {
	var e element
	from := c.pos
	c.fields(func(id int16, typ byte) {
		switch id {
		case elemName:
			if c.want(typ, typeBinary, "a column name") {
				if e.name = string(c.binary()); !utf8.ValidString(e.name) {
					c.fail(fmt.Errorf("the column name %q is not UTF-8", e.name))
				}
			}
			return
		case elemLogical:
			if c.want(typ, typeStruct, "logicalType") {
				e.hasLog = true
				e.scanLogical(c)
			}
			return
		}
		into := map[int16]*int64{elemType: &e.physical, elemLength: &e.length, elemRepeat: &e.repeat,
			elemChildren: &e.children, elemConverted: &e.convert, elemScale: &e.scale}[id]
		if into != nil && c.want(typ, typeI32, "a number of the schema") {
			*into = c.integer()
			e.hasType = e.hasType || id == elemType
			if id == elemConverted && !e.hasLog {
				e.logical = converted(*into)
			}
		}
	})
	if e.hasType && (e.physical < 0 || e.physical > int64(FixedLenByteArray)) {
		c.fail(fmt.Errorf("column %q has the unknown physical type %d", e.name, e.physical))
	}
	if e.children < 0 || e.hasType && e.children > 0 {
		c.fail(fmt.Errorf("column %q has %d children", e.name, e.children))
	}
	f.elements = append(f.elements, span{from, c.pos})
	return e
}

// scanLogical reads the union LogicalType.
func (e *element) scanLogical(c *cursor) {
	e.logical = Opaque
	c.fields(func(id int16, typ byte) {
		if typ != typeStruct {
			return
		}
		switch id {
		case 1, 4, 12: // STRING, ENUM, JSON
			e.logical = String
		case 5:
			e.logical = Decimal
			c.fields(func(id int16, typ byte) {
				if id == 1 && typ == typeI32 {
					e.scale = c.integer()
				}
			})
		case 10:
			e.logical = Integer
			c.fields(func(id int16, typ byte) {
				if id == 2 && typ == typeFalse {
					e.logical = Unsigned
				}
			})
		case 15:
			e.logical = Float16
		}
	})
}

// converted translates the older ConvertedType.
func converted(v int64) Logical {
	switch {
	case v == 0 || v == 4 || v == 19: // UTF8, ENUM, JSON
		return String
	case v == 5:
		return Decimal
	case v >= 11 && v <= 14:
		return Unsigned
	case v >= 15 && v <= 18:
		return Integer
	}
	return Opaque
}

func (e *element) leaf(name string, def, rep, node int) Leaf {
	return Leaf{Name: name, Physical: Physical(e.physical), Logical: e.logical, Length: int(e.length),
		Scale: int(e.scale), MaxDef: def, MaxRep: rep, node: node}
}

// simple encodes what a decoder of levels and values must know of an element:
// no annotation, so that none can trip it.
func (e *element) simple() []byte {
	var x Encoder
	if e.hasType {
		x.I32(elemType, int32(e.physical))
		if e.length != 0 {
			x.I32(elemLength, int32(e.length))
		}
	}
	x.I32(elemRepeat, int32(e.repeat))
	x.Binary(elemName, []byte(e.name))
	return x.B // a group still needs its number of children; both need their end
}
