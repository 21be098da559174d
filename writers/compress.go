package writers

import (
	"bytes"
	"sync"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"

	"catenrich/internal/fault"
)

// The default levels. The digits of computed numbers are as good as random:
// higher levels cost two to ten times as much and save nothing.
const (
	defaultGzip = 1
	defaultZstd = 1 // of klauspost/compress
)

// A packer compresses one text after another, each on its own: a gzip member
// without name or time, or a zstd frame with its checksum. The same text gives
// the same bytes, whichever goroutine asks.
type packer struct {
	gzips *sync.Pool // of *gzip.Writer, or nil
	zstds *sync.Pool // of *zstd.Encoder, or nil
}

// newPacker returns a packer, or nil for plain text. Level 0 is the default;
// gzip has 1 to 9, zstd 1 to 4.
func newPacker(codec string, level int) (*packer, error) {
	switch codec {
	case "":
		return nil, nil
	case "gzip":
		if level == 0 {
			level = defaultGzip
		}
		if level < 1 || level > 9 {
			return nil, fault.Config.Errorf("output.level is %d, want 1 to 9 for gzip", level)
		}
		return &packer{gzips: &sync.Pool{New: func() any {
			z, _ := gzip.NewWriterLevel(nil, level) // the level was checked
			return z
		}}}, nil
	case "zst":
		if level == 0 {
			level = defaultZstd
		}
		if level < 1 || level > 4 {
			return nil, fault.Config.Errorf("output.level is %d, want 1 to 4 for zstd", level)
		}
		return &packer{zstds: &sync.Pool{New: func() any {
			z, _ := zstd.NewWriter(nil, zstd.WithEncoderLevel(zstd.EncoderLevel(level)), // the level was checked
				zstd.WithEncoderConcurrency(1), zstd.WithLowerEncoderMem(true))
			return z
		}}}, nil
	}
	return nil, fault.Config.Errorf("output.codec is %q, want gzip or zst for text", codec)
}

// append appends one member or frame that holds text.
func (p *packer) append(dst, text []byte) []byte {
	if p.zstds != nil {
		z := p.zstds.Get().(*zstd.Encoder)
		defer p.zstds.Put(z)
		return z.EncodeAll(text, dst)
	}
	z := p.gzips.Get().(*gzip.Writer)
	defer p.gzips.Put(z)
	buffer := bytes.NewBuffer(dst)
	z.Reset(buffer)
	// A bytes.Buffer does not fail.
	z.Write(text)
	z.Close()
	return buffer.Bytes()
}
