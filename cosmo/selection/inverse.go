package selection

import "math"

// cellsPerMag cuts the inverse into cubics; one of 1/64 mag is good to 1e-11 in
// z where w is smooth.
const cellsPerMag = 64

// An inverse is z as a function of w over a piece, cubics between equally
// spaced w. It is a first guess and a slope; Newton's rule with w itself does
// the rest.
type inverse struct {
	from, scale float64 // w of the first cell, cells a magnitude
	cubics      [][4]float64
}

// tabulate fills the inverse of w over p.
func (v *inverse) tabulate(c *curve, p *piece) {
	lo, hi := min(p.wlo, p.whi), max(p.wlo, p.whi)
	n := max(1, int(math.Ceil((hi-lo)*cellsPerMag)))
	if !(hi > lo) || n > 1<<16 {
		return // flat or infinite: roots are bracketed from the start
	}
	v.from, v.scale = lo, float64(n)/(hi-lo)
	v.cubics = make([][4]float64, n)
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
	for i := range v.cubics {
		d := z[i+1] - z[i]
		a, b := v.step(c, z[i], d), v.step(c, z[i+1], d)
		v.cubics[i] = [4]float64{z[i], a, float64(3*d) - float64(2*a) - b, a + b - float64(2*d)}
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

// guess returns z(w) and dz/dw; ok is false outside the table.
func (v *inverse) guess(w float64) (z, slope float64, ok bool) {
	t := float64((w - v.from) * v.scale)
	if !(t >= 0 && t <= float64(len(v.cubics))) || len(v.cubics) == 0 {
		return 0, 0, false
	}
	i := min(int(t), len(v.cubics)-1)
	u := t - float64(i)
	c := &v.cubics[i]
	z = float64(c[3]*u) + c[2]
	slope = float64(2*z) + float64(c[3]*u) // 3 c3 u + 2 c2
	z = float64(z*u) + c[1]
	slope = float64(slope*u) + c[1]
	return float64(z*u) + c[0], slope * v.scale, true
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
