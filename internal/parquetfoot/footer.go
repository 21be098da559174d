// Package parquetfoot reads the footer of a Parquet file and splices new
// columns into it, without ever building a tree of the whole: one skip pass
// finds where fields begin and end, and what is not changed is written back as
// the bytes that were read, fields that this package does not know included.
//
// Start at [Read] for reading, at [Footer.Extend] for splicing. [Footer.Subset]
// makes the small footer that a decoder of a few columns of one row group
// needs. The structures are those of parquet.thrift in apache/parquet-format
// 2.11, in the Thrift compact protocol; field numbers below are from there.
package parquetfoot

import (
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"
)

// MaxSize is the largest footer that readers agree on: its length is written
// in four bytes that many of them take as signed.
const MaxSize = math.MaxInt32

// Field ids of FileMetaData.
const (
	metaSchema     = 2
	metaNumRows    = 3
	metaGroups     = 4
	metaKeyValues  = 5
	metaCreatedBy  = 6
	metaOrders     = 7
	metaEncryption = 8
)

// A Footer is the FileMetaData of one file, as bytes and as borders in them.
type Footer struct {
	Rows    int64
	Leaves  []Leaf
	Columns []Node // every element of the schema but the root, in file order
	Entries []Entry

	// Ordered tells whether the file has column_orders, without which min and
	// max mean nothing to a reader.
	Ordered bool

	// Indexed tells whether every column chunk has an offset index.
	Indexed bool

	raw      []byte
	fields   []field
	elements []span // of the schema, the root first
	groups   []group
	orders   int // elements of column_orders
	created  span
}

// A group is where a row group stands in the footer, and its rows.
type group struct {
	span
	first, rows int64
}

// An Entry is one pair of the file's key-value metadata. One that was read
// keeps its bytes and is written back as it stood.
type Entry struct {
	Key, Value string
	raw        []byte
}

// Read finds and checks the footer of a file of the given size.
func Read(r io.ReaderAt, size int64) (*Footer, error) {
	var head, tail [8]byte
	if size < 12 {
		return nil, fmt.Errorf("a Parquet file has at least 12 bytes, this one has %d", size)
	}
	if _, err := r.ReadAt(head[:4], 0); err != nil {
		return nil, err
	}
	if _, err := r.ReadAt(tail[:], size-8); err != nil {
		return nil, err
	}
	switch string(tail[4:]) {
	case "PAR1":
	case "PARE":
		return nil, errors.New("the file is encrypted, which is not supported: decrypt it first")
	default:
		if string(head[:4]) == "PAR1" {
			return nil, errors.New("the file begins as Parquet but does not end with PAR1: it is cut short, or bytes were appended to it")
		}
		return nil, errors.New("the file is not Parquet: it does not end with PAR1")
	}
	if string(head[:4]) != "PAR1" {
		return nil, errors.New("the file does not begin with PAR1")
	}
	n := int64(binary.LittleEndian.Uint32(tail[:4]))
	if n > MaxSize || n > size-12 {
		return nil, fmt.Errorf("the footer says it has %d bytes, in a file of %d", n, size)
	}
	raw := make([]byte, n)
	if _, err := r.ReadAt(raw, size-8-n); err != nil {
		return nil, err
	}
	return Parse(raw, size-8-n)
}

// Parse checks the bytes of a footer. Data must lie before end, the offset at
// which the footer starts. The footer keeps raw.
func Parse(raw []byte, end int64) (*Footer, error) {
	f := &Footer{raw: raw, Indexed: true}
	c := &cursor{b: raw}
	f.fields = c.split(nil)
	if c.err != nil {
		return nil, c.err
	}
	if err := f.scan(); err != nil {
		return nil, err
	}
	if err := f.checkGroups(end); err != nil {
		return nil, err
	}
	if f.Ordered && f.orders != len(f.Leaves) {
		return nil, fmt.Errorf("the footer has %d column orders for %d columns", f.orders, len(f.Leaves))
	}
	return f, nil
}

// scan reads the fields of FileMetaData that matter here.
func (f *Footer) scan() error {
	seen := map[int16]bool{}
	for _, fd := range f.fields {
		seen[fd.id] = true
		c := &cursor{b: f.raw[:fd.end], pos: fd.value}
		switch fd.id {
		case metaSchema:
			if c.want(fd.typ, typeList, "schema") {
				f.scanSchema(c)
			}
		case metaNumRows:
			if c.want(fd.typ, typeI64, "num_rows") {
				f.Rows = c.integer()
			}
		case metaGroups:
			if c.want(fd.typ, typeList, "row_groups") {
				f.groups = scanGroups(c)
			}
		case metaKeyValues:
			if c.want(fd.typ, typeList, "key_value_metadata") {
				f.scanEntries(c)
			}
		case metaCreatedBy:
			if c.want(fd.typ, typeBinary, "created_by") {
				f.created = span{fd.value, fd.end}
			}
		case metaOrders:
			if c.want(fd.typ, typeList, "column_orders") {
				f.Ordered, f.orders = true, c.structs()
			}
		case metaEncryption:
			return errors.New("the file is encrypted, which is not supported: decrypt it first")
		}
		if c.err != nil {
			return c.err
		}
	}
	for _, id := range []int16{metaSchema, metaNumRows, metaGroups} {
		if !seen[id] {
			return fmt.Errorf("the footer lacks its required field %d", id)
		}
	}
	return nil
}

func (f *Footer) scanEntries(c *cursor) {
	for n := c.structs(); n > 0 && c.err == nil; n-- {
		from := c.pos
		var e Entry
		c.fields(func(id int16, typ byte) {
			switch {
			case id == 1 && c.want(typ, typeBinary, "a metadata key"):
				e.Key = string(c.binary())
			case id == 2 && c.want(typ, typeBinary, "a metadata value"):
				e.Value = string(c.binary())
			}
		})
		e.raw = f.raw[from:c.pos]
		f.Entries = append(f.Entries, e)
	}
}

// Len returns the number of bytes of the footer, without its length and magic.
func (f *Footer) Len() int { return len(f.raw) }

// Groups returns the number of row groups.
func (f *Footer) Groups() int { return len(f.groups) }

// GroupRows returns the rows of row group g and the rows before it.
func (f *Footer) GroupRows(g int) (first, rows int64) {
	return f.groups[g].first, f.groups[g].rows
}
