package exact

import "math"

// Limits of the result of exp: beyond overflowAt it is +Inf, below
// underflowAt zero.
const (
	overflowAt  = 709.782712893384
	underflowAt = -745.1332191019412
)

// expParts returns e^(x+xl) as (hi + lo) 2^k, where |xl| is below an ulp of x
// and |x| below 746. The relative error of hi + lo is below 2^-64.
//
// x is cut into n ln2/128 + r with |r| <= ln2/256; 2^(n/128) comes from a
// table in two parts, e^r - 1 from its series.
func expParts(x, xl float64) (hi, lo float64, k int) {
	n := float64(x*invLn2Over128) + shifter - shifter
	rh := x - float64(n*ln2Over128Hi) // exact: the constant ends in zeros
	rl := xl - float64(n*ln2Over128Lo)
	r, e := twoSum(rh, rl)
	i := int(n)
	t := &exp2Table[i&127]
	r2 := r * r
	// e^r - 1 - r, to r^6/720: the next term is below 2^-71
	p := float64(r*(1.0/720)) + 1.0/120
	p = float64(r*p) + 1.0/24
	p = float64(r*p) + 1.0/6
	p = float64(float64(r2*r)*p) + (float64(0.5*r2) + e)
	// (T + Tlo)(1 + r + p): the product T*r in two parts
	q, qe := twoProduct(t.hi, r)
	hi, lo = fastTwoSum(t.hi, q)
	lo += float64(t.hi*p) + (qe + t.lo)
	return hi, lo, i >> 7
}

// shifter rounds to an integer when added and subtracted: 1.5 * 2^52.
const shifter = 0x1.8p52

// Exp returns e**x to within 0.51 ulp (one ulp where the result is subnormal).
func Exp(x float64) float64 { return expSum(x, 0) }

// expSum returns e^(x+xl), with |xl| below an ulp of x.
func expSum(x, xl float64) float64 {
	switch {
	case x != x:
		return x
	case x > overflowAt+1:
		return math.Inf(1)
	case x < underflowAt-1:
		return 0
	}
	hi, lo, k := expParts(x, xl)
	return scale(hi+lo, k)
}

// Expm1 returns e**x - 1 to within one ulp, near zero too.
func Expm1(x float64) float64 {
	switch {
	case x != x || x == 0:
		return x
	case x > overflowAt+1:
		return math.Inf(1)
	case x < -40:
		return -1
	case math.Abs(x) < 0x1p-54:
		return x
	case math.Abs(x) < 0x1p-8:
		return expm1Small(x)
	}
	hi, lo, k := expParts(x, 0)
	if k > 64 {
		return scale(hi+lo, k)
	}
	s := pow2(k)
	sum, e := twoSum(float64(hi*s), -1)
	return sum + (e + float64(lo*s))
}

// expm1Small is the series of e^x - 1 for |x| < 2^-8.
func expm1Small(x float64) float64 {
	p := float64(x*(1.0/5040)) + 1.0/720
	p = float64(x*p) + 1.0/120
	p = float64(x*p) + 1.0/24
	p = float64(x*p) + 1.0/6
	p = float64(x*p) + 0.5
	return x + float64(float64(x*x)*p)
}

// Exp10 returns 10**x to within 0.52 ulp; for whole x up to 22 it is exact.
func Exp10(x float64) float64 {
	switch {
	case x != x:
		return x
	case x > 310:
		return math.Inf(1)
	case x < -325:
		return 0
	}
	p, e := twoProduct(x, ln10Hi)
	return expSum(p, e+float64(x*ln10Lo))
}

// Pow returns x**y to within one ulp for x >= 0. A negative x has a power only
// for whole y; special values are those of math.Pow.
func Pow(x, y float64) float64 {
	switch {
	case y == 0 || x == 1:
		return 1
	case x != x || y != y:
		return math.NaN()
	case x < 0 || (x == 0 && math.Signbit(x)):
		whole := y == math.Trunc(y)
		odd := whole && math.Abs(y) < 0x1p53 && int64(y)&1 == 1
		switch {
		case x == 0 || math.IsInf(x, -1) || math.IsInf(y, 0) || whole && !odd:
			v := powPositive(-x, y)
			if odd {
				return -v
			}
			return v
		case odd:
			return -powPositive(-x, y)
		}
		return math.NaN()
	}
	return powPositive(x, y)
}

// powPositive is Pow for x >= 0.
func powPositive(x, y float64) float64 {
	switch {
	case x == 1:
		return 1
	case x == 0 || math.IsInf(x, 1) || math.IsInf(y, 0):
		if (x > 1) == (y > 0) {
			return math.Inf(1)
		}
		return 0
	}
	lh, ll := logParts(x)
	if est := y * lh; est > 2000 || est < -2000 || math.Abs(est) < 0x1p-60 {
		// far out of range, or 1 + y ln x rounds to 1 (and a product could underflow)
		return expSum(est, 0)
	}
	p, e := twoProduct(y, lh)
	return expSum(p, e+float64(y*ll))
}
