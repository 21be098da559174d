package writers

import (
	"bytes"
	"encoding/binary"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/klauspost/compress/zstd"
)

func TestSplitAgainstDefinition(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	for _, n := range []int{0, 1, 7, 8, 9, 64, 1001} {
		wide, narrow := make([]float64, n), make([]uint32, n)
		for i := range n {
			wide[i], narrow[i] = math.Float64frombits(r.Uint64()), r.Uint32()
		}
		a, b := make([]byte, 8*n), make([]byte, 4*n)
		split8(a, wide)
		split4(b, narrow)
		// Source: apache/parquet-format, Encodings.md, BYTE_STREAM_SPLIT: byte k
		// of value i stands at k n + i.
		for i := range n {
			for k := range 8 {
				if a[k*n+i] != byte(math.Float64bits(wide[i])>>(8*k)) {
					t.Fatalf("n %d, value %d, byte %d", n, i, k)
				}
			}
			for k := range 4 {
				if b[k*n+i] != byte(narrow[i]>>(8*k)) {
					t.Fatalf("n %d, narrow value %d, byte %d", n, i, k)
				}
			}
		}
	}
}

// decodeLevels reads the RLE hybrid of parquet-format's Encodings.md at bit
// width 1, value by value.
func decodeLevels(t *testing.T, b []byte, rows int) []byte {
	t.Helper()
	if n := binary.LittleEndian.Uint32(b); int(n) != len(b)-4 {
		t.Fatalf("the length says %d of %d bytes", n, len(b)-4)
	}
	var all []byte
	for b = b[4:]; len(b) > 0; {
		h, n := binary.Uvarint(b)
		b = b[n:]
		if h&1 == 0 {
			for range h >> 1 {
				all = append(all, b[0])
			}
			b = b[1:]
			continue
		}
		for range h >> 1 {
			for bit := range 8 {
				all = append(all, b[0]>>bit&1)
			}
			b = b[1:]
		}
	}
	if len(all) < rows || len(all) >= rows+8 {
		t.Fatalf("%d levels for %d rows", len(all), rows)
	}
	return all[:rows]
}

func TestLevels(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	for _, rows := range []int{1, 7, 8, 9, 31, 32, 33, 100, 1000, 65535, 65536} {
		for _, rarity := range []int{1, 2, 10, 100, 5000, 1 << 30} {
			null := make([]bool, rows)
			nulls := 0
			for i := 0; i < rows; i++ {
				if r.IntN(rarity) == 0 {
					for k := i; k < min(rows, i+1+r.IntN(rarity)); k++ {
						null[k] = true
					}
				}
			}
			for _, is := range null {
				if is {
					nulls++
				}
			}
			var e pageEncoder
			e.levels(rows, nulls, func(row int) bool { return null[row] })
			for i, level := range decodeLevels(t, e.body, rows) {
				if null[i] != (level == 0) {
					t.Fatalf("%d rows, row %d: level %d, null %v", rows, i, level, null[i])
				}
			}
		}
	}
}

// TestFrameWithRawPlanes: what is put together from raw and compressed blocks
// decodes to the body, whatever the planes hold.
func TestFrameWithRawPlanes(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	d, err := zstd.NewReader(nil)
	if err != nil {
		t.Fatal(err)
	}
	defer d.Close()
	c := newCodec(codecZstd, 0)
	for _, size := range []int{minPlane, 20000, 65535, 65536} {
		for random := range 9 {
			body := make([]byte, 7+8*size)
			for k := range 8 {
				plane := body[7+k*size : 7+(k+1)*size]
				for i := range plane {
					if plane[i] = byte(i / 1000); k < random {
						plane[i] = byte(r.Uint32())
					}
				}
			}
			p := planes{7, size}
			raw := p.incompressible(body)
			want := 0
			if random > 0 {
				want = 7 + min(random, 7)*size
			}
			if raw != want {
				t.Errorf("size %d, %d random planes: %d bytes raw, want %d", size, random, raw, want)
			}
			packed := c.append([]byte("before"), body, p)
			got, err := d.DecodeAll(packed[6:], nil)
			if err != nil || !bytes.Equal(got, body) || string(packed[:6]) != "before" {
				t.Fatalf("size %d, %d random planes: %v", size, random, err)
			}
			if whole := len(c.zstd.EncodeAll(body, nil)); len(packed)-6 > whole+whole/50 {
				t.Errorf("size %d, %d random planes: %d bytes, in one piece %d", size, random, len(packed)-6, whole)
			}
		}
	}
}

// TestCompressible: repetition counts as well as frequency.
func TestCompressible(t *testing.T) {
	plane := make([]byte, 65536)
	for i := range plane {
		plane[i] = byte(i)
	}
	if !compressible(plane) {
		t.Error("bytes that count up pass for incompressible")
	}
	r := rand.New(rand.NewPCG(7, 8))
	for i := range plane {
		plane[i] = byte(r.Uint32())
	}
	if compressible(plane) {
		t.Error("random bytes pass for compressible")
	}
	for i := range plane {
		plane[i] &= 0x7f
	}
	if !compressible(plane) {
		t.Error("seven bits of eight pass for incompressible")
	}
}

func TestBounds(t *testing.T) {
	negative := math.Copysign(0, -1)
	for _, c := range []struct {
		v     float64
		upper bool
		want  uint64
	}{{0, false, 1 << 63}, {negative, false, 1 << 63}, {0, true, 0}, {negative, true, 0}, {1, true, math.Float64bits(1)}} {
		// Source: parquet.thrift, ColumnOrder: -0 as min and +0 as max of a zero.
		if got := binary.LittleEndian.Uint64(encodeBound(5, c.v, c.upper)); got != c.want {
			t.Errorf("bound of %v, upper %v: %x, want %x", c.v, c.upper, got, c.want)
		}
	}
}
