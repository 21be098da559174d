package cosmo

import "math"

// Fill computes the quantities in q for each redshift of z and stores them in
// b, whose slices it sets to len(z). It allocates nothing once b has held a
// batch as long. A redshift outside MinRedshift < z <= MaxRedshift, at or
// beyond the turn-around, or NaN has NaN for every quantity.
//
// b.Z aliases z; b.X holds 1+z; b.DM aliases b.DC in a flat model. Asking for DM or Volume
// fills DC as well.
func (m *Model) Fill(b *Base, q Quantity, z []float64) {
	m.Prepare(q)
	if q&(DM|Volume) != 0 {
		q |= DC
	}
	b.Z = z
	m.locate(b)
	t := &m.past
	if q&DC != 0 {
		b.DC = grow(b.DC, len(z))
		evaluate(b.DC, b, t.distance)
	}
	if q&E != 0 {
		b.E = grow(b.E, len(z))
		evaluate(b.E, b, t.rate)
	}
	switch q & (Lookback | Age) {
	case Lookback:
		b.Lookback = grow(b.Lookback, len(z))
		evaluate(b.Lookback, b, t.time)
	case Age, Lookback | Age:
		b.Lookback, b.Age = grow(b.Lookback, len(z)), grow(b.Age, len(z))
		evaluateTimes(b, t)
	}
	if q&Drift != 0 {
		b.Drift = grow(b.Drift, len(z))
		evaluate(b.Drift, b, t.drift)
	}
	if m.e.curvature == 0 {
		m.fillFlat(b, q)
	} else {
		m.fillCurved(b, q)
	}
	m.fillSlow(b, q)
	if q&ContactLost != 0 {
		b.ContactLost = grow(b.ContactLost, len(z))
		m.fillContactLost(b)
	}
}

// grow returns s with length n, reallocated only where it is too small.
func grow[T any](s []T, n int) []T {
	if cap(s) < n {
		return make([]T, n, n+n/4)
	}
	return s[:n]
}

// locate finds each row's cell.
func (m *Model) locate(b *Base) {
	n := len(b.Z)
	b.X, b.t, b.cell, b.slow = grow(b.X, n), grow(b.t, n), grow(b.cell, n), b.slow[:0]
	x, local, cells := b.X[:n], b.t[:n], b.cell[:n]
	t := &m.past
	lowest := t.lowest
	for i, z := range b.Z {
		x[i], local[i], cells[i] = 1+z, math.NaN(), 0
		if !(z > lowest && z <= MaxRedshift) {
			continue
		}
		bits := math.Float64bits(1 + z)
		o := &t.octaves[bits>>mantissa-(1023+firstOctave)]
		if o.slow {
			b.slow = append(b.slow, int32(i))
			continue
		}
		cells[i], local[i] = o.find(bits, z)
	}
}

// evaluate stores the quantity tabulated in p for each row.
func evaluate(out []float64, b *Base, p []polynomial) {
	local, cells := b.t[:len(out)], b.cell[:len(out)]
	for i := range out {
		out[i] = p[cells[i]].at(local[i])
	}
}

// evaluateTimes stores lookback and age, which share all but the first
// coefficient.
func evaluateTimes(b *Base, t *tables) {
	n := len(b.Z)
	lookback, age, local, cells := b.Lookback[:n], b.Age[:n], b.t[:n], b.cell[:n]
	p, first := t.time, t.age
	for i := range lookback {
		c := cells[i]
		rest := p[c].rest(local[i])
		lookback[i] = p[c][0] + rest
		age[i] = first[c] - rest
	}
}

// rest is at without the first coefficient.
func (p *polynomial) rest(t float64) float64 {
	return float64(t * (p[1] + float64(t*(p[2]+float64(t*(p[3]+float64(t*(p[4]+float64(t*(p[5]+float64(t*(p[6]+float64(t*p[7])))))))))))))
}

// fillFlat fills the geometry of flat space.
func (m *Model) fillFlat(b *Base, q Quantity) {
	n := len(b.Z)
	if q&DM != 0 {
		b.DM = b.DC
	}
	if q&Slope != 0 {
		b.Slope = grow(b.Slope, n)
		for i, c := range b.cell {
			if c == 0 {
				b.Slope[i] = math.NaN()
			} else {
				b.Slope[i] = 1
			}
		}
	}
	if q&Volume != 0 {
		b.Volume = grow(b.Volume, n)
		out, dc := b.Volume[:n], b.DC[:n]
		for i, d := range dc {
			out[i] = flatVolume(d)
		}
	}
}

// flatVolume returns 4 pi/3 d^3.
func flatVolume(d float64) float64 { return float64(4 * math.Pi / 3 * d * d * d) }

// fillCurved fills the geometry of curved space.
func (m *Model) fillCurved(b *Base, q Quantity) {
	n := len(b.Z)
	t := &m.past
	if q&DM != 0 {
		b.ownDM = grow(b.ownDM, n)
		b.DM = b.ownDM
		evaluate(b.DM, b, t.transverse)
		if m.e.curvature < 0 {
			for i, z := range b.Z {
				if z > 0 {
					b.DM[i] = math.Abs(b.DM[i])
				}
			}
		}
	}
	if q&Slope != 0 {
		b.Slope = grow(b.Slope, n)
		evaluate(b.Slope, b, t.slope)
	}
	if q&Volume != 0 {
		b.Volume = grow(b.Volume, n)
		evaluate(b.Volume, b, t.volume)
		limit, all := m.e.antipode()
		out, dc := b.Volume[:n], b.DC[:n]
		for i, d := range dc {
			out[i] = curvedVolume(d, out[i], limit, all)
		}
	}
}

// curvedVolume returns ratio d^3, or the whole volume past the antipode.
func curvedVolume(d, ratio, limit, all float64) float64 {
	if math.Abs(d) >= limit {
		return math.Copysign(all, d)
	}
	return float64(ratio * d * d * d)
}

// fillSlow fills the rows that no cell holds.
func (m *Model) fillSlow(b *Base, q Quantity) {
	for _, i := range b.slow {
		z := b.Z[i]
		for one := DC; one <= Drift; one <<= 1 {
			if q&one != 0 {
				b.slice(one)[i] = m.slowValue(one, z)
			}
		}
	}
}

// slice returns where b keeps a quantity.
func (b *Base) slice(q Quantity) []float64 {
	switch q {
	case DC:
		return b.DC
	case DM:
		return b.DM
	case Slope:
		return b.Slope
	case E:
		return b.E
	case Lookback:
		return b.Lookback
	case Age:
		return b.Age
	case Volume:
		return b.Volume
	case Drift:
		return b.Drift
	}
	return b.ContactLost
}

// slowValue integrates one quantity for one redshift.
func (m *Model) slowValue(q Quantity, z float64) float64 {
	switch q {
	case E:
		return m.slowRate(z)
	case Lookback:
		return m.slowTime(0, z)
	case Age:
		return m.slowAge(z)
	case Drift:
		return m.slowDrift(z)
	}
	d := m.slowDistance(0, z)
	switch q {
	case DM:
		s := m.e.transverse(d)
		if z > 0 {
			s = math.Abs(s)
		}
		return s
	case Slope:
		return m.e.slope(d)
	case Volume:
		limit, all := m.e.antipode()
		return curvedVolume(d, m.e.volumeRatio(d), limit, all)
	}
	return d
}

// At returns one quantity (a single bit of [Quantity]) at one redshift, from
// the same cells as [Model.Fill] and with the same bits.
func (m *Model) At(q Quantity, z float64) float64 {
	m.Prepare(q)
	switch {
	case !(z > m.past.lowest && z <= MaxRedshift):
		return math.NaN()
	case q == ContactLost:
		return m.contactLost(z)
	}
	return m.value(q, z)
}

// value is At for the quantities of the base tables' cells, whose tables have
// been built, anywhere between the cells' ends: beyond MaxRedshift too.
func (m *Model) value(q Quantity, z float64) float64 {
	t := &m.past
	c, l := t.locate(z)
	if c < 0 {
		return m.slowValue(q, z)
	}
	flat := m.e.curvature == 0
	switch {
	case q == DC || q == DM && flat:
		return t.distance[c].at(l)
	case q == DM:
		s := t.transverse[c].at(l)
		if z > 0 && m.e.curvature < 0 {
			s = math.Abs(s)
		}
		return s
	case q == Slope && flat:
		return 1
	case q == Slope:
		return t.slope[c].at(l)
	case q == E:
		return t.rate[c].at(l)
	case q == Lookback:
		return t.time[c].at(l)
	case q == Age:
		return t.age[c] - t.time[c].rest(l)
	case q == Volume && flat:
		return flatVolume(t.distance[c].at(l))
	case q == Volume:
		limit, all := m.e.antipode()
		return curvedVolume(t.distance[c].at(l), t.volume[c].at(l), limit, all)
	case q == Drift:
		return t.drift[c].at(l)
	}
	panic("cosmo: At wants one quantity")
}
