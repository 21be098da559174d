package writers

import (
	"github.com/golang/snappy"
	"github.com/klauspost/compress/zstd"

	"catenrich/internal/fault"
)

// Codecs of parquet.thrift.
const (
	codecNone   = 0
	codecSnappy = 1
	codecZstd   = 6
)

// A codec compresses the bodies of pages, the same bytes to the same bytes on
// every machine. LZ4_RAW is not among them: two of the readers that outputs
// are tested with fail on its pages with nulls.
type codec struct {
	id      int32
	fastest bool
	zstd    *zstd.Encoder // of one goroutine at a time
	packed  []byte
}

// codecID translates the job's name of a codec.
func codecID(name string, level int) (int32, error) {
	switch name {
	case "", "zstd":
		if level < 0 || level > 22 {
			return 0, fault.Config.Errorf("output.level is %d, want 0 (fastest) to 22 for zstd", level)
		}
		return codecZstd, nil
	case "snappy", "none":
		if level != 0 {
			return 0, fault.Config.Errorf("output.level is %d, and the codec %q has no levels", level, name)
		}
		if name == "snappy" {
			return codecSnappy, nil
		}
		return codecNone, nil
	}
	return 0, fault.Config.Errorf("output.codec is %q, want zstd, snappy or none", name)
}

// newCodec returns a codec for one pageEncoder. golang/snappy is used rather
// than the faster encoder in klauspost/compress, whose assembly and Go code
// give different bytes.
func newCodec(id int32, level int) codec {
	c := codec{id: id, fastest: level == 0}
	if id == codecZstd {
		speed := zstd.SpeedFastest
		if level > 0 {
			speed = zstd.EncoderLevelFromZstd(level)
		}
		var err error
		c.zstd, err = zstd.NewWriter(nil, zstd.WithEncoderLevel(speed), zstd.WithEncoderConcurrency(1),
			zstd.WithEncoderCRC(false), zstd.WithZeroFrames(true))
		if err != nil {
			panic("writers: " + err.Error()) // the options are constants
		}
	}
	return c
}

// append appends the compressed form of body to dst.
func (c *codec) append(dst, body []byte, p planes) []byte {
	switch c.id {
	case codecZstd:
		if c.fastest {
			if raw := p.incompressible(body); raw > 0 {
				return c.appendFrame(dst, body, raw)
			}
		}
		return c.zstd.EncodeAll(body, dst)
	case codecSnappy:
		at := len(dst)
		dst = grow(dst, snappy.MaxEncodedLen(len(body)))
		return dst[:at+len(snappy.Encode(dst[at:], body))]
	}
	return append(dst, body...)
}
