package cosmo

import (
	"math"

	"catenrich/internal/exact"
)

// The contact-lost age of an object at D_C(z) is the age t(x) at which the
// event horizon, G(x) = int_0^x dx'/E in comoving measure, has shrunk to
// D_C(z). For small z, x = 1+z_x is of the size of z, so everything here is in x
// or u = ln x and integrals start at x = 0: 1+z_x is never formed by adding 1.

// A horizonGrid holds G and the time from today at places u, going down from
// u = 0.
type horizonGrid struct {
	u, g, time []float64
	total      float64 // G today: the event horizon over D_H
}

// buildHorizonGrid sums G from below.
func (m *Model) buildHorizonGrid() *horizonGrid {
	h := &horizonGrid{u: []float64{0}, time: []float64{0}}
	var parts []float64
	for u := 0.0; ; {
		next := u - max(0.5, -u/16)
		part := integrate(m.e.distanceIntegrand, next, u)
		h.time = append(h.time, h.time[len(h.time)-1]+integrate(m.e.timeIntegrand, next, u))
		h.u = append(h.u, next)
		parts = append(parts, part)
		u = next
		if part == 0 || m.e.wa3 == 0 && m.e.others(u) < 1e-18 {
			break
		}
	}
	h.g = make([]float64, len(h.u))
	last := len(h.u) - 1
	sum := total{sum: m.e.tail(h.u[last])}
	h.g[last] = sum.value()
	for j := last - 1; j >= 0; j-- {
		sum.add(parts[j])
		h.g[j] = sum.value()
	}
	h.total = h.g[0]
	return h
}

// others returns the size at u of all else in E^2 over dark energy, for wa = 0.
func (e *expansion) others(u float64) float64 {
	sum := float64(math.Abs(e.curvature) * exact.Exp((2-e.power)*u))
	sum += float64(e.matter * exact.Exp((3-e.power)*u))
	sum += float64(e.radiation * exact.Exp((4-e.power)*u))
	for i := range e.massive {
		p, v := e.massive[i].stretched(u)
		sum += float64(v * exact.Exp((p-e.power)*u))
	}
	return sum / e.dark
}

// tail returns G at u where dark energy of constant w is all there is; 0 for
// wa > 0, whose G has vanished there.
func (e *expansion) tail(u float64) float64 {
	if e.wa3 != 0 {
		return 0
	}
	s := 1 - float64(0.5*e.power)
	return exact.Exp(s*u) / (s * math.Sqrt(e.dark))
}

// solve returns u and the time from today (t_H) where G = g, for
// 0 < g <= G today; NaN where float64 cannot hold it.
func (h *horizonGrid) solve(m *Model, g float64) (u, time float64) {
	last := len(h.u) - 1
	if g < h.g[last] {
		return h.solveTail(m, g)
	}
	j := 0
	for j+1 < last && h.g[j+1] > g {
		j++
	}
	low, high := h.u[j+1], h.u[j]
	u = high
	value := h.g[j]
	for range 100 {
		step := exact.Log(g/value) * value / m.e.distanceIntegrand(u)
		next := u + step
		if !(low <= next && next <= high) {
			next = 0.5 * (low + high)
		}
		if math.Abs(next-u) <= 4e-16*max(1, math.Abs(u)) {
			break
		}
		u = next
		value = h.g[j+1] + integrate(m.e.distanceIntegrand, h.u[j+1], u)
		if value > g {
			high = u
		} else {
			low = u
		}
	}
	return u, h.time[j] + integrate(m.e.timeIntegrand, u, h.u[j])
}

// solveTail is solve where dark energy is all there is and
// G = e^(s u)/(s sqrt(O_de)), s = 1 - power/2.
func (h *horizonGrid) solveTail(m *Model, g float64) (u, time float64) {
	if m.e.wa3 != 0 {
		return math.NaN(), math.NaN()
	}
	last := len(h.u) - 1
	half := float64(0.5 * m.e.power)
	s := 1 - half
	root := math.Sqrt(m.e.dark)
	u = (exact.Log(g) + exact.Log(s*root)) / s
	// int_u^ul e^(-half u') du'/root
	span := h.u[last] - u
	time = span
	if half != 0 {
		time = exact.Expm1(half*span) / half
	}
	return u, h.time[last] + float64(time*exact.Exp(-half*h.u[last])/root)
}

// slowContactLost finds one contact-lost age.
func (m *Model) slowContactLost(z float64) float64 {
	if !m.horizon || !m.aging || !(z > 0 && z <= MaxRedshift) {
		return math.NaN()
	}
	h := m.future.grid()
	g := m.At(DC, z)
	if g > h.total {
		return m.At(Age, m.invertDistance(g-h.total, 0, z, 0.5*z))
	}
	_, time := h.solve(m, g)
	if age := m.scalars().age + time; age <= math.MaxFloat64 {
		return age
	}
	return math.NaN()
}

// invertDistance returns the z between low and high where D_C/D_H = d, by
// Newton's method from a guess, kept within the bracket.
func (m *Model) invertDistance(d, low, high, z float64) float64 {
	for range 200 {
		miss := m.value(DC, z) - d
		if miss > 0 {
			high = z
		} else {
			low = z
		}
		next := z - float64(miss*m.value(E, z))
		if !(low <= next && next <= high) {
			next = 0.5 * (low + high)
		}
		if math.Abs(next-z) <= 2e-16*max(math.Abs(z), 0.1) {
			return next
		}
		z = next
	}
	return z
}
