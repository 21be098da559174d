package writers

import (
	"bytes"
	"encoding/binary"
	"hash/crc32"
	"sync"

	"github.com/klauspost/compress/flate"

	"catenrich/internal/table"
)

// A gzipMember writes one gzip member (RFC 1952) from pieces that many
// goroutines compress. The text compressor's way, a member for each piece,
// will not do: the library that most FITS readers are built on (CFITSIO 4.2)
// takes the first member for the whole file.
//
// A piece ends on a byte and refers to nothing before it, so that pieces can
// be put one behind the other. What is kept stands in stored blocks (RFC 1951,
// section 3.2.4) and can be patched; the CRC of the member is put together at
// the end from those of its parts.
type gzipMember struct {
	out    table.Output
	flates sync.Pool // of *flate.Writer
	serial []byte    // written and not yet compressed

	before checked // up to what is kept
	kept   []byte
	keptAt int64 // where its first block begins in the output
	after  checked
}

// A checked is the CRC of a run of bytes.
type checked struct {
	crc  uint32
	size int64
}

// A packedPiece is a compressed piece and the CRC of what it holds.
type packedPiece struct {
	bytes []byte
	checked
}

const (
	serialSize = 1 << 20   // what is written serially is compressed in such pieces
	storedSize = 20 * 2880 // of a stored block: whole records, and less than 64 KiB
	storedHead = 5
)

func newGzipMember(out table.Output, level int) (*gzipMember, error) {
	m := &gzipMember{out: out}
	m.flates.New = func() any {
		z, _ := flate.NewWriter(nil, level) // the level was checked
		return z
	}
	// Deflate, no name, no time, no word on the system.
	_, err := out.Write([]byte{0x1f, 0x8b, 8, 0, 0, 0, 0, 0, 0, 255})
	return m, err
}

// pack compresses a piece. Any goroutine may call it.
func (m *gzipMember) pack(dst, p []byte) packedPiece {
	z := m.flates.Get().(*flate.Writer)
	defer m.flates.Put(z)
	buffer := bytes.NewBuffer(dst)
	z.Reset(buffer)
	// A bytes.Buffer does not fail.
	z.Write(p)
	z.Flush()
	return packedPiece{buffer.Bytes(), checked{crc32.ChecksumIEEE(p), int64(len(p))}}
}

// append writes a piece behind what was written before it.
func (m *gzipMember) append(p packedPiece) error {
	if err := m.flush(); err != nil {
		return err
	}
	m.after = m.after.join(p.checked)
	_, err := m.out.Write(p.bytes)
	return err
}

// Write collects pieces of serialSize, whatever the size of the writes.
func (m *gzipMember) Write(p []byte) (int, error) {
	written := 0
	for len(p) > 0 {
		n := min(len(p), serialSize-len(m.serial))
		m.serial = append(m.serial, p[:n]...)
		p, written = p[n:], written+n
		if len(m.serial) == serialSize {
			if err := m.flush(); err != nil {
				return written, err
			}
		}
	}
	return written, nil
}

func (m *gzipMember) flush() error {
	if len(m.serial) == 0 {
		return nil
	}
	piece := m.pack(nil, m.serial)
	m.serial = m.serial[:0]
	return m.append(piece)
}

// keep writes p in stored blocks. It is called once.
func (m *gzipMember) keep(p []byte) error {
	if err := m.flush(); err != nil {
		return err
	}
	m.before, m.after = m.after, checked{}
	m.kept, m.keptAt = bytes.Clone(p), m.out.Offset()
	for len(p) > 0 {
		n := min(len(p), storedSize)
		head := binary.LittleEndian.AppendUint16([]byte{0}, uint16(n))
		head = binary.LittleEndian.AppendUint16(head, ^uint16(n))
		if _, err := m.out.Write(append(head, p[:n]...)); err != nil {
			return err
		}
		p = p[n:]
	}
	return nil
}

// patch overwrites a record of what was kept.
func (m *gzipMember) patch(off int64, p []byte) error {
	copy(m.kept[off:], p)
	return m.out.Patch(m.keptAt+off+storedHead*(off/storedSize+1), p)
}

// finish closes the last block and the member.
func (m *gzipMember) finish() error {
	if err := m.flush(); err != nil {
		return err
	}
	all := m.before.join(checked{crc32.ChecksumIEEE(m.kept), int64(len(m.kept))}).join(m.after)
	tail := []byte{1, 0, 0, 0xff, 0xff} // an empty stored block, the last
	tail = binary.LittleEndian.AppendUint32(tail, all.crc)
	tail = binary.LittleEndian.AppendUint32(tail, uint32(all.size))
	_, err := m.out.Write(tail)
	return err
}

// join returns the CRC of the bytes of a followed by those of b. With
// polynomials over two elements, whose bits the CRC has in reverse order,
// appending n bytes multiplies by x^(8n); the ones that the CRC adds to its
// first and last 32 bits cancel.
func (a checked) join(b checked) checked {
	return checked{multiply(a.crc, power(b.size)) ^ b.crc, a.size + b.size}
}

// multiply returns a·b modulo the CRC's polynomial. The highest bit of a word
// is the coefficient of 1.
func multiply(a, b uint32) (product uint32) {
	for bit := uint32(1 << 31); bit != 0; bit >>= 1 {
		if a&bit != 0 {
			product ^= b
		}
		if carry := b & 1; carry != 0 {
			b = b>>1 ^ crc32.IEEE
		} else {
			b >>= 1
		}
	}
	return product
}

// power returns x^(8n) modulo the CRC's polynomial.
func power(n int64) uint32 {
	result, square := uint32(1<<31), uint32(1<<23) // 1 and x^8
	for ; n > 0; n >>= 1 {
		if n&1 != 0 {
			result = multiply(result, square)
		}
		square = multiply(square, square)
	}
	return result
}
