package writers

import (
	"encoding/binary"
	"math"
)

// split8 stores values as BYTE_STREAM_SPLIT: the first bytes of all of them,
// then the second bytes, and so on, in little-endian order. dst has 8 bytes
// for each value. Eight values at a time are an 8 by 8 matrix of bytes, which
// three rounds of swaps transpose: halves, quarters, single bytes.
func split8(dst []byte, v []float64) {
	n := len(v)
	i := 0
	for ; i+8 <= n; i += 8 {
		x := (*[8]float64)(v[i:])
		a0, a4 := swap(math.Float64bits(x[0]), math.Float64bits(x[4]), 32, 0x00000000ffffffff)
		a1, a5 := swap(math.Float64bits(x[1]), math.Float64bits(x[5]), 32, 0x00000000ffffffff)
		a2, a6 := swap(math.Float64bits(x[2]), math.Float64bits(x[6]), 32, 0x00000000ffffffff)
		a3, a7 := swap(math.Float64bits(x[3]), math.Float64bits(x[7]), 32, 0x00000000ffffffff)
		a0, a2 = swap(a0, a2, 16, 0x0000ffff0000ffff)
		a1, a3 = swap(a1, a3, 16, 0x0000ffff0000ffff)
		a4, a6 = swap(a4, a6, 16, 0x0000ffff0000ffff)
		a5, a7 = swap(a5, a7, 16, 0x0000ffff0000ffff)
		a0, a1 = swap(a0, a1, 8, 0x00ff00ff00ff00ff)
		a2, a3 = swap(a2, a3, 8, 0x00ff00ff00ff00ff)
		a4, a5 = swap(a4, a5, 8, 0x00ff00ff00ff00ff)
		a6, a7 = swap(a6, a7, 8, 0x00ff00ff00ff00ff)
		binary.LittleEndian.PutUint64(dst[i:], a0)
		binary.LittleEndian.PutUint64(dst[n+i:], a1)
		binary.LittleEndian.PutUint64(dst[2*n+i:], a2)
		binary.LittleEndian.PutUint64(dst[3*n+i:], a3)
		binary.LittleEndian.PutUint64(dst[4*n+i:], a4)
		binary.LittleEndian.PutUint64(dst[5*n+i:], a5)
		binary.LittleEndian.PutUint64(dst[6*n+i:], a6)
		binary.LittleEndian.PutUint64(dst[7*n+i:], a7)
	}
	for ; i < n; i++ {
		for plane := range 8 {
			dst[plane*n+i] = byte(math.Float64bits(v[i]) >> (8 * plane))
		}
	}
}

// swap exchanges the bits of a above the mask with those of b below it.
func swap(a, b uint64, shift uint, mask uint64) (uint64, uint64) {
	t := (a>>shift ^ b) & mask
	return a ^ t<<shift, b ^ t
}

// split4 is split8 for values of 4 bytes: two of them fill a word, so four
// words are the four planes of eight values.
func split4(dst []byte, v []uint32) {
	n := len(v)
	i := 0
	for ; i+8 <= n; i += 8 {
		x := (*[8]uint32)(v[i:])
		a0, a2 := swap(uint64(x[0])|uint64(x[4])<<32, uint64(x[2])|uint64(x[6])<<32, 16, 0x0000ffff0000ffff)
		a1, a3 := swap(uint64(x[1])|uint64(x[5])<<32, uint64(x[3])|uint64(x[7])<<32, 16, 0x0000ffff0000ffff)
		a0, a1 = swap(a0, a1, 8, 0x00ff00ff00ff00ff)
		a2, a3 = swap(a2, a3, 8, 0x00ff00ff00ff00ff)
		binary.LittleEndian.PutUint64(dst[i:], a0)
		binary.LittleEndian.PutUint64(dst[n+i:], a1)
		binary.LittleEndian.PutUint64(dst[2*n+i:], a2)
		binary.LittleEndian.PutUint64(dst[3*n+i:], a3)
	}
	for ; i < n; i++ {
		for plane := range 4 {
			dst[plane*n+i] = byte(v[i] >> (8 * plane))
		}
	}
}
