package ledger

import (
	"encoding/json"
	"fmt"
	"math"
	"math/big"
	"strconv"
	"strings"
)

// A Sum adds float64s exactly, so that their order does not matter: any split
// of the same numbers among any number of Sums, merged in any order, gives the
// same value and the same JSON. Its zero value is an empty sum. NaN and the
// infinities are not numbers of a catalogue; they are passed over and not
// counted.
//
// The method is a superaccumulator: a fixed-point number wide enough for every
// float64, in units of 2^-1074. Mantissas are first added up in one int64 for
// each exponent, which is what makes it fast; after 1024 additions, before any
// can overflow, these are carried into the wide number (Neal 2015,
// arXiv:1505.05571, sections 2 and 3, from memory for the section numbers).
//
// In JSON a Sum is {"count": how many, "exact": the sum, "value": the float64
// nearest to it}. The exact sum is written ±0xMp±E and means M 2^E, with M an
// odd hexadecimal integer of as many digits as it takes, E a decimal integer;
// zero is 0x0p+0. The value is missing where it overflows a float64.
type Sum struct {
	// By the exponent field of the float64. There are two, for numbers at even
	// and odd places: neighbours in a catalogue often share their exponent,
	// and an addition need not wait for the store of the one before.
	even, odd [exponents]int64
	low, high uint64 // range of exponent fields in use; valid while pending > 0
	pending   int    // additions since the last flush

	wide   [limbs]int64 // limb i counts 2^(32 i - 1074)
	spills int          // additions to limbs since carries were last resolved
	count  int64
}

const (
	exponents  = 2047    // 1 to 2046 are used: field 0 is denormals, which weigh as 1; 2047 is no number
	maxPending = 1 << 10 // 2^53 times this fits an int64
	limbs      = 70      // 2^1024 / 2^-1074 takes 66, and 2^63 such numbers two more
	maxSpills  = 1 << 29 // 2^32 times this, with room, fits an int64

	fractionBits = 52
	fractionMask = 1<<fractionBits - 1
	fieldMask    = 1<<11 - 1
)

// Count returns how many numbers were added.
func (s *Sum) Count() int64 { return s.count }

// Add adds every number of v.
func (s *Sum) Add(v []float64) {
	for len(v) > 0 {
		n := min(len(v), maxPending-s.pending)
		s.add(v[:n])
		if v = v[n:]; s.pending >= maxPending {
			s.flush()
		}
	}
}

// add adds v, which fits before the next flush.
func (s *Sum) add(v []float64) {
	low, high := s.low, s.high
	if s.pending == 0 {
		low, high = exponents, 0
	}
	skipped := 0
	i := 0
	for ; i+2 <= len(v); i += 2 {
		a, b := math.Float64bits(v[i]), math.Float64bits(v[i+1])
		ea, eb := a>>fractionBits&fieldMask, b>>fractionBits&fieldMask
		if ea-1 < exponents-1 && eb-1 < exponents-1 {
			signA, signB := int64(a)>>63, int64(b)>>63
			ma := int64(a&fractionMask|1<<fractionBits) ^ signA
			mb := int64(b&fractionMask|1<<fractionBits) ^ signB
			s.even[ea] += ma - signA
			s.odd[eb] += mb - signB
			low, high = min(low, ea, eb), max(high, ea, eb)
			continue
		}
		low, high = s.addOdd(a, low, high, &skipped)
		low, high = s.addOdd(b, low, high, &skipped)
	}
	for ; i < len(v); i++ {
		low, high = s.addOdd(math.Float64bits(v[i]), low, high, &skipped)
	}
	s.low, s.high = low, high
	s.pending += len(v)
	s.count += int64(len(v) - skipped)
}

// addOdd adds one number of any kind.
func (s *Sum) addOdd(x, low, high uint64, skipped *int) (uint64, uint64) {
	e, m := x>>fractionBits&fieldMask, int64(x&fractionMask)
	switch {
	case e == fieldMask:
		*skipped++
		return low, high
	case e > 0:
		m |= 1 << fractionBits
	case m == 0:
		return low, high
	default:
		e = 1
	}
	if int64(x) < 0 {
		m = -m
	}
	s.even[e] += m
	return min(low, e), max(high, e)
}

// flush carries the mantissas into the wide number.
func (s *Sum) flush() {
	if s.pending == 0 {
		return
	}
	for e := s.low; e <= s.high && e < exponents; e++ {
		m := s.even[e] + s.odd[e]
		s.even[e], s.odd[e] = 0, 0
		if m != 0 {
			s.spill(m, uint(e-1))
		}
	}
	s.pending = 0
}

// spill adds m 2^shift, in units of 2^-1074.
func (s *Sum) spill(m int64, shift uint) {
	limb, off := shift/32, shift%32
	s.wide[limb] += int64(uint32(m << off))
	s.wide[limb+1] += int64(uint32(m >> (32 - off)))
	s.wide[limb+2] += m >> (64 - off)
	if s.spills++; s.spills >= maxSpills {
		s.carry()
	}
}

// carry leaves every limb but the last, which has the sign, from 0 to 2^32-1.
func (s *Sum) carry() {
	var c int64
	for i := range s.wide[:limbs-1] {
		s.wide[i] += c
		c = s.wide[i] >> 32
		s.wide[i] &= 1<<32 - 1
	}
	s.wide[limbs-1] += c
	s.spills = 0
}

// Merge adds what o holds; o keeps it.
func (s *Sum) Merge(o *Sum) {
	o.flush()
	o.carry()
	s.flush()
	s.carry()
	for i := range s.wide {
		s.wide[i] += o.wide[i]
	}
	s.carry()
	s.count += o.count
}

// integer returns the sum in units of 2^-1074.
func (s *Sum) integer() *big.Int {
	s.flush()
	s.carry()
	x, limb := new(big.Int), new(big.Int)
	for i := limbs - 1; i >= 0; i-- {
		x.Add(x.Lsh(x, 32), limb.SetInt64(s.wide[i]))
	}
	return x
}

// Float64 returns the float64 nearest to the sum, the even one of two; an
// infinity where it overflows.
func (s *Sum) Float64() float64 {
	x := s.integer()
	if x.Sign() == 0 {
		return 0
	}
	f := new(big.Float).SetPrec(uint(x.BitLen())).SetInt(x)
	value, _ := f.SetMantExp(f, unitExponent).Float64()
	return value
}

// unitExponent: the wide number counts units of 2 to this power.
const unitExponent = -1074

// Exact returns the sum in the notation that the type's comment describes.
func (s *Sum) Exact() string {
	x := s.integer()
	if x.Sign() == 0 {
		return "0x0p+0"
	}
	zeros := x.TrailingZeroBits()
	sign := ""
	if x.Sign() < 0 {
		sign = "-"
		x.Neg(x)
	}
	return fmt.Sprintf("%s0x%xp%+d", sign, x.Rsh(x, zeros), int(zeros)+unitExponent)
}

// setExact is the inverse of Exact. Another spelling of a number is an error.
func (s *Sum) setExact(text string) error {
	*s = Sum{count: s.count}
	mantissa, exponent, ok := strings.Cut(text, "p")
	mantissa, isHex := strings.CutPrefix(strings.TrimPrefix(mantissa, "-"), "0x")
	e, err := strconv.Atoi(exponent)
	x, isNumber := new(big.Int), false
	if len(mantissa) <= 8*limbs {
		x, isNumber = x.SetString(mantissa, 16)
	}
	if !ok || !isHex || !isNumber || err != nil || e > 1024+64 || e < unitExponent {
		return fmt.Errorf("an exact sum is %.40q, want ±0xMp±E", text)
	}
	x.Lsh(x, uint(e-unitExponent))
	if x.BitLen() > 32*limbs-2 {
		return fmt.Errorf("an exact sum of 2^%d and more", 32*limbs-2+unitExponent)
	}
	if strings.HasPrefix(text, "-") {
		x.Neg(x)
	}
	low := big.NewInt(1<<32 - 1)
	for i := range limbs - 1 {
		s.wide[i] = new(big.Int).And(x, low).Int64() // of two's complement
		x.Rsh(x, 32)                                 // rounds down
	}
	s.wide[limbs-1] = x.Int64()
	if again := s.Exact(); again != text {
		return fmt.Errorf("an exact sum is %.40q, want it spelled %.40q", text, again)
	}
	return nil
}

// sumJSON is a Sum in a manifest.
type sumJSON struct {
	Count int64    `json:"count"`
	Exact string   `json:"exact"`
	Value *float64 `json:"value,omitempty"`
}

// MarshalJSON implements [json.Marshaler].
func (s *Sum) MarshalJSON() ([]byte, error) {
	j := sumJSON{Count: s.count, Exact: s.Exact()}
	if v := s.Float64(); !math.IsInf(v, 0) {
		j.Value = &v
	}
	return json.Marshal(j)
}

// UnmarshalJSON implements [json.Unmarshaler].
func (s *Sum) UnmarshalJSON(text []byte) error {
	var j sumJSON
	if err := json.Unmarshal(text, &j); err != nil {
		return err
	}
	if j.Count < 0 {
		return fmt.Errorf("a sum of %d numbers", j.Count)
	}
	if err := s.setExact(j.Exact); err != nil {
		return err
	}
	s.count = j.Count
	return nil
}
