package fitshead

import (
	"encoding/binary"
	"math/bits"
)

// A Sum is the ones-complement sum of a run of bytes, taken as big-endian
// words of 32 bits (section 4.4.2.7 and appendix J). Sums of pieces can be made
// anywhere, in any order, and joined.
type Sum struct {
	Words uint32 // of the bytes as if zeros filled the last word
	bytes int64
}

// SumOf returns the sum of p.
func SumOf(p []byte) Sum {
	s := Sum{bytes: int64(len(p))}
	var a, b uint64 // each takes 2^32 words before it could overflow
	for len(p) >= 16 {
		x, y := binary.BigEndian.Uint64(p), binary.BigEndian.Uint64(p[8:])
		a += x>>32 + x&0xffffffff
		b += y>>32 + y&0xffffffff
		p = p[16:]
	}
	a, b = fold(a), fold(b)
	for ; len(p) >= 4; p = p[4:] {
		a += uint64(binary.BigEndian.Uint32(p))
	}
	var last [4]byte
	copy(last[:], p)
	s.Words = uint32(fold(a + b + uint64(binary.BigEndian.Uint32(last[:]))))
	return s
}

// fold carries what is beyond 32 bits around to the low end.
func fold(v uint64) uint64 {
	for v>>32 != 0 {
		v = v>>32 + v&0xffffffff
	}
	return v
}

// Join returns the sum of the bytes of s followed by those of t. A byte that
// lies n bytes further on in its word counts 2^(8n) times less, and in this
// arithmetic that is a rotation.
func (s Sum) Join(t Sum) Sum {
	shifted := bits.RotateLeft32(t.Words, -8*int(s.bytes%4))
	return Sum{uint32(fold(uint64(s.Words) + uint64(shifted))), s.bytes + t.bytes}
}

// encodeSum writes the complement of a sum as the 16 letters and digits that
// CHECKSUM holds (appendix J): each byte is shared out over four characters
// that add up to it and to four times '0', none of them a punctuation mark.
func encodeSum(sum uint32) string {
	var spread [16]byte
	for i := range 4 {
		b := byte(^sum >> (24 - 8*i))
		part := [4]byte{b/4 + b%4 + '0', b/4 + '0', b/4 + '0', b/4 + '0'}
		for j := 0; j < 4; j += 2 {
			for isPunctuation(part[j]) || isPunctuation(part[j+1]) {
				part[j]++
				part[j+1]--
			}
		}
		for j := range 4 {
			spread[4*j+i] = part[j]
		}
	}
	// The value begins one byte before a word does.
	return string(append(spread[15:16:16], spread[:15]...))
}

// isPunctuation reports whether c lies between the digits and the letters.
func isPunctuation(c byte) bool { return c > '9' && c < 'A' || c > 'Z' && c < 'a' }
