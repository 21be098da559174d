package cosmo

import (
	"math"

	"catenrich/internal/exact"
)

// slope evaluates the derivative of the polynomial.
func (p *polynomial) slope(t float64) float64 {
	s := float64(7 * p[7])
	for i := order - 2; i > 0; i-- {
		s = float64(float64(i)*p[i]) + float64(t*s)
	}
	return s
}

// slowStep is the step of ln(1+z) over which quantities that no cell holds are
// differenced: the cube root of the rounding balances it with the curvature.
const slowStep = 0x1p-17

// LogSlopeE fills out with d ln E/d ln(1+z) = 1 + q, q the deceleration
// parameter, for the rows of a base that [Model.Fill] has filled with E. It is
// the derivative of the cells' polynomials: good to 1e-10, which is ample for
// errors.
func (m *Model) LogSlopeE(out []float64, b *Base) {
	for i := range out {
		out[i] = m.past.rate[b.cell[i]].slope(b.t[i]) * b.X[i] / b.E[i]
	}
	for _, i := range b.slow {
		z := b.Z[i]
		d := float64(slowStep * (1 + z))
		out[i] = (m.slowRate(z+d) - m.slowRate(z-d)) / (2 * slowStep) / b.E[i]
	}
}

// ContactLostSlope fills out with the derivative of [ContactLost] by ln(1+z),
// in Hubble times, for the rows of a filled base: NaN where there is none.
func (m *Model) ContactLostSlope(out []float64, b *Base) {
	m.Prepare(ContactLost)
	for i, z := range b.Z {
		out[i] = m.contactLostSlope(z)
	}
}

func (m *Model) contactLostSlope(z float64) float64 {
	if m.future.ages == nil || !(z > 0 && z <= MaxRedshift) {
		return math.NaN()
	}
	bits := math.Float64bits(z)
	i := int(bits>>mantissa) - (1023 + firstLost)
	if i < 0 || m.future.octaves[i].slow {
		return m.slowContactLostSlope(z)
	}
	o := &m.future.octaves[i]
	p := &m.future.ages[o.first+int32(bits&(1<<mantissa-1)>>(o.shift&63))]
	return p.slope(z-math.Float64frombits(bits&o.mask)) * (1 + z)
}

// slowContactLostSlope is the slope at one redshift: with z_x where the event
// horizon has shrunk to D_C(z), D_C(z_x) moves as D_C(z) does, and so the age
// t(z_x) by -(1+z)/(E(z) (1+z_x)).
func (m *Model) slowContactLostSlope(z float64) float64 {
	h := m.future.grid()
	g := m.At(DC, z)
	var x float64
	if g > h.total {
		x = 1 + m.invertDistance(g-h.total, 0, z, 0.5*z)
	} else {
		u, _ := h.solve(m, g)
		x = exact.Exp(u)
	}
	return -(1 + z) / (m.At(E, z) * x)
}
