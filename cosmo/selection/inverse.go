package selection

import "math"

// stepsPerMag cuts the inverse into steps of w. A cubic over 1/64 mag is good to
// 1e-11 in z where w is smooth; elsewhere a step is halved up to maxHalved
// times.
const (
	stepsPerMag = 64
	maxHalved   = 6
)

// sure is how well a cubic must return its w to be used.
const sure = 1e-10 // mag

// An inverse is z as a function of w over a piece, one cubic or more in each of
// equal steps of w. A cubic that does not return w to within sure even so,
// because K has a kink there or w turns, is all NaN.
type inverse struct {
	from, scale float64 // w of the first step, steps a magnitude
	steps       []step
	cubics      []cubic
}

// A step holds n cubics from off on.
type step struct{ off, n int32 }

// A cubic is one in 0 ≤ u ≤ 1.
type cubic [4]float64

// tabulate fills the inverse of w over p.
func (v *inverse) tabulate(c *curve, p *piece) {
	lo, hi := min(p.wlo, p.whi), max(p.wlo, p.whi)
	n := max(1, int(math.Ceil((hi-lo)*stepsPerMag)))
	if !(hi > lo) || n > 1<<16 {
		return // flat or infinite: roots are bracketed from the start
	}
	v.from, v.scale = lo, float64(n)/(hi-lo)
	z, last := p.zlo, p.zhi
	if p.wlo > p.whi {
		z, last = p.zhi, p.zlo
	}
	for i := range n {
		end := last
		if i < n-1 {
			w := lo + float64(i+1)/v.scale
			f := func(x float64) float64 { return c.at(x, 1) - w }
			end = bracketed(f, z, v.beyond(f, z, last))
		}
		v.halve(c, lo+float64(i)/v.scale, z, end)
		z = end
	}
}

// halve appends the step that begins at w, where z is from, in as many cubics
// as it takes.
func (v *inverse) halve(c *curve, w, from, to float64) {
	off := len(v.cubics)
	for n := 1; ; n *= 2 {
		v.cubics = v.cubics[:off]
		if v.fit(c, w, from, to, n) || n == 1<<maxHalved {
			v.steps = append(v.steps, step{int32(off), int32(n)})
			return
		}
	}
}

// fit appends n cubics for one step and reports whether all of them are sure.
func (v *inverse) fit(c *curve, w, from, to float64, n int) (all bool) {
	all = true
	scale := float64(n) * v.scale
	z := from
	for j := range n {
		end := to
		if j < n-1 {
			next := w + float64(j+1)/scale
			end = bracketed(func(x float64) float64 { return c.at(x, 1) - next }, z, to)
		}
		d := end - z
		a, b := tangent(c, z, d, scale), tangent(c, end, d, scale)
		k := cubic{z, a, float64(3*d) - float64(2*a) - b, a + b - float64(2*d)}
		for _, u := range [3]float64{0.25, 0.5, 0.75} {
			at, _ := k.at(u)
			if !(at > min(z, end) && at < max(z, end) && math.Abs(c.at(at, 1)-(w+(float64(j)+u)/scale)) <= sure) {
				k = cubic{math.NaN(), math.NaN(), math.NaN(), math.NaN()}
				all = false
			}
		}
		v.cubics = append(v.cubics, k)
		z = end
	}
	return all
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

// tangent is dz for one cubic by the slope at z, kept within reason where w
// turns; d is the dz there is.
func tangent(c *curve, z, d, scale float64) float64 {
	s := 1 / (c.slope(z) * scale)
	if !(math.Abs(s) <= 3*math.Abs(d)) {
		return d
	}
	return s
}

// at returns the cubic and its slope at 0 ≤ u ≤ 1.
func (k *cubic) at(u float64) (z, slope float64) {
	z = float64(k[3]*u) + k[2]
	slope = float64(2*z) + float64(k[3]*u) // 3 k3 u + 2 k2
	z = float64(z*u) + k[1]
	slope = float64(slope*u) + k[1]
	return float64(z*u) + k[0], slope
}

// at returns z(w) and dz/dw, NaN where the table does not know.
func (v *inverse) at(w float64) (z, slope float64) {
	t := float64((w - v.from) * v.scale)
	if !(t >= 0 && t < float64(len(v.steps))) {
		return math.NaN(), math.NaN()
	}
	i := int(t)
	u, scale := t-float64(i), v.scale
	s := v.steps[i]
	k := s.off
	if s.n > 1 {
		n := float64(s.n)
		u, scale = float64(u*n), float64(scale*n)
		j := min(int32(u), s.n-1)
		k, u = k+j, u-float64(j)
	}
	z, slope = v.cubics[k].at(u)
	return z, float64(slope * scale)
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
		m := float64(0.5 * (a + b))
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
