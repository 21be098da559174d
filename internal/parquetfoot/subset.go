package parquetfoot

// Subset makes a footer of one row group and a few leaves, given in rising
// order, for a decoder: its size does not depend on that of the file. It has
// what finds and decodes pages and nothing else, so annotations, statistics
// and page indexes, which a decoder may not know or which may lie, cannot
// trip it. Offsets are those of the file.
func (f *Footer) Subset(g int, leaves []int, chunks []Chunk) []byte {
	var e Encoder
	e.I32(1, 1)
	f.subsetSchema(&e, leaves)
	rows := f.groups[g].rows
	e.I64(metaNumRows, rows)
	e.Structs(metaGroups, 1)
	e.Element()
	e.Structs(groupColumns, len(leaves))
	total := int64(0)
	for _, l := range leaves {
		chunks[l].encode(&e, f.Leaves[l].Name)
		total += chunks[l].Uncompressed
	}
	e.I64(groupTotal, total)
	e.I64(groupRows, rows)
	e.End()
	if f.created.to > 0 { // decoders know the faults of old writers by name
		e.field(metaCreatedBy, typeBinary)
		e.B = append(e.B, f.raw[f.created.from:f.created.to]...)
	}
	e.End()
	return e.B
}

// subsetSchema writes the given leaves and the groups that they stand in.
func (f *Footer) subsetSchema(e *Encoder, leaves []int) {
	children := map[int]int{} // by node; -1 is the root
	keep := map[int]bool{}
	for _, l := range leaves {
		for n := f.Leaves[l].node; n >= 0 && !keep[n]; n = f.Columns[n].parent {
			keep[n] = true
			children[f.Columns[n].parent]++
		}
	}
	e.Structs(metaSchema, len(keep)+1)
	e.Element()
	e.Binary(elemName, []byte("schema"))
	e.I32(elemChildren, int32(children[-1]))
	e.End()
	for n := range f.Columns {
		if !keep[n] {
			continue
		}
		e.B = append(e.B, f.Columns[n].simple...)
		if f.Columns[n].Leaf < 0 {
			e.B = appendHeader(e.B, elemName, elemChildren, typeI32)
			e.B = appendInteger(e.B, int64(children[n]))
		}
		e.B = append(e.B, typeStop)
	}
}

// encode writes a ColumnChunk with the fields that a decoder needs.
func (k *Chunk) encode(e *Encoder, name string) {
	e.Element()
	e.I64(2, 0)
	e.Struct(chunkMeta)
	e.I32(colType, int32(k.Physical))
	if k.encodings != nil {
		e.field(colEncodings, typeList)
		e.B = append(e.B, k.encodings...)
	} else {
		e.I32s(colEncodings)
	}
	e.Binaries(colPath, [][]byte{[]byte(name)})
	e.I32(colCodec, k.Codec)
	e.I64(colValues, k.Values)
	e.I64(colUncompressed, k.Uncompressed)
	e.I64(colCompressed, k.Compressed)
	e.I64(colDataPage, k.DataPage)
	if from := k.Start(); from != k.DataPage {
		e.I64(colDictionary, from)
	}
	e.End()
	e.End()
}
