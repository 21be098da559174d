package exact

import (
	"math"
	"math/big"
)

// The judges: series in math/big, at 240 bits, with nothing in common with the
// functions under test but the definitions.

const precision = 240

func newBig(x float64) *big.Float { return new(big.Float).SetPrec(precision).SetFloat64(x) }

func zero() *big.Float { return new(big.Float).SetPrec(precision) }

// negligible reports whether term no longer matters to sum.
func negligible(term, sum *big.Float) bool {
	return term.Sign() == 0 || sum.Sign() != 0 && term.MantExp(nil) < sum.MantExp(nil)-precision
}

// bigExp is e^x: the series of x/2^k, squared k times.
func bigExp(x *big.Float) *big.Float {
	k := 0
	if e := x.MantExp(nil); x.Sign() != 0 && e > -8 {
		k = e + 8
	}
	r := zero().SetMantExp(x, -k)
	sum, term := newBig(1), newBig(1)
	for n := 1; ; n++ {
		term.Mul(term, r)
		term.Quo(term, newBig(float64(n)))
		if negligible(term, sum) {
			break
		}
		sum.Add(sum, term)
	}
	for range k {
		sum.Mul(sum, sum)
	}
	return sum
}

// bigLog is ln x by Newton's method on bigExp, from math.Log.
func bigLog(x *big.Float) *big.Float {
	m := zero()
	e := x.MantExp(m)
	f, _ := m.Float64()
	y := newBig(math.Log(f))
	for range 4 { // y += 2 (m - e^y)/(m + e^y): each step triples the digits
		g := bigExp(y)
		step := zero().Sub(m, g)
		step.Quo(step, zero().Add(m, g))
		y.Add(y, step.Mul(step, newBig(2)))
	}
	return y.Add(y, zero().Mul(newBig(float64(e)), ln2Big()))
}

// ln2Big is ln 2 = sum 1/(n 2^n).
func ln2Big() *big.Float {
	sum := zero()
	for n := 1; n <= precision+8; n++ {
		sum.Add(sum, zero().SetMantExp(zero().Quo(newBig(1), newBig(float64(n))), -n))
	}
	return sum
}

// bigAtan is atan x: halved three times by atan x = 2 atan(x/(1+sqrt(1+x^2))),
// then the series.
func bigAtan(x *big.Float) *big.Float {
	y := zero().Set(x)
	const halvings = 6
	for range halvings {
		root := zero().Mul(y, y)
		root.Sqrt(root.Add(root, newBig(1)))
		y.Quo(y, root.Add(root, newBig(1)))
	}
	sum, power := zero().Set(y), zero().Set(y)
	square := zero().Mul(y, y)
	for n := 3; sum.Sign() != 0; n += 2 {
		power.Mul(power, square)
		power.Neg(power)
		term := zero().Quo(power, newBig(float64(n)))
		if negligible(term, sum) {
			break
		}
		sum.Add(sum, term)
	}
	return zero().SetMantExp(sum, halvings)
}

// bigPi is 4 atan 1.
func bigPi() *big.Float { return zero().SetMantExp(bigAtan(newBig(1)), 2) }

var piBig, ln10Big = bigPi(), bigLog(newBig(10))

// bigSin is sin x: less whole turns, then the series.
func bigSin(x *big.Float) *big.Float {
	turn := zero().SetMantExp(piBig, 1)
	n, _ := zero().Quo(x, turn).Float64()
	r := zero().Sub(x, zero().Mul(newBig(math.Round(n)), turn))
	sum, term, square := zero().Set(r), zero().Set(r), zero().Mul(r, r)
	for n := 2.0; sum.Sign() != 0; n += 2 {
		term.Mul(term, square)
		term.Quo(term.Neg(term), newBig(n*(n+1)))
		if negligible(term, newBig(1e-40)) && negligible(term, sum) {
			break
		}
		sum.Add(sum, term)
	}
	return sum
}

// bigCos is sin(pi/2 - x).
func bigCos(x *big.Float) *big.Float {
	return bigSin(zero().Sub(zero().SetMantExp(piBig, -1), x))
}

// bigSinh is (e^x - e^-x)/2, and bigCosh their sum.
func bigSinh(x *big.Float) *big.Float {
	e := bigExp(x)
	return e.SetMantExp(e.Sub(e, zero().Quo(newBig(1), zero().Set(e))), -1)
}

func bigCosh(x *big.Float) *big.Float {
	e := bigExp(x)
	return e.SetMantExp(e.Add(e, zero().Quo(newBig(1), zero().Set(e))), -1)
}

func bigExpm1(x *big.Float) *big.Float {
	e := bigExp(x)
	return e.Sub(e, newBig(1))
}

func bigLog1p(x *big.Float) *big.Float { return bigLog(zero().Add(x, newBig(1))) }

func bigLog10(x *big.Float) *big.Float {
	l := bigLog(x)
	return l.Quo(l, ln10Big)
}

func bigExp10(x *big.Float) *big.Float { return bigExp(zero().Mul(x, ln10Big)) }

// bigAsin is atan(x/sqrt(1-x^2)).
func bigAsin(x *big.Float) *big.Float {
	c := zero().Mul(x, x)
	c.Sqrt(c.Sub(newBig(1), c))
	return bigAtan(c.Quo(x, c))
}
