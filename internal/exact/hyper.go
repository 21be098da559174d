package exact

import "math"

// Sinh returns the hyperbolic sine of x to within one ulp.
func Sinh(x float64) float64 {
	a := math.Abs(x)
	switch {
	case x != x || math.IsInf(x, 0) || a < 0x1p-27:
		return x
	case a < 0.35:
		z := x * x
		p := float64(z*(1.0/1307674368000)) + 1.0/6227020800
		p = float64(z*p) + 1.0/39916800
		p = float64(z*p) + 1.0/362880
		p = float64(z*p) + 1.0/5040
		p = float64(z*p) + 1.0/120
		p = float64(z*p) + 1.0/6
		return x + float64(float64(z*x)*p)
	}
	return math.Copysign(halfSum(a, -1), x)
}

// Cosh returns the hyperbolic cosine of x to within 0.6 ulp.
func Cosh(x float64) float64 {
	if x != x || math.IsInf(x, 0) {
		return math.Abs(x)
	}
	return halfSum(math.Abs(x), 1)
}

// halfSum returns (e^a + sign e^-a)/2 for a >= 0.
func halfSum(a, sign float64) float64 {
	if a > overflowAt+1 {
		return math.Inf(1)
	}
	h, l, k := expParts(a, 0)
	if a > 40 { // e^-a is below an eighth of an ulp
		return scale(h+l, k-1)
	}
	g, m, j := expParts(-a, 0)
	up, down := pow2(k-1), sign*pow2(j-1)
	s, e := twoSum(float64(h*up), float64(g*down))
	return s + (e + (float64(l*up) + float64(m*down)))
}
