package parquetfoot

import "fmt"

// handmade builds a footer that no library writes: annotations that came to
// the format late or never, and a field of unknown id in every structure.
func handmade(withOrders, withEntries bool) []byte {
	return handmadeFooter(withOrders, withEntries, false)
}

// handmadeFooter can give every chunk page indexes too.
func handmadeFooter(withOrders, withEntries, indexed bool) []byte {
	unknown := func(e *Encoder) {
		e.Struct(900)
		e.Binary(1, []byte("from the future"))
		e.I64s(7, []int64{-1, 1 << 60})
		e.End()
	}
	var e Encoder
	e.I32(1, 2)
	leaves := []func(){
		func() { e.Struct(10); e.Struct(15); e.End(); e.End() },                                   // FLOAT16
		func() { e.Struct(10); e.Struct(17); e.Binary(1, []byte("OGC:CRS84")); e.End(); e.End() }, // GEOMETRY
		func() { e.Struct(10); e.Struct(99); e.I32(1, 5); e.End(); e.End() },                      // nobody's
		func() {
			e.Struct(10)
			e.Struct(5)
			e.I32(1, 3)
			e.I32(2, 9)
			e.End()
			e.End()
		}, // DECIMAL(9,3)
		func() {
			e.Struct(10)
			e.Struct(10)
			e.B = append(e.B, 0x13, 64, 0x12)
			e.last = 2
			e.End()
			e.End()
		}, // INTEGER(64, unsigned)
	}
	physical := []Physical{FixedLenByteArray, ByteArray, Double, Int32, Int64}
	e.Structs(2, len(leaves)+1)
	e.Element()
	e.Binary(4, []byte("root"))
	e.I32(5, int32(len(leaves)))
	unknown(&e)
	e.End()
	for i, annotate := range leaves {
		e.Element()
		e.I32(1, int32(physical[i]))
		if physical[i] == FixedLenByteArray {
			e.I32(2, 2)
		}
		e.I32(3, int32(i%2))
		e.Binary(4, fmt.Appendf(nil, "c%d", i))
		e.I32(9, int32(i+1))
		annotate()
		unknown(&e)
		e.End()
	}
	e.I64(3, 20)
	e.Structs(4, 2)
	for range 2 {
		e.Element()
		e.Structs(1, len(leaves))
		for i := range leaves {
			e.Element()
			e.I64(2, 0)
			e.Struct(3)
			e.I32(1, int32(physical[i]))
			e.I32s(2, 0, 3)
			e.Binaries(3, [][]byte{fmt.Appendf(nil, "c%d", i)})
			e.I32(4, 0)
			e.I64(5, 10)
			e.I64(6, 100)
			e.I64(7, 90)
			e.I64(9, 4)
			e.Struct(12)
			e.Binary(5, []byte{1})
			e.field(7, typeTrue) // is_max_value_exact
			e.End()
			e.I64(14, 77) // bloom_filter_offset
			e.I32(15, 32) // bloom_filter_length
			e.Struct(16)  // size_statistics
			e.I64(1, 5)
			e.End()
			unknown(&e)
			e.End()
			if indexed {
				e.I64(4, 100)
				e.I32(5, 20)
				e.I64(6, 200)
				e.I32(7, 30)
			}
			unknown(&e)
			e.End()
		}
		e.I64(2, 500)
		e.I64(3, 10)
		e.I64(5, 4)
		e.I64(6, 450)
		e.field(7, typeI16)
		e.B = appendInteger(e.B, 1)
		unknown(&e)
		e.End()
	}
	if withEntries {
		e.Structs(5, 2)
		e.Element()
		e.Binary(1, []byte("no value"))
		e.End()
		e.Element()
		e.Binary(1, []byte("k"))
		e.Binary(2, []byte("v"))
		unknown(&e)
		e.End()
	}
	e.Binary(6, []byte("by hand"))
	if withOrders {
		e.Structs(7, len(leaves))
		for range leaves {
			e.Element()
			e.Struct(1)
			e.End()
			e.End()
		}
	}
	unknown(&e)
	e.End()
	return e.B
}
