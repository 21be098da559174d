package spread

import (
	"math"

	"catenrich/internal/status"
)

// Quantiles checks a catalogue's redshift quantiles against the redshift. Where
// one is missing, or not lo ≤ z ≤ hi, both become NaN with status.Quantiles. A
// row whose z is NaN has NaN quantiles, without the bit.
func Quantiles(lo, z, hi []float64, st []int32) {
	z, hi, st = z[:len(lo)], hi[:len(lo)], st[:len(lo)]
	for i, v := range z {
		if lo[i] <= v && v <= hi[i] {
			continue
		}
		if v == v {
			st[i] |= status.Quantiles
		}
		lo[i], hi[i] = math.NaN(), math.NaN()
	}
}

// Turns are the redshifts at which a quantity of a model changes from rising
// to falling or back, and its values there. They belong to the quantity at rest
// (z_obs = z_frame = z_cos). Most quantities have none; D_A has one.
type Turns struct{ Z, X []float64 }

// FindTurns looks for the turns of f between z = lo and hi, lo > -1, on a grid
// of 1/512 in ln(1+z) that thins to 1/16 of z toward z = 0, and refines them by
// golden section: Z is good to the square root of the rounding, X to the
// rounding. NaN values of f are passed over. Differences below 1e-13 of f count as
// none. It takes some thousand evaluations, once a model and quantity.
func FindTurns(f func(z float64) float64, lo, hi float64) Turns {
	var t Turns
	direction := 0.0
	before, at, x := math.NaN(), math.NaN(), math.NaN()
	for z := lo; ; z = nextZ(z, hi) {
		v := f(z)
		switch {
		case v != v:
			before, at, x, direction = math.NaN(), math.NaN(), math.NaN(), 0
		case x != x:
			at, x = z, v
		case math.Abs(v-x) > 1e-13*math.Max(math.Abs(v), math.Abs(x)):
			sign := math.Copysign(1, v-x)
			if direction == -sign {
				zt := golden(f, before, z, direction > 0)
				t.Z, t.X = append(t.Z, zt), append(t.X, f(zt))
			}
			direction, before, at, x = sign, at, z, v
		}
		if z >= hi {
			return t
		}
	}
}

// nextZ is the node after z.
func nextZ(z, hi float64) float64 {
	step := min((1+z)/512, max(math.Abs(z)/16, 1e-6))
	if z < 0 && z+step > 0 {
		return min(0, hi)
	}
	return min(z+step, hi)
}

// golden finds the maximum (or minimum) of f in [a, b].
func golden(f func(float64) float64, a, b float64, maximum bool) float64 {
	const ratio = 0.6180339887498949
	better := func(u, v float64) bool { return u != v && (u > v) == maximum }
	x1, x2 := b-float64(ratio*(b-a)), a+float64(ratio*(b-a))
	f1, f2 := f(x1), f(x2)
	for range 60 {
		if better(f1, f2) {
			b, x2, f2 = x2, x1, f1
			x1 = b - float64(ratio*(b-a))
			f1 = f(x1)
		} else {
			a, x1, f1 = x1, x2, f2
			x2 = a + float64(ratio*(b-a))
			f2 = f(x2)
		}
	}
	return 0.5 * (a + b)
}

// An Interval is where a quantity lies while its redshift lies between two
// quantiles: between its values at the ends if it is monotone there, else its
// range. All slices but Scale and Shift are as long as the batch.
type Interval struct {
	Zlo, Zhi []float64 // z_cos of the quantiles
	Xlo, Xhi []float64 // the quantity there
	X        []float64 // the quantity itself

	// The quantity of a row is Scale times that at rest, plus Shift: for D_A
	// Scale is (1+z_frame)/(1+z_obs), for mu Shift is 5 log10 of what D_L is
	// multiplied by. nil: 1 and 0.
	Scale, Shift []float64
}

// Fill fills lo and hi, lo ≤ X ≤ hi. A value that is missing at an end or in
// the middle makes both NaN. lo may be Xlo and hi Xhi.
func (v *Interval) Fill(lo, hi []float64, t Turns) {
	for i := range lo {
		a, b, x := v.Xlo[i], v.Xhi[i], v.X[i]
		if a != a || b != b || x != x {
			lo[i], hi[i] = math.NaN(), math.NaN()
			continue
		}
		if a > b {
			a, b = b, a
		}
		if x < a {
			a = x
		} else if x > b {
			b = x
		}
		lo[i], hi[i] = a, b
	}
	for j, z := range t.Z {
		for i := range lo {
			if z > v.Zlo[i] && z < v.Zhi[i] {
				y := t.X[j]
				if v.Scale != nil {
					y = float64(y * v.Scale[i])
				}
				if v.Shift != nil {
					y += v.Shift[i]
				}
				lo[i], hi[i] = min(lo[i], y), max(hi[i], y) // NaN stays
			}
		}
	}
}
