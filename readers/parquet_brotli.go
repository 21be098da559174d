package readers

import (
	"bytes"
	"fmt"
	"io"

	"github.com/andybalholm/brotli"
	"github.com/apache/arrow-go/v18/parquet/compress"
)

// emptyBrotli decodes what arrow-go v18.8.0 refuses: a stream of no bytes,
// which is what the values of a page of nulls are compressed to. All else goes
// to the library's own codec.
type emptyBrotli struct {
	compress.Codec
}

func init() {
	codec, err := compress.GetCodec(compress.Codecs.Brotli)
	if err != nil {
		panic("readers: arrow-go has no brotli: " + err.Error())
	}
	compress.RegisterCodec(compress.Codecs.Brotli, emptyBrotli{codec})
}

// DecodeWithError implements compress.ErrorCodec.
func (c emptyBrotli) DecodeWithError(dst, src []byte) ([]byte, error) {
	if dst == nil || len(dst) > 0 {
		return compress.Decode(c.Codec, dst, src)
	}
	if n, err := io.ReadFull(brotli.NewReader(bytes.NewReader(src)), make([]byte, 1)); n != 0 || err != io.EOF {
		return nil, fmt.Errorf("a brotli stream that should be empty holds data (%v)", err)
	}
	return dst, nil
}
