package delim

import (
	"math"
	"math/big"
	"math/bits"
)

// shortest returns the shortest decimal that reads back as the finite,
// positive float whose bits are given, and of those the one nearest to it:
// digits × 10^exponent. digits may end in zeros. The float has mantissaBits
// stored bits of mantissa and an exponent that is biased by bias.
//
// The method is that of Giulietti 2020, "The Schubfach way to render doubles",
// with the table of powers at 128 bits. Three products decide everything: the
// float and the two ends of its rounding interval, scaled by one power of ten.
func shortest(floatBits uint64, mantissaBits, bias int) (digits uint64, exponent int) {
	fraction := floatBits & (1<<mantissaBits - 1)
	biased := int(floatBits >> mantissaBits)

	c, q := fraction, 1-bias-mantissaBits // value = c × 2^q
	if biased > 0 {
		c, q = fraction|1<<mantissaBits, biased-bias-mantissaBits
	}
	// In quarters: the float, and the ends of the interval that rounds to it.
	// Below a power of two the neighbour is half as far.
	mid, low, high := 4*c, 4*c-2, 4*c+2
	var k int // 10^k is at most the length of the interval
	if fraction == 0 && biased > 1 {
		low++
		k = floorLog10ThreeQuartersPow2(q)
	} else {
		k = floorLog10Pow2(q)
	}

	g := &powers[-k-minPower]
	h := uint(q + floorLog2Pow10(-k) + 1)
	mid, low, high = g.scale(mid<<h), g.scale(low<<h), g.scale(high<<h)
	odd := c & 1 // then the ends round to the neighbours
	low += odd
	high -= odd

	// Without branches, since which case it is is as good as random. First, s or
	// s+1: the only one that reads back, or the nearer one, ties to even.
	s := mid / 4
	below, above := bit(low <= 4*s), bit(4*s+4 <= high)
	half := 4*s + 2
	nearer := bit(mid > half) | bit(mid == half)&s
	up := above
	if below == above {
		up = nearer
	}
	digits = s + up

	// One digit less, if exactly one of the two around reads back.
	if s >= 10 {
		t := s / 10 * 10
		below, above = bit(low <= 4*t), bit(4*t+40 <= high)
		t += 10 * above
		if below != above {
			digits = t
		}
	}
	return digits, k
}

// bit is 1 for true.
func bit(b bool) (n uint64) {
	if b {
		n = 1
	}
	return n
}

// Integer forms of the logarithms that choose a power, right for every
// exponent of a float64 (TestLogarithms).

func floorLog10Pow2(e int) int              { return (e * 1262611) >> 22 }
func floorLog10ThreeQuartersPow2(e int) int { return (e*1262611 - 524031) >> 22 }
func floorLog2Pow10(e int) int              { return (e * 1741647) >> 19 }

// A power is 10^k scaled to 128 bits, the highest of them set, rounded up.
type power struct{ hi, lo uint64 }

// scale returns the product with x, divided by 2^128, rounded to odd: the last
// bit also says that something was cut off.
func (g *power) scale(x uint64) uint64 {
	carry, _ := bits.Mul64(g.lo, x)
	hi, lo := bits.Mul64(g.hi, x)
	lo, over := bits.Add64(lo, carry, 0)
	hi += over
	if lo > 1 {
		hi |= 1
	}
	return hi
}

// The powers that a float64, and so a float32, can ask for.
const (
	minPower = -292
	maxPower = 324
)

var powers = makePowers()

func makePowers() (table [maxPower - minPower + 1]power) {
	ten, value := big.NewInt(10), big.NewInt(1)
	for k := 0; k <= maxPower; k++ {
		table[k-minPower] = roundUp128(value)
		value.Mul(value, ten)
	}
	value.SetInt64(1)
	one := new(big.Int)
	for k := -1; k >= minPower; k-- {
		value.Mul(value, ten)
		// 2^n/10^-k has at least 128 bits more than are kept.
		n := uint(value.BitLen() + 256)
		one.Lsh(big.NewInt(1), n)
		one.Div(one, value)
		table[k-minPower] = roundUp128(one.Add(one, big.NewInt(1)))
	}
	return table
}

// roundUp128 returns the leading 128 bits of v, rounded up.
func roundUp128(v *big.Int) power {
	top := new(big.Int)
	if shift := v.BitLen() - 128; shift <= 0 {
		top.Lsh(v, uint(-shift))
	} else {
		top.Rsh(v, uint(shift))
		if v.TrailingZeroBits() < uint(shift) {
			top.Add(top, big.NewInt(1))
		}
	}
	lo := new(big.Int).And(top, new(big.Int).SetUint64(math.MaxUint64))
	return power{top.Rsh(top, 64).Uint64(), lo.Uint64()}
}
