package exact

import "math"

// maxAngle bounds the angles that Sin and Cos reduce: up to it the number of
// quarter turns has 21 bits and its products with the parts of pi/2 are exact.
const maxAngle = 0x1p20

// quarterTurns writes x as n pi/2 + r + rl with |r| <= pi/4; for |x| <= pi/4 that
// is x itself.
func quarterTurns(x float64) (n int, r, rl float64) {
	q := float64(x*twoOverPi) + shifter - shifter
	// Cody & Waite: pi/2 in three parts of 30 bits and a fourth
	a, e1 := twoSum(x-float64(q*piOver2A), -float64(q*piOver2B))
	b, e2 := twoSum(a, -float64(q*piOver2C))
	r, rl = fastTwoSum(b, (e1+e2)-float64(q*piOver2D))
	return int(q), r, rl
}

// sinPart is sin(r+rl) for |r| <= pi/4: the Taylor series to r^17.
func sinPart(r, rl float64) float64 {
	z := r * r
	p := float64(z*(1.0/355687428096000)) - 1.0/1307674368000
	p = float64(z*p) + 1.0/6227020800
	p = float64(z*p) - 1.0/39916800
	p = float64(z*p) + 1.0/362880
	p = float64(z*p) - 1.0/5040
	p = float64(z*p) + 1.0/120
	p = float64(z*p) - 1.0/6
	return r + (float64(float64(z*r)*p) + float64(rl*(1-float64(0.5*z))))
}

// cosPart is cos(r+rl) for |r| <= pi/4: the Taylor series to r^18.
func cosPart(r, rl float64) float64 {
	z := r * r
	p := float64(z*(-1.0/6402373705728000)) + 1.0/20922789888000
	p = float64(z*p) - 1.0/87178291200
	p = float64(z*p) + 1.0/479001600
	p = float64(z*p) - 1.0/3628800
	p = float64(z*p) + 1.0/40320
	p = float64(z*p) - 1.0/720
	p = float64(z*p) + 1.0/24
	half := float64(0.5 * z)
	w := 1 - half
	return w + (((1 - w) - half) + (float64(float64(z*z)*p) - float64(r*rl)))
}

// Sin returns the sine of x radians to within 0.8 ulp for |x| <= 2^20, and NaN
// beyond: no angle of a catalogue is there.
func Sin(x float64) float64 {
	if !(math.Abs(x) <= maxAngle) {
		return math.NaN()
	}
	if math.Abs(x) < 0x1p-27 {
		return x
	}
	switch n, r, rl := quarterTurns(x); n & 3 {
	case 0:
		return sinPart(r, rl)
	case 1:
		return cosPart(r, rl)
	case 2:
		return -sinPart(r, rl)
	default:
		return -cosPart(r, rl)
	}
}

// Cos returns the cosine of x radians to within 0.8 ulp for |x| <= 2^20, and
// NaN beyond.
func Cos(x float64) float64 {
	if !(math.Abs(x) <= maxAngle) {
		return math.NaN()
	}
	switch n, r, rl := quarterTurns(x); n & 3 {
	case 0:
		return cosPart(r, rl)
	case 1:
		return -sinPart(r, rl)
	case 2:
		return -cosPart(r, rl)
	default:
		return sinPart(r, rl)
	}
}

// SinCos returns both [Sin] and [Cos] of x, to the same bits, and reduces the
// angle once.
func SinCos(x float64) (sin, cos float64) {
	switch a := math.Abs(x); {
	case !(a <= maxAngle):
		return math.NaN(), math.NaN()
	case a < 0x1p-27:
		return x, 1
	}
	n, r, rl := quarterTurns(x)
	// By bits, not by branches, which nobody could predict.
	s, c := math.Float64bits(sinPart(r, rl)), math.Float64bits(cosPart(r, rl))
	swap := (s ^ c) & -uint64(n&1)
	sin = math.Float64frombits(s ^ swap ^ uint64(n&2)<<62)
	cos = math.Float64frombits(c ^ swap ^ uint64((n+1)&2)<<62)
	return sin, cos
}

// atanRatio returns atan(a/b) for 0 <= a <= b, 0 < b, in two parts, expanded
// near the closest c = i/32: atan(a/b) = atan(c) + atan((a - c b)/(b + c a)).
func atanRatio(a, b float64) (hi, lo float64) {
	switch { // keep the products away from overflow and underflow
	case b > 0x1p1000:
		a, b = a*0x1p-100, b*0x1p-100
	case b < 0x1p-800:
		a, b = a*0x1p200, b*0x1p200
	}
	i := int(float64(32*(a/b)) + 0.5)
	c := float64(i) / 32
	p, e := twoProduct(c, b)
	q := ((a - p) - e) / (b + float64(c*a))
	z := q * q
	s := float64(z*(1.0/13)) - 1.0/11
	s = float64(z*s) + 1.0/9
	s = float64(z*s) - 1.0/7
	s = float64(z*s) + 1.0/5
	s = float64(z*s) - 1.0/3
	t := &atanTable[i]
	hi, lo = fastTwoSum(t.hi, q)
	return hi, lo + (t.lo + float64(float64(q*z)*s))
}

// Atan2 returns the angle of the point (x, y) from the x axis, -pi to pi, to
// within 1.1 ulp. Special values are those of math.Atan2.
func Atan2(y, x float64) float64 {
	if x != x || y != y {
		return math.NaN()
	}
	a, b := math.Abs(y), math.Abs(x)
	if math.IsInf(a, 1) && math.IsInf(b, 1) {
		a, b = 1, 1
	}
	var hi, lo float64
	switch {
	case a == 0 || math.IsInf(b, 1):
	case math.IsInf(a, 1):
		hi, lo = 2*piOver4, piOver2Lo
	case a <= b:
		hi, lo = atanRatio(a, b)
	default:
		hi, lo = atanRatio(b, a)
		var e float64
		hi, e = twoSum(2*piOver4, -hi)
		lo = e + (piOver2Lo - lo)
	}
	if math.Signbit(x) {
		var e float64
		hi, e = twoSum(4*piOver4, -hi)
		lo = e + (2*piOver2Lo - lo)
	}
	return math.Copysign(hi+lo, y)
}

// Asin returns the angle in radians, -pi/2 to pi/2, whose sine is x, to within
// 2 ulp; NaN for |x| > 1.
func Asin(x float64) float64 {
	if !(math.Abs(x) <= 1) {
		return math.NaN()
	}
	return Atan2(x, math.Sqrt(float64((1-x)*(1+x))))
}
