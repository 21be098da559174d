package exact

import "math"

// A logCell describes one of the 129 points F near which logarithms are
// expanded: F = 0.75, 0.75 + 2^-8, ... 1, 1 + 2^-7, ... 1.5.
// The high parts are multiples of 2^-42, as those of k ln 2 are, so that their
// sum is exact.
type logCell struct {
	inv          float64 // 1/F
	ln, lnLo     float64
	log10, l10Lo float64
}

// reduce writes a positive, finite x as 2^k F (1 + rh + rl), where rh has 26
// bits, rl is below 2^-26 rh and |rh| <= 2^-8. No digit is lost near x = 1:
// there k = 0 and F = 1.
func reduce(x float64) (k float64, c *logCell, rh, rl float64) {
	b := math.Float64bits(x)
	if b < 1<<52 { // subnormal
		b = math.Float64bits(x*0x1p54) - 54<<52
	}
	off := b - 0x3fe8000000000000 // 0.75
	m := b - off&(0xfff<<52)
	i := (off&(1<<52-1) + 1<<44) >> 45
	f := (m + 1<<44) &^ (1<<45 - 1)
	c = &logTable[i]
	F := math.Float64frombits(f)
	d := math.Float64frombits(m) - F // exact
	rh = math.Float64frombits(math.Float64bits(d*c.inv) &^ (1<<27 - 1))
	rl = float64((d - float64(rh*F)) * c.inv) // rh*F is exact
	return float64(int64(off) >> 52), c, rh, rl
}

// logParts returns ln x in two parts, for positive, finite x; the relative
// error is below 2^-62.
func logParts(x float64) (hi, lo float64) {
	k, c, rh, rl := reduce(x)
	r := rh + rl
	p := float64(r*(1.0/9)) - 1.0/8
	p = float64(r*p) + 1.0/7
	p = float64(r*p) - 1.0/6
	p = float64(r*p) + 1.0/5
	p = float64(r*p) - 1.0/4
	p = float64(r*p) + 1.0/3
	p = float64(float64(float64(r*r)*r) * p)
	base := float64(k*ln2Hi) + c.ln
	s, e := fastTwoSum(base, rh)
	half := float64(float64(-0.5*rh) * rh) // exact
	s, e2 := fastTwoSum(s, half)
	p -= float64(float64(rh+float64(0.5*rl)) * rl)
	lo = (e + e2) + (rl + (p + (float64(k*ln2Lo) + c.lnLo)))
	return fastTwoSum(s, lo)
}

// Log returns the natural logarithm of x to within 0.51 ulp.
func Log(x float64) float64 {
	if !(x > 0 && x <= math.MaxFloat64) {
		return logSpecial(x)
	}
	hi, lo := logParts(x)
	return hi + lo
}

// logSpecial is any logarithm of a number that has none, or an infinite one.
func logSpecial(x float64) float64 {
	switch {
	case x == 0:
		return math.Inf(-1)
	case x < 0:
		return math.NaN()
	}
	return x // +Inf, NaN
}

// Log1p returns ln(1+x) to within one ulp, near zero too.
func Log1p(x float64) float64 {
	switch {
	case !(x > -1 && x <= math.MaxFloat64):
		return logSpecial(1 + x)
	case math.Abs(x) < 0x1p-54:
		return x
	case math.Abs(x) < 0x1p-9:
		p := float64(x*(1.0/7)) - 1.0/6
		p = float64(x*p) + 1.0/5
		p = float64(x*p) - 1.0/4
		p = float64(x*p) + 1.0/3
		p = float64(x*p) - 0.5
		return x + float64(float64(x*x)*p)
	}
	u, e := twoSum(1, x)
	hi, lo := logParts(u)
	return hi + (lo + e/u)
}

// Log10 returns the decimal logarithm of x to within 0.52 ulp; powers of ten
// that a float64 holds exactly give whole numbers.
func Log10(x float64) float64 {
	if !(x > 0 && x <= math.MaxFloat64) {
		return logSpecial(x)
	}
	return log10(x)
}

// log10 is Log10 of a positive, finite x.
func log10(x float64) float64 {
	k, c, rh, rl := reduce(x)
	r := rh + rl
	p := float64(r*(invLn10/7)) - invLn10/6
	p = float64(r*p) + invLn10/5
	p = float64(r*p) - invLn10/4
	p = float64(r*p) + invLn10/3
	p = float64(r*p) - invLn10/2
	p = float64(float64(r*r) * p)
	base := float64(k*log2Hi) + c.log10
	s, e := fastTwoSum(base, float64(rh*invLn10Hi)) // the product is exact
	lo := float64(rl*invLn10) + float64(rh*invLn10Lo)
	return s + (e + (lo + (p + (float64(k*log2Lo) + c.l10Lo))))
}

// Log10Slice stores the decimal logarithm of each element of src in dst, which
// must not be shorter and may be src itself: the same bits as [Log10].
func Log10Slice(dst, src []float64) {
	dst = dst[:len(src)]
	for i, x := range src {
		b := math.Float64bits(x)
		if b-1<<52 >= 0x7fe<<52 { // subnormal, negative, infinite or NaN
			dst[i] = Log10(x)
			continue
		}
		// reduce and log10, written out because the compiler inlines neither
		off := b - 0x3fe8000000000000
		m := b - off&(0xfff<<52)
		c := &logTable[min((off&(1<<52-1)+1<<44)>>45, 128)]
		F := math.Float64frombits((m + 1<<44) &^ (1<<45 - 1))
		d := math.Float64frombits(m) - F
		rh := math.Float64frombits(math.Float64bits(d*c.inv) &^ (1<<27 - 1))
		rl := float64((d - float64(rh*F)) * c.inv)
		k := float64(int64(off) >> 52)
		r := rh + rl
		p := float64(r*(invLn10/7)) - invLn10/6
		p = float64(r*p) + invLn10/5
		p = float64(r*p) - invLn10/4
		p = float64(r*p) + invLn10/3
		p = float64(r*p) - invLn10/2
		p = float64(float64(r*r) * p)
		base := float64(k*log2Hi) + c.log10
		s, e := fastTwoSum(base, float64(rh*invLn10Hi))
		lo := float64(rl*invLn10) + float64(rh*invLn10Lo)
		dst[i] = s + (e + (lo + (p + (float64(k*log2Lo) + c.l10Lo))))
	}
}
