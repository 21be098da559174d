package cosmo

import "math"

// smooth is the relative error up to which a cell's fit is accepted.
const smooth = 2e-15

// Prepare builds the tables that the quantities in q need, once: a few
// milliseconds. [Model.Fill] and [Model.At] do it by themselves; a program that
// wants no such pause in its workers calls Prepare first.
func (m *Model) Prepare(q Quantity) {
	t := &m.past
	t.once.base.Do(m.buildBase)
	if q&Drift != 0 {
		t.once.drift.Do(m.buildDrift)
	}
	if m.e.curvature != 0 {
		if q&DM != 0 {
			t.once.transverse.Do(m.buildTransverse)
		}
		if q&Slope != 0 {
			t.once.slope.Do(func() { t.slope = m.tabulate(m.e.slope) })
		}
		if q&Volume != 0 {
			t.once.volume.Do(func() { t.volume = m.tabulate(m.e.volumeRatio) })
		}
	}
	if q&ContactLost != 0 && m.horizon && m.aging {
		m.future.once.Do(m.buildFuture)
	}
}

// buildBase lays the cells out and tabulates D_C, lookback, age and E, which
// share the evaluations of E.
func (m *Model) buildBase() {
	t := &m.past
	t.lowest = MinRedshift
	if m.turns {
		t.lowest = max(t.lowest, m.turnAround)
	}
	t.cells = []span{{math.NaN(), math.NaN()}}
	t.nodes = make([][order]float64, 1, 1024)
	for i := range octaves {
		m.layOctave(i)
	}
	m.fillBase()
}

// layOctave cuts the octave of x = 2^(i+firstOctave) into as many cells as it
// takes for the integrands to be smooth in each, and keeps E at their nodes.
func (m *Model) layOctave(i int) {
	t, o := &m.past, &m.past.octaves[i]
	low := math.Ldexp(1, i+firstOctave)
	cells, nodes := len(t.cells), len(t.nodes)
	o.first = int32(cells)
	for bits := leastBits; bits <= mostBits; bits++ {
		o.cut(bits, low >= 1)
		count := 1 << bits
		width := low / float64(count)
		t.cells, t.nodes = t.cells[:cells], t.nodes[:nodes]
		good := true
		for c := 0; c < count && good; c++ {
			s := span{low - 1 + float64(float64(c)*width), width} // exact
			if low < 1 {
				s = span{s.edge + width, -width}
			}
			var e [order]float64
			good = m.sample(s, &e)
			t.cells, t.nodes = append(t.cells, s), append(t.nodes, e)
		}
		if good {
			return
		}
		if low < 1 && (m.turns && m.startX >= 0.5*low) {
			break // an end within or close below: no power series converges
		}
	}
	t.cells, t.nodes = t.cells[:cells], t.nodes[:nodes]
	o.slow = true
}

// sample evaluates E at the nodes of a cell and says whether polynomials will
// do there.
func (m *Model) sample(s span, e *[order]float64) bool {
	var distance, time [order]float64
	for j, f := range chebyshev.node {
		x := 1 + (s.edge + float64(s.width*f))
		e[j] = math.Sqrt(m.e.squared(x))
		distance[j] = 1 / e[j]
		time[j] = 1 / (x * e[j])
	}
	// the angle across the cell, for D_M and the volume
	if turn := math.Abs(s.width) * math.Sqrt(math.Abs(m.e.curvature)) * max(distance[0], distance[order-1]); !(turn < 0.12) {
		return false
	}
	r, d, t := newFit(e), newFit(&distance), newFit(&time)
	return r.roughness() < smooth && d.roughness() < smooth && t.roughness() < smooth
}

// outward visits the octaves away from z = 0: the past, then the future.
func outward(visit func(octave int, past bool)) {
	for i := -firstOctave; i < octaves; i++ {
		visit(i, true)
	}
	for i := -firstOctave - 1; i >= 0; i-- {
		visit(i, false)
	}
}

// each visits an octave's cells away from z = 0.
func (t *tables) each(i int, visit func(c int)) {
	o := &t.octaves[i]
	n := 1 << (mantissa - o.shift)
	for k := range n {
		if i < -firstOctave {
			k = n - 1 - k
		}
		visit(int(o.first) + k)
	}
}

// fillBase makes the polynomials of D_C, lookback and E, and the ages.
func (m *Model) fillBase() {
	t := &m.past
	n := len(t.cells)
	t.distance, t.time, t.rate = newPolynomials(n), newPolynomials(n), newPolynomials(n)
	t.age = make([]float64, n)
	steps := make([]float64, n) // of lookback across each cell
	var distance, time [2]total // past, future
	outward(func(i int, past bool) {
		side := 0
		if !past {
			side = 1
		}
		d, l := &distance[side], &time[side]
		if t.octaves[i].slow {
			near, far := octaveEnds(i)
			if m.startX < far {
				d.add(m.slowDistance(near-1, far-1))
				l.add(m.slowTime(near-1, far-1))
			} else {
				d.add(math.NaN())
				l.add(math.NaN())
			}
			return
		}
		t.each(i, func(c int) {
			w := t.cells[c].width
			var fd, ft [order]float64
			for j, f := range chebyshev.node {
				x := 1 + (t.cells[c].edge + float64(w*f))
				fd[j] = 1 / t.nodes[c][j]
				ft[j] = 1 / (x * t.nodes[c][j])
			}
			a, b, r := newFit(&fd), newFit(&ft), newFit(&t.nodes[c])
			t.distance[c] = a.integral(d.value(), w)
			t.time[c] = b.integral(l.value(), w)
			t.rate[c] = r.expand(w, order)
			steps[c] = b.whole(w)
			d.add(a.whole(w))
			l.add(steps[c])
		})
	})
	m.fillAges(steps)
}

// fillAges sums the ages at the cells' edges from the far end.
func (m *Model) fillAges(steps []float64) {
	t := &m.past
	t.age[0] = math.NaN()
	if !m.aging {
		for i := range t.age {
			t.age[i] = math.NaN()
		}
		return
	}
	var now total
	now.add(m.ageFrom(float64((lastOctave + 1) * math.Ln2)))
	for i := octaves - 1; i >= -firstOctave; i-- {
		if t.octaves[i].slow {
			near, far := octaveEnds(i)
			now.add(m.slowTime(near-1, far-1))
			continue
		}
		o := &t.octaves[i]
		for c := int(o.first) + 1<<(mantissa-o.shift) - 1; c >= int(o.first); c-- {
			now.add(steps[c])
			t.age[c] = now.value()
		}
	}
	for i := -firstOctave - 1; i >= 0; i-- {
		if t.octaves[i].slow {
			near, far := octaveEnds(i)
			if m.startX < far {
				now.add(-m.slowTime(near-1, far-1))
			}
			continue
		}
		t.each(i, func(c int) {
			t.age[c] = now.value()
			now.add(-steps[c])
		})
	}
}

// octaveEnds returns x at an octave's end nearest today, and at the other.
func octaveEnds(i int) (near, far float64) {
	low := math.Ldexp(1, i+firstOctave)
	if low < 1 {
		return 2 * low, low
	}
	return low, 2 * low
}

// newPolynomials returns n of them, the first of them NaN.
func newPolynomials(n int) []polynomial {
	p := make([]polynomial, n)
	for i := range p[0] {
		p[0][i] = math.NaN()
	}
	return p
}

// tabulate makes the polynomials of a smooth function of D_C.
func (m *Model) tabulate(f func(i float64) float64) []polynomial {
	t := &m.past
	out := newPolynomials(len(t.cells))
	var values [order]float64
	for c := 1; c < len(t.cells); c++ {
		w := t.cells[c].width
		for j, s := range chebyshev.node {
			values[j] = f(t.distance[c].at(s * w))
		}
		v := newFit(&values)
		out[c] = v.expand(w, order)
	}
	return out
}

// buildTransverse tabulates D_M by its derivative C_k/E, so that it keeps its
// digits near z = 0.
func (m *Model) buildTransverse() {
	t := &m.past
	t.transverse = newPolynomials(len(t.cells))
	var values [order]float64
	for c := 1; c < len(t.cells); c++ {
		w := t.cells[c].width
		for j, s := range chebyshev.node {
			values[j] = m.e.slope(t.distance[c].at(s*w)) / t.nodes[c][j]
		}
		f := newFit(&values)
		t.transverse[c] = f.integral(m.e.transverse(t.distance[c][0]), w)
	}
}

// buildDrift tabulates (1+z) - E; in the two cells that touch z = 0, by its
// ratio to z, which does not cancel.
func (m *Model) buildDrift() {
	t := &m.past
	t.drift = newPolynomials(len(t.cells))
	var values [order]float64
	for c := 1; c < len(t.cells); c++ {
		w, edge := t.cells[c].width, t.cells[c].edge
		for j, s := range chebyshev.node {
			z := edge + float64(w*s)
			if edge == 0 {
				values[j] = m.slowDrift(z) / z
			} else {
				values[j] = (1 + z) - t.nodes[c][j]
			}
		}
		f := newFit(&values)
		if edge != 0 {
			t.drift[c] = f.expand(w, order)
			continue
		}
		ratio := f.expand(w, order-1)
		copy(t.drift[c][1:], ratio[:order-1])
	}
}
