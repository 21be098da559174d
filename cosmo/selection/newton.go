package selection

import (
	"math"

	"catenrich/cosmo"
	"catenrich/internal/exact"
)

// A Work is the memory of [Selection.Roots] from call to call. It belongs to
// one goroutine at a time; its zero value is ready.
//
// Roots that the inverse only guesses are tasks: the model is asked for all of
// a batch at once, which is several times faster than one by one.
type Work struct {
	row     int // at hand
	tasks   []task
	z, flux []float64 // of each task: the guess, log10 of D_L
	base    cosmo.Base
}

// A task is a root to be found between from, which is on the object's side, and
// end.
type task struct {
	c         *curve
	limit, q  float64
	from, end float64
	row       int32
	near      bool // it is zmin: end < from
}

func (w *Work) begin() { w.tasks, w.z = w.tasks[:0], w.z[:0] }

// add notes a task of the row at hand, and where to start.
func (w *Work) add(o *object, limit, from, end, guess float64, near bool) {
	if guess != guess {
		guess = from
	}
	w.tasks = append(w.tasks, task{})
	t := &w.tasks[len(w.tasks)-1]
	t.c, t.limit, t.q, t.from, t.end, t.row, t.near = o.c, limit, o.q, from, end, int32(w.row), near
	w.z = append(w.z, t.clamp(guess))
}

// finish solves the tasks, by a step of Newton's rule from each guess and more
// where it takes more.
func (w *Work) finish(m Model, zmin, zmax []float64) {
	if len(w.tasks) == 0 {
		return
	}
	m.Fill(&w.base, cosmo.DC|cosmo.DM|cosmo.Slope|cosmo.E, w.z)
	b := &w.base
	w.flux = append(w.flux[:0], b.DM...)
	for i, x := range b.X {
		w.flux[i] *= x
	}
	exact.Log10Slice(w.flux, w.flux)
	antipode := m.Antipode()
	for i := range w.tasks {
		t := &w.tasks[i]
		slope := b.Slope[i]
		if b.DC[i] > antipode {
			slope = -slope
		}
		root, ok := t.step(b.Z[i], w.flux[i], b.DM[i], b.E[i], slope)
		if !ok {
			root = t.solve(root)
		}
		if t.near {
			zmin[t.row] = t.clamp(root)
		} else {
			zmax[t.row] = t.clamp(root)
		}
	}
}

// straight is how many magnitudes before a root its curve is as good as
// straight: Newton's rule then ends within 1e-11 mag.
const straight = 1e-6

// step goes from z, where log10 of D_L, D_M, E and dD_M/dD_C are given, to
// where w would reach the limit on a straight line, and reports whether that is
// the root.
func (t *task) step(z, logDL, dm, e, slope float64) (root float64, ok bool) {
	c, x := t.c, 1+z
	k, kSlope, room := c.correction(t.observed(z))
	miss := float64(5*logDL) + c.zero + c.e.At(z) + k - t.limit
	// dw/dz = fluxPerMag (slope/(E D_M) + 1/x) + q K' - Q, times E D_M x
	dist := float64(e * dm)
	scale := float64(dist * x)
	tilt := float64(fluxPerMag*(float64(slope*x)+dist)) + float64((float64(t.q*kSlope)-c.e.Q)*scale)
	move := -miss * scale / tilt
	root = z + move
	return root, math.Abs(miss) <= straight && float64(math.Abs(move)*t.q) <= room && t.holds(root)
}

// observed is z_obs of the object at z.
func (t *task) observed(z float64) float64 {
	if t.q == 1 {
		return z
	}
	return min(max(float64(t.q*(1+z))-1, t.c.klo), t.c.khi)
}

// rounding is how far beyond its ends, relatively, a root may be found.
const rounding = 1e-10

func (t *task) holds(z float64) bool {
	lo, hi := t.ends()
	return z >= lo-float64(rounding*lo) && z <= hi+float64(rounding*hi)
}

func (t *task) clamp(z float64) float64 {
	lo, hi := t.ends()
	return min(max(z, lo), hi)
}

func (t *task) ends() (lo, hi float64) {
	if t.near {
		return t.end, t.from
	}
	return t.from, t.end
}

// solve goes on from z, and where Newton's rule does not end brackets the root.
func (t *task) solve(z float64) float64 {
	m := t.c.m
	for range 6 {
		if !t.holds(z) {
			break
		}
		dm, slope := m.At(cosmo.DM, z), m.At(cosmo.Slope, z)
		if m.At(cosmo.DC, z) > m.Antipode() {
			slope = -slope
		}
		root, ok := t.step(z, exact.Log10(float64(dm*(1+z))), dm, m.At(cosmo.E, z), slope)
		if ok {
			return root
		}
		z = root
	}
	return bracketed(func(z float64) float64 { return t.c.at(z, t.q) - t.limit }, t.from, t.end)
}
