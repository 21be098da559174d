package cosmo

import (
	"math"
	"sync"

	"catenrich/internal/exact"
)

// Contact-lost ages are tabulated over z itself, by its own exponent: for small
// z they go as -ln z, which is smooth over an octave however small z is.
const (
	firstLost     = -22 // the cells begin at z = 2^-22
	lostOctaves   = lastOctave - firstLost + 1
	leastLostBits = 4
	mostLostBits  = 6
	lostSmooth    = 1e-13 // relative error of a cell's fit
)

// futureTable is the contact-lost ages of a Model.
type futureTable struct {
	grid    func() *horizonGrid
	once    sync.Once
	octaves [lostOctaves]octave
	ages    []polynomial
}

// buildFuture tabulates the contact-lost ages.
func (m *Model) buildFuture() {
	f := &m.future
	f.ages = newPolynomials(1)
	w := m.newLostWalk()
	for i := range f.octaves {
		o := &f.octaves[i]
		low := math.Ldexp(1, i+firstLost)
		o.first = int32(len(f.ages))
		o.slow = true
		start := *w
		for bits := leastLostBits; bits <= mostLostBits && o.slow; bits++ {
			*w = start
			f.ages = f.ages[:o.first]
			o.cut(bits, true)
			o.slow = !m.layLost(w, low, 1<<bits)
		}
		if o.slow {
			f.ages = f.ages[:o.first]
		}
	}
}

// layLost adds the cells of the octave that begins at z = low, and says whether
// all are smooth. Cells all above MaxRedshift are left out.
func (m *Model) layLost(w *lostWalk, low float64, count int) bool {
	width := low / float64(count)
	for c := range count {
		edge := low + float64(float64(c)*width)
		if edge > MaxRedshift {
			return true
		}
		var values [order]float64
		for j := order - 1; j >= 0; j-- { // the nodes fall
			values[j] = w.age(edge + float64(width*chebyshev.node[j]))
		}
		v := newFit(&values)
		if !(v.roughness() < lostSmooth) {
			return false
		}
		m.future.ages = append(m.future.ages, v.expand(width, order))
	}
	return true
}

// contactLost returns the contact-lost age at z.
func (m *Model) contactLost(z float64) float64 {
	if m.future.ages == nil || !(z > 0 && z <= MaxRedshift) {
		return math.NaN()
	}
	b := math.Float64bits(z)
	i := int(b>>mantissa) - (1023 + firstLost)
	if i < 0 || m.future.octaves[i].slow {
		return m.slowContactLost(z)
	}
	o := &m.future.octaves[i]
	t := z - math.Float64frombits(b&o.mask)
	return m.future.ages[o.first+int32(b&(1<<mantissa-1)>>(o.shift&63))].at(t)
}

// fillContactLost stores each row's contact-lost age.
func (m *Model) fillContactLost(b *Base) {
	out := b.ContactLost[:len(b.Z)]
	for i, z := range b.Z {
		out[i] = m.contactLost(z)
	}
}

// A lostWalk finds contact-lost ages for rising z. Where x = 1+z_x lies within
// the cells of D_C they give it; below, it walks from the last x to the next.
type lostWalk struct {
	m      *Model
	grid   *horizonGrid
	now    float64 // the age today
	reach  float64 // G at the lowest x that the cells serve
	lowest float64 // and z_x there
	guess  float64 // the last z_x found in the cells
	x, g   float64 // where the walk stands: G(x) = g
	time   float64 // from today until then
	anchor float64 // time when it was last found without walking; 0 before the first
	gentle bool    // x is no steep power of g, as it is for soft dark energy: such rows are solved one by one
}

func (m *Model) newLostWalk() *lostWalk {
	w := &lostWalk{m: m, grid: m.future.grid(), now: m.scalars().age, lowest: -0.985, gentle: m.e.power <= 1 || m.e.wa3 > 0.03}
	for i := -firstOctave - 1; i >= 0; i-- {
		if m.past.octaves[i].slow {
			near, _ := octaveEnds(i)
			w.lowest = max(w.lowest, near-1)
		}
	}
	w.guess = w.lowest
	w.reach = w.grid.total + m.value(DC, w.lowest)
	return w
}

// age returns the contact-lost age at z.
func (w *lostWalk) age(z float64) float64 {
	g := w.m.value(DC, z)
	if g > w.reach {
		w.guess = w.m.invertDistance(g-w.grid.total, w.lowest, z, w.guess)
		return w.m.value(Age, w.guess)
	}
	if !w.gentle {
		return math.NaN() // no cells here
	}
	if w.anchor != 0 {
		w.step(g)
	}
	if !(w.time > 0.25*w.anchor) { // rounding errors of the steps would show
		u, time := w.grid.solve(w.m, g)
		w.x, w.g, w.time, w.anchor = exact.Exp(u), g, time, time
	}
	return w.now + w.time
}

// step walks to G = g: a Runge-Kutta step of dx/dG = E (Kutta 1901), whose miss
// is then measured by quadrature and taken out by Newton's method.
func (w *lostWalk) step(g float64) {
	rate := func(x float64) float64 { return math.Sqrt(w.m.e.squared(x)) }
	h, x := g-w.g, w.x
	k1 := rate(x)
	k2 := rate(x + float64(0.5*h*k1))
	k3 := rate(x + float64(0.5*h*k2))
	k4 := rate(x + float64(h*k3))
	next := x + float64(h*(k1+2*(k2+k3)+k4)/6)
	middle, half := float64(0.5*(x+next)), float64(0.5*(next-x))
	var distance, time float64
	for i, s := range short.node {
		at := middle + float64(half*s)
		d := short.weight[i] / rate(at)
		distance += d
		time += d / at
	}
	fix := float64((h - float64(half*distance)) * k4)
	w.x, w.g = next+fix, g
	w.time -= float64(half*time) + fix/(k4*next)
}
