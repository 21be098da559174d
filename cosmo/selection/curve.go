package selection

import (
	"math"

	"catenrich/cosmo"
	"catenrich/cosmo/photo"
	"catenrich/internal/exact"
)

// fluxPerMag is 5/ln 10, the magnitudes in a factor e of distance.
const fluxPerMag = 5 / math.Ln10

// least is the redshift below which a bright limit is none: an object there
// would be 30 mag brighter than at z = 0.01.
const least = 1e-8

// A curve is w(z) for objects at rest, q = 1, cut into rising and falling
// pieces.
type curve struct {
	m          Model
	k          photo.Correction
	e          photo.Evolution
	zero       float64 // mag, 5 log10(D_H/10 pc)
	klo        float64 // range of k
	khi        float64
	zlo        float64 // of the pieces: the selection's, within what k covers at q = 1
	zhi        float64
	steep      float64 // largest |dK/dln(1+z)|, mag
	everywhere bool    // K is known at all redshifts of the selection for |q-1| up to near
	pieces     []piece // in order of z, without gaps
}

// near is the q-1 of a frame and a peculiar velocity.
const near = 0.01

// A piece is a run of z over which w rises or falls throughout.
type piece struct {
	zlo, zhi float64
	wlo, whi float64 // w at the two ends
	inverse  inverse
}

func newCurve(m Model, k photo.Correction, e photo.Evolution, zmin, zmax float64) *curve {
	c := &curve{m: m, k: k, e: e, zero: float64(5*exact.Log10(m.HubbleDistance())) + 25}
	c.klo, c.khi = k.Range()
	c.zlo, c.zhi = max(zmin, c.klo, least), min(zmax, c.khi)
	c.everywhere = c.klo+float64(near*(1+c.zlo)) < c.zlo && c.zhi+float64(near*(1+c.zhi)) < c.khi
	if !(c.zhi > c.zlo) {
		return c // no piece: nothing can be found
	}
	c.findPieces()
	for i := range c.pieces {
		c.pieces[i].inverse.tabulate(c, &c.pieces[i])
	}
	return c
}

// modulus returns mu + e at z, for D_L = (1+z) D_M.
func (c *curve) modulus(z float64) float64 {
	d := c.m.At(cosmo.DM, z) * (1 + z)
	return float64(5*exact.Log10(d)) + c.zero + c.e.At(z)
}

// at returns w of an object with (1+z_obs)/(1+z_cos) = q, moved to z. The
// clamp undoes the rounding of q (1+z) - 1 at the ends of K's range, which
// callers keep to.
func (c *curve) at(z, q float64) float64 {
	zobs := z
	if q != 1 {
		zobs = min(max(float64(q*(1+z))-1, c.klo), c.khi)
	}
	return c.modulus(z) + c.k.Value(zobs)
}

// slope returns dw/dz at rest. Past the antipode of a closed model |D_M|
// changes by minus the model's Slope.
func (c *curve) slope(z float64) float64 {
	d := c.m.At(cosmo.Slope, z) / (c.m.At(cosmo.E, z) * c.m.At(cosmo.DM, z))
	if c.m.At(cosmo.DC, z) > c.m.Antipode() {
		d = -d
	}
	return float64(fluxPerMag*(d+1/(1+z))) + c.k.Slope(z) - c.e.Q
}

// correction returns K and dK/dz at z_obs, and how far z_obs may move before a
// kink of K, which only tables have.
func (c *curve) correction(zobs float64) (k, slope, room float64) {
	switch k := c.k.(type) {
	case *photo.Synthetic:
		value, slope := k.At(zobs)
		return value, slope, math.Inf(1)
	case *photo.Table:
		return k.Line(zobs)
	}
	return c.k.Value(zobs), c.k.Slope(zobs), math.Inf(1)
}

// hintAt differences K at z over the step of hints.
func (c *curve) hintAt(z float64) hint {
	if _, same := c.k.Scale(1 + hintStep); same {
		return hint{}
	}
	k := func(q float64) float64 { return c.k.Value(min(max(float64(q*(1+z))-1, c.klo), c.khi)) }
	here, up, down := c.k.Value(z), k(1+hintStep), k(1-hintStep)
	return hint{float32((up - down) / (2 * hintStep)), float32((up - here + (down - here)) / (2 * hintStep * hintStep))}
}

// findPieces walks over a fine grid, and cuts the range wherever w turns.
func (c *curve) findPieces() {
	const logStep, linearStep = 0.02, 0.0005
	z, w := c.zlo, c.at(c.zlo, 1)
	p := piece{zlo: z, wlo: w}
	before := z // the node before z
	rising, known := true, false
	for z < c.zhi {
		next := min(z+min(float64(logStep*z), linearStep*(1+z)), c.zhi)
		wn := c.at(next, 1)
		c.steep = max(c.steep, math.Abs(c.k.Slope(next)*(1+next)))
		switch {
		case !known:
			rising, known = wn >= w, true
		case wn != w && (wn > w) != rising:
			zt := c.turn(before, next, rising, 1)
			p.zhi, p.whi = zt, c.at(zt, 1)
			c.pieces = append(c.pieces, p)
			p = piece{zlo: zt, wlo: p.whi}
			rising = !rising
		}
		before, z, w = z, next, wn
	}
	p.zhi, p.whi = c.zhi, w
	c.pieces = append(c.pieces, p)
}

// turn finds the maximum (or minimum) in [a, b] of w at ratio q by golden
// section, to the square root of the rounding, where w itself is exact.
func (c *curve) turn(a, b float64, maximum bool, q float64) float64 {
	const golden = 0.6180339887498949
	better := func(u, v float64) bool { return (u > v) == maximum && u != v }
	x1, x2 := b-float64(golden*(b-a)), a+float64(golden*(b-a))
	w1, w2 := c.at(x1, q), c.at(x2, q)
	for range 60 {
		if better(w1, w2) {
			b, x2, w2 = x2, x1, w1
			x1 = b - float64(golden*(b-a))
			w1 = c.at(x1, q)
		} else {
			a, x1, w1 = x1, x2, w2
			x2 = a + float64(golden*(b-a))
			w2 = c.at(x2, q)
		}
	}
	return 0.5 * (a + b)
}

// pieceAt returns the piece that holds z, the nearest one outside them.
func (c *curve) pieceAt(z float64) int {
	i := 0
	for i+1 < len(c.pieces) && z > c.pieces[i].zhi {
		i++
	}
	return i
}

// covered returns the redshifts, within the selection's limits, for which K is
// known to an object with ratio q.
func (c *curve) covered(l *Limits, q float64) (lo, hi float64) {
	lo, hi = c.klo, c.khi
	if q != 1 {
		lo, hi = (1+lo)/q-1, (1+hi)/q-1
	}
	return max(l.Zmin, lo, least), min(l.Zmax, hi)
}
