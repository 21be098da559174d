package writers

import "encoding/binary"

// Of the byte planes of a split column the lower ones are the low bits of
// mantissas, which nothing compresses; a compressor spends most of its time on
// finding that out. So planes that a look at a sample finds incompressible are
// stored as they are, in raw blocks of the same zstd frame, and only the rest
// is given to the encoder. The frame is like any other to a decoder.

// planes says where the planes of a split body begin and how long each is.
type planes struct{ from, size int }

const (
	sampleSize = 512 // bytes, twice for each plane
	minPlane   = 4096
)

// incompressible returns how many bytes at the start of body are to be stored
// as they are: the levels and the lower planes, up to the first that a
// compressor would shorten. 0 is none. The last plane, with sign and exponent,
// is never among them.
func (p planes) incompressible(body []byte) int {
	if p.size < minPlane {
		return 0
	}
	at := p.from
	for at+2*p.size <= len(body) && !compressible(body[at:at+p.size]) {
		at += p.size
	}
	if at == p.from {
		return 0
	}
	return at
}

// compressible looks at two samples of a plane: are some bytes more frequent
// than others, or do sequences of four come again? It counts in integers, so
// that every machine decides alike.
func compressible(plane []byte) bool {
	var counts [256]int
	again := 0
	for _, from := range []int{0, len(plane) - sampleSize} {
		sample := plane[from : from+sampleSize]
		for _, b := range sample {
			counts[b]++
		}
		again += repeats(sample)
	}
	squares := 0
	for _, n := range counts {
		squares += n * n
	}
	// For bytes that are all equally likely the sum of squares is near
	// n + n^2/256; at 5/4 of it a coder saves some 4 %.
	const n = 2 * sampleSize
	return squares > (n+n*n/256)*5/4 || again > n/64
}

// repeats counts the positions of a sample whose four bytes came before.
func repeats(sample []byte) int {
	var seen [512]uint16 // position+1, by hash
	n := 0
	for i := 0; i+4 <= len(sample); i++ {
		v := binary.LittleEndian.Uint32(sample[i:])
		h := v * 2654435761 >> 23
		if at := int(seen[h]) - 1; at >= 0 && binary.LittleEndian.Uint32(sample[at:]) == v {
			n++
		}
		seen[h] = uint16(i + 1)
	}
	return n
}

// Of RFC 8878, Zstandard compression.
const (
	zstdMagic    = 0xfd2fb528
	maxBlockSize = 128 << 10
	singleFCS4   = 0xa0 // frame header: single segment, content size in 4 bytes, no checksum
)

// appendFrame appends a zstd frame of body whose first raw bytes are stored
// and whose rest is compressed. The compressed blocks are those of a frame of
// their own: what they refer to, earlier bytes and tables and offsets, is in
// that rest alone, and raw blocks change none of it.
func (c *codec) appendFrame(dst, body []byte, raw int) []byte {
	dst = binary.LittleEndian.AppendUint32(dst, zstdMagic)
	dst = append(dst, singleFCS4)
	dst = binary.LittleEndian.AppendUint32(dst, uint32(len(body)))
	for from := 0; from < raw; from += maxBlockSize {
		block := body[from:min(from+maxBlockSize, raw)]
		h := uint32(len(block)) << 3 // type 0, raw; not the last
		dst = append(dst, byte(h), byte(h>>8), byte(h>>16))
		dst = append(dst, block...)
	}
	c.packed = c.zstd.EncodeAll(body[raw:], c.packed[:0])
	return append(dst, c.packed[frameHeaderSize(c.packed):]...)
}

// frameHeaderSize returns the length of a frame's magic and header.
func frameHeaderSize(frame []byte) int {
	descriptor := frame[4]
	single := int(descriptor >> 5 & 1)
	n := 5 + 1 - single // a window descriptor, unless it is a single segment
	n += [4]int{0, 1, 2, 4}[descriptor&3]
	switch descriptor >> 6 {
	case 0:
		return n + single
	case 1:
		return n + 2
	case 2:
		return n + 4
	}
	return n + 8
}
