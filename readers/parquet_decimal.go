package readers

import (
	"math"
	"math/big"
	"strconv"
)

// maxDecimal is the longest decimal that is read, in bytes: twice what any
// writer is known to make.
const maxDecimal = 64

// The powers of ten that float64 holds exactly.
var exactTens = [...]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11,
	1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22}

// smallDecimal returns the float64 nearest to v / 10^scale: the one that the
// decimal's text would be read as. Where both numbers are exact in float64,
// one division rounds once.
func smallDecimal(v int64, scale int) float64 {
	const exact = 1 << 53
	if v <= exact && v >= -exact && scale >= 0 && scale < len(exactTens) {
		return float64(v) / exactTens[scale]
	}
	return parseDecimal(strconv.FormatInt(v, 10), scale)
}

// bigDecimal is smallDecimal for a two's complement number of any length, the
// most significant byte first. One that is empty or too long is infinite, so that
// it counts as malformed.
func bigDecimal(b []byte, scale int) float64 {
	if len(b) == 0 || len(b) > maxDecimal {
		return math.Inf(1)
	}
	if len(b) <= 8 {
		v := int64(int8(b[0]))
		for _, x := range b[1:] {
			v = v<<8 | int64(x)
		}
		return smallDecimal(v, scale)
	}
	var v big.Int
	v.SetBytes(b)
	if b[0] >= 0x80 {
		v.Sub(&v, new(big.Int).Lsh(big.NewInt(1), uint(8*len(b))))
	}
	if v.IsInt64() {
		return smallDecimal(v.Int64(), scale)
	}
	return parseDecimal(v.String(), scale)
}

// parseDecimal reads digits times 10^-scale; a number that is too large comes
// out infinite.
func parseDecimal(digits string, scale int) float64 {
	v, _ := strconv.ParseFloat(digits+"e"+strconv.Itoa(-scale), 64)
	return v
}
