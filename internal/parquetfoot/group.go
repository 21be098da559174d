package parquetfoot

import (
	"errors"
	"fmt"
)

// Field ids of RowGroup, ColumnChunk and ColumnMetaData.
const (
	groupColumns    = 1
	groupTotal      = 2
	groupRows       = 3
	groupCompressed = 6

	chunkPath              = 1
	chunkMeta              = 3
	chunkOffsetIndex       = 4
	chunkOffsetIndexLength = 5
	chunkColumnIndex       = 6
	chunkColumnIndexLength = 7
	chunkCrypto            = 8

	colType         = 1
	colEncodings    = 2
	colPath         = 3
	colCodec        = 4
	colValues       = 5
	colUncompressed = 6
	colCompressed   = 7
	colDataPage     = 9
	colDictionary   = 11
)

// A Chunk is one column of one row group.
type Chunk struct {
	Physical     Physical
	Codec        int32
	Values       int64
	Uncompressed int64 // bytes of its pages with their headers, unpacked
	Compressed   int64 // bytes of its pages in the file
	DataPage     int64 // offset of the first data page
	Dictionary   int64 // offset of the dictionary page; 0 if there is none

	// Where its page indexes stand; Length 0 is none.
	OffsetIndex, ColumnIndex Place

	encodings []byte
}

// A Place is a run of bytes of the file.
type Place struct{ Offset, Length int64 }

func (p Place) within(end int64) bool {
	return p.Length == 0 || p.Length > 0 && p.Offset >= 4 && p.Offset <= end && p.Length <= end-p.Offset
}

// scanGroups finds the borders of the row groups and their rows.
func scanGroups(c *cursor) []group {
	n := c.structs()
	if c.err != nil {
		return nil
	}
	all := make([]group, 0, n)
	first := int64(0)
	var fields []field
	for ; n > 0 && c.err == nil; n-- {
		g := group{first: first, rows: -1, span: span{from: c.pos}}
		fields = c.split(fields)
		for _, fd := range fields {
			switch fd.id {
			case groupRows, groupTotal, groupCompressed:
				in := &cursor{b: c.b, pos: fd.value}
				if c.want(fd.typ, typeI64, "a size of a row group") && fd.id == groupRows {
					g.rows = in.integer()
				}
			}
		}
		if g.rows < 0 || g.rows > 1<<62-first {
			c.fail(fmt.Errorf("row group %d has %d rows", len(all), g.rows))
		}
		first += g.rows
		g.to = c.pos
		all = append(all, g)
	}
	return all
}

// checkGroups looks at every column chunk once. What it lets pass, the rest
// of the package and its callers may rely on.
func (f *Footer) checkGroups(end int64) error {
	var chunks []Chunk
	total, indexes := int64(0), int64(0)
	for g := range f.groups {
		total += f.groups[g].rows
		var err error
		if chunks, err = f.Chunks(g, chunks); err != nil {
			return fmt.Errorf("row group %d: %w", g, err)
		}
		for i := range chunks {
			if err := chunks[i].check(&f.Leaves[i], f.groups[g].rows, end); err != nil {
				return fmt.Errorf("row group %d, column %q: %w", g, f.Leaves[i].Name, err)
			}
			f.Indexed = f.Indexed && chunks[i].OffsetIndex.Length > 0
			if indexes += chunks[i].OffsetIndex.Length + chunks[i].ColumnIndex.Length; indexes > end {
				return fmt.Errorf("row group %d: the page indexes overlap", g)
			}
		}
	}
	if total != f.Rows {
		return fmt.Errorf("the footer says %d rows, its row groups hold %d", f.Rows, total)
	}
	return nil
}

// check compares a chunk with its leaf and with the space there is for it.
func (k *Chunk) check(leaf *Leaf, rows, end int64) error {
	switch {
	case k.Physical != leaf.Physical:
		return fmt.Errorf("it is stored as physical type %d, the schema says %d", k.Physical, leaf.Physical)
	case k.Compressed < 0 || k.Uncompressed < 0 || k.Values < 0:
		return errors.New("its sizes are negative")
	case leaf.MaxRep == 0 && k.Values != rows:
		return fmt.Errorf("it has %d values for %d rows", k.Values, rows)
	case !k.OffsetIndex.within(end) || !k.ColumnIndex.within(end):
		return errors.New("its page index does not lie between header and footer")
	case k.Values == 0:
		return nil // there may be no page, and offsets mean nothing
	}
	from := k.Start()
	if from < 4 || from > end || k.Compressed > end-from {
		return fmt.Errorf("its %d bytes at offset %d do not lie between header and footer", k.Compressed, from)
	}
	return nil
}

// Start returns the offset of the chunk's first page.
func (k *Chunk) Start() int64 {
	if k.Dictionary > 0 && k.Dictionary < k.DataPage {
		return k.Dictionary
	}
	return k.DataPage
}

// Chunks returns the column chunks of row group g, one for each leaf, using
// the memory of into.
func (f *Footer) Chunks(g int, into []Chunk) ([]Chunk, error) {
	into = into[:0]
	c := &cursor{b: f.raw[:f.groups[g].to], pos: f.groups[g].from}
	found := false
	c.fields(func(id int16, typ byte) {
		if id != groupColumns || !c.want(typ, typeList, "columns of a row group") {
			return
		}
		if n := c.structs(); n != len(f.Leaves) || found {
			c.fail(fmt.Errorf("it has %d columns, the schema has %d", n, len(f.Leaves)))
			return
		}
		for found = true; len(into) < len(f.Leaves) && c.err == nil; {
			into = append(into, Chunk{})
			if err := into[len(into)-1].scan(c); err != nil {
				c.fail(fmt.Errorf("column %q: %w", f.Leaves[len(into)-1].Name, err))
			}
		}
	})
	if c.err == nil && !found {
		c.fail(errors.New("it has no list of columns"))
	}
	return into, c.err
}

// scan reads one ColumnChunk.
func (k *Chunk) scan(c *cursor) error {
	seen := false
	var refused error
	c.fields(func(id int16, typ byte) {
		if into := k.indexField(id); into != nil {
			if c.want(typ, chunkIndexType(id), "the place of a page index") {
				*into = c.integer()
			}
			return
		}
		switch id {
		case chunkPath:
			refused = errors.New("its pages are in another file (file_path), which is not supported")
		case chunkCrypto:
			refused = errors.New("it is encrypted, which is not supported: decrypt the file first")
		case chunkMeta:
			if seen {
				refused = errors.New("it has its meta_data twice")
			} else if c.want(typ, typeStruct, "meta_data") {
				seen = true
				k.scanMeta(c)
			}
		}
	})
	switch {
	case c.err != nil:
		return c.err
	case refused != nil:
		return refused
	case !seen:
		return errors.New("it has no meta_data")
	}
	return nil
}

// indexField returns what a field of ColumnChunk says of a page index, or nil.
func (k *Chunk) indexField(id int16) *int64 {
	switch id {
	case chunkOffsetIndex:
		return &k.OffsetIndex.Offset
	case chunkOffsetIndexLength:
		return &k.OffsetIndex.Length
	case chunkColumnIndex:
		return &k.ColumnIndex.Offset
	case chunkColumnIndexLength:
		return &k.ColumnIndex.Length
	}
	return nil
}

// chunkIndexType: offsets are wide, lengths are not.
func chunkIndexType(id int16) byte {
	if id == chunkOffsetIndex || id == chunkColumnIndex {
		return typeI64
	}
	return typeI32
}

// scanMeta reads one ColumnMetaData.
func (k *Chunk) scanMeta(c *cursor) {
	k.Physical = -1
	c.fields(func(id int16, typ byte) {
		switch {
		case id == colType && typ == typeI32:
			k.Physical = Physical(c.integer())
		case id == colEncodings && typ == typeList:
			from := c.pos
			c.skip(typ, 1)
			if c.err == nil {
				k.encodings = c.b[from:c.pos]
			}
		case id == colCodec && typ == typeI32:
			k.Codec = int32(c.integer())
		case typ != typeI64:
		case id == colValues:
			k.Values = c.integer()
		case id == colUncompressed:
			k.Uncompressed = c.integer()
		case id == colCompressed:
			k.Compressed = c.integer()
		case id == colDataPage:
			k.DataPage = c.integer()
		case id == colDictionary:
			k.Dictionary = c.integer()
		}
	})
}
