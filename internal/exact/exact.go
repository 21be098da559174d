// Package exact has the elementary functions with the same bits on every
// machine. Those of package math are not: on amd64 some choose fused
// multiply-add at run time, on arm64 some are assembly, and a compiler for
// GOAMD64=v3 or arm64 fuses x*y + z where it finds one. Here every product
// that feeds a sum is written float64(x*y), which forbids fusing, and nothing
// of package math is used but square roots and bit patterns, which IEEE 754
// fixes.
//
// Each function says how close it comes to the exact value, in units in the
// last place (ulp) of the result; the tests measure it against math/big.
// Special values follow package math.
package exact

import "math"

// twoSum returns a+b rounded and the rounding error, exactly.
// Source: Knuth, The Art of Computer Programming 2, section 4.2.2.
func twoSum(a, b float64) (sum, err float64) {
	sum = a + b
	bb := sum - a
	return sum, (a - (sum - bb)) + (b - bb)
}

// fastTwoSum is twoSum for |a| >= |b| or a = 0 (Dekker 1971).
func fastTwoSum(a, b float64) (sum, err float64) {
	sum = a + b
	return sum, (a - sum) + b
}

// split cuts a into a high part of 26 significant bits and the rest, exactly.
// The product of two high parts is exact.
func split(a float64) (high, low float64) {
	high = math.Float64frombits(math.Float64bits(a) &^ (1<<27 - 1))
	return high, a - high
}

// twoProduct returns a*b rounded and the rounding error: exact while neither
// overflows nor underflows (Dekker 1971, with split's truncated halves, whose
// low parts have 27 bits: the error is then right to 2^-105 of the product).
func twoProduct(a, b float64) (product, err float64) {
	product = float64(a * b)
	ah, al := split(a)
	bh, bl := split(b)
	err = float64(ah*bh) - product
	err += float64(ah * bl)
	err += float64(al * bh)
	return product, err + float64(al*bl)
}

// scale returns x * 2^k for the exponents that exp and pow need.
func scale(x float64, k int) float64 {
	switch {
	case k > 1023:
		return x * 0x1p1023 * pow2(k-1023)
	case k < -1022:
		// One rounding: x is normal before the last product.
		return x * pow2(k+1000) * 0x1p-1000
	}
	return x * pow2(k)
}

// pow2 returns 2^k for -1022 <= k <= 1023.
func pow2(k int) float64 { return math.Float64frombits(uint64(k+1023) << 52) }
