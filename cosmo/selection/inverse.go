package selection

import "math"

// cellsPerMag cuts the inverse into cubics; one of 1/64 mag is good to 1e-11 in
// z where w is smooth.
const cellsPerMag = 64

// sure is how well a cell must return its w to be used without another look.
const sure = 1e-10 // mag

// An inverse is z as a function of w over a piece, cubics between equally
// spaced w. A cell that does not return w to within sure, because K has a kink
// there or w turns, is all NaN.
type inverse struct {
	from, scale float64 // w of the first cell, cells a magnitude
	cells       []cell
}

// A cell is a cubic in 0 ≤ u ≤ 1.
type cell [4]float64

// tabulate fills the inverse of w over p.
func (v *inverse) tabulate(c *curve, p *piece) {
	lo, hi := min(p.wlo, p.whi), max(p.wlo, p.whi)
	n := max(1, int(math.Ceil((hi-lo)*cellsPerMag)))
	if !(hi > lo) || n > 1<<16 {
		return // flat or infinite: roots are bracketed from the start
	}
	v.from, v.scale = lo, float64(n)/(hi-lo)
	v.cells = make([]cell, n)
	z := make([]float64, n+1)
	z[0], z[n] = p.zlo, p.zhi
	if p.wlo > p.whi {
		z[0], z[n] = p.zhi, p.zlo
	}
	for i := 1; i < n; i++ {
		w := lo + float64(i)/v.scale
		f := func(x float64) float64 { return c.at(x, 1) - w }
		z[i] = bracketed(f, z[i-1], v.beyond(f, z[i-1], z[n]))
	}
	for i := range v.cells {
		d := z[i+1] - z[i]
		a, b := v.step(c, z[i], d), v.step(c, z[i+1], d)
		k := cell{z[i], a, float64(3*d) - float64(2*a) - b, a + b - float64(2*d)}
		for _, u := range [3]float64{0.25, 0.5, 0.75} {
			at, _ := k.at(u)
			w := lo + (float64(i)+u)/v.scale
			if !(at > p.zlo && at < p.zhi && math.Abs(c.at(at, 1)-w) <= sure) {
				k = cell{math.NaN(), math.NaN(), math.NaN(), math.NaN()}
			}
		}
		v.cells[i] = k
	}
}

// beyond returns a place between z and end where f is not negative any more,
// close enough for a root to be found fast.
func (v *inverse) beyond(f func(float64) float64, z, end float64) float64 {
	for ahead := 0.03; ahead < 1; ahead *= 2 {
		d := float64(ahead * min(z, math.Abs(end-z)))
		if end < z {
			d = -d
		}
		if f(z+d) >= 0 {
			return z + d
		}
	}
	return end
}

// step is dz for one cell by the slope at z, kept within reason where w turns.
func (v *inverse) step(c *curve, z, d float64) float64 {
	s := 1 / (c.slope(z) * v.scale)
	if limit := 3 * math.Abs(d); !(math.Abs(s) <= limit) {
		return d
	}
	return s
}

// at returns the cubic and its slope at 0 ≤ u ≤ 1.
func (k *cell) at(u float64) (z, slope float64) {
	z = float64(k[3]*u) + k[2]
	slope = float64(2*z) + float64(k[3]*u) // 3 k3 u + 2 k2
	z = float64(z*u) + k[1]
	slope = float64(slope*u) + k[1]
	return float64(z*u) + k[0], slope
}

// at returns z(w) and dz/dw, NaN where the table does not know.
func (v *inverse) at(w float64) (z, slope float64) {
	t := float64((w - v.from) * v.scale)
	if !(t >= 0 && t < float64(len(v.cells))) {
		return math.NaN(), math.NaN()
	}
	i := int(t)
	z, slope = v.cells[i].at(t - float64(i))
	return z, float64(slope * v.scale)
}

// bracketed finds the root of f between a and b, where it has opposite signs,
// by Ridders' rule (Ridders 1979, IEEE Trans. Circuits Syst. 26, 979), to the
// last digits. Where f(a) and f(b) have one sign, as rounding can make them at the
// very root, it returns the end where f is smaller.
func bracketed(f func(float64) float64, a, b float64) float64 {
	fa, fb := f(a), f(b)
	if fa == 0 || fb == 0 || (fa > 0) == (fb > 0) {
		if math.Abs(fa) < math.Abs(fb) {
			return a
		}
		return b
	}
	for range 200 {
		m := 0.5 * (a + b)
		fm := f(m)
		s := math.Sqrt(float64(fm*fm) - float64(fa*fb))
		if fm == 0 || s == 0 {
			return m
		}
		d := (m - a) * fm / s
		if fa < fb {
			d = -d
		}
		x := m + d
		if !(x > min(a, b) && x < max(a, b)) {
			x = m
		}
		fx := f(x)
		switch {
		case fx == 0:
			return x
		case (fm > 0) != (fx > 0):
			a, fa, b, fb = m, fm, x, fx
		case (fa > 0) != (fx > 0):
			b, fb = x, fx
		default:
			a, fa = x, fx
		}
		if math.Abs(b-a) <= 4e-16*math.Max(math.Abs(a), math.Abs(b)) {
			break
		}
	}
	if math.Abs(fa) < math.Abs(fb) {
		return a
	}
	return b
}
