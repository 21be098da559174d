package selection

import "math"

// stepsPerMag cuts the inverse into cells of w. A cubic over 1/64 mag is good to
// 1e-11 in z where w is smooth.
const stepsPerMag = 64

// sure is how well a cubic must return its w to be used as it is.
const sure = 1e-10 // mag

// An inverse is z as a function of w over a piece, a cubic in each of equal
// steps of w.
type inverse struct {
	from, scale float64 // w of the first cell, cells a magnitude
	cells       []cell
}

// A cell has z as a cubic in 0 ≤ u ≤ 1, and a hint of what q does to K at both
// ends.
type cell struct {
	cubic
	hints [2]hint
	sure  bool // the cubic returns its w; elsewhere it is a first guess
}

// A cubic is one in 0 ≤ u ≤ 1.
type cubic [4]float64

// A hint says that K(q(1+z)-1) - K(z) is about (q-1) (first + (q-1) second), in
// mag.
type hint struct{ first, second float32 }

// hintStep is the q-1 over which hints difference K: the Sun's speed over c.
const hintStep = 1.23e-3

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
	near := c.hintAt(z)
	for i := range n {
		end := last
		if i < n-1 {
			w := lo + float64(i+1)/v.scale
			f := func(x float64) float64 { return c.at(x, 1) - w }
			end = bracketed(f, z, v.beyond(f, z, last))
		}
		far := c.hintAt(end)
		k, ok := v.fit(c, lo+float64(i)/v.scale, z, end)
		v.cells = append(v.cells, cell{k, [2]hint{near, far}, ok})
		z, near = end, far
	}
}

// fit returns the cubic of the cell that begins at w, and whether it is sure.
func (v *inverse) fit(c *curve, w, z, end float64) (k cubic, ok bool) {
	d := end - z
	a, b := tangent(c, z, d, v.scale), tangent(c, end, d, v.scale)
	k = cubic{z, a, float64(3*d) - float64(2*a) - b, a + b - float64(2*d)}
	for _, u := range [3]float64{0.25, 0.5, 0.75} {
		at, _ := k.at(u)
		if !(at > min(z, end) && at < max(z, end)) {
			return cubic{z, d}, false // K has a kink there, or w turns
		}
		if !(math.Abs(c.at(at, 1)-(w+u/v.scale)) <= sure) {
			return k, false
		}
	}
	return k, true
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

// find returns the cell that holds w and w's place in it, nil outside the table.
func (v *inverse) find(w float64) (c *cell, u float64) {
	t := float64((w - v.from) * v.scale)
	if !(t >= 0 && t < float64(len(v.cells))) {
		return nil, 0
	}
	i := int(t)
	return &v.cells[i], t - float64(i)
}

// at returns z(w), and whether that is sure; NaN outside the table.
func (v *inverse) at(w float64) (z float64, ok bool) {
	c, u := v.find(w)
	if c == nil {
		return math.NaN(), false
	}
	z, _ = c.at(u)
	return z, c.sure
}

// guess returns about where w and what q = 1+e adds to it make limit.
func (v *inverse) guess(limit, e float64) float64 {
	c, u := v.find(limit)
	if c == nil {
		return math.NaN()
	}
	near := c.hints[0].shift(e)
	slope := c.hints[1].shift(e) - near
	d := float64((near + float64(slope*u)) * (1 - float64(slope*v.scale))) // where it has moved to
	z, _ := c.at(u - float64(d*v.scale))
	return z
}

func (h hint) shift(e float64) float64 {
	return float64(e * (float64(h.first) + float64(e*float64(h.second))))
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
