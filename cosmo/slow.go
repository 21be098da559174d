package cosmo

import (
	"math"

	"catenrich/internal/exact"
)

// Where a model is too sharp for cells (next to a turn-around, or where dark
// energy explodes as z nears -1) its quantities are integrated row by row. So
// are the integrals over such an octave that the cells beyond it stand on.

// slowDistance returns the integral of dz/E from z0 to z1.
func (m *Model) slowDistance(z0, z1 float64) float64 {
	return m.slowIntegral(z0, z1, m.e.distanceIntegrand, func(x float64) float64 { return 1 })
}

// slowTime returns the integral of dz/((1+z)E) from z0 to z1.
func (m *Model) slowTime(z0, z1 float64) float64 {
	return m.slowIntegral(z0, z1, m.e.timeIntegrand, func(x float64) float64 { return 1 / x })
}

// slowIntegral integrates over u = ln(1+z), but for what lies beyond half the
// way to a turn-around.
func (m *Model) slowIntegral(z0, z1 float64, integrand, weight func(float64) float64) float64 {
	if !m.turns || z1 >= 0.5*m.turnAround {
		return integrate(integrand, exact.Log1p(z0), exact.Log1p(z1))
	}
	half := min(z0, 0.5*m.turnAround)
	near := 0.0
	if half < z0 {
		near = integrate(integrand, exact.Log1p(z0), exact.Log1p(half))
	}
	return near + m.fromTurn(half, z1, weight)
}

// fromTurn integrates weight(x)/E where E falls to zero as sqrt(x - x0): over s
// with x = x0 + s^2, with E^2 as its rise from x0.
func (m *Model) fromTurn(z0, z1 float64, weight func(x float64) float64) float64 {
	integrand := func(s float64) float64 {
		d := float64(s * s)
		return 2 * s * weight(m.startX+d) / math.Sqrt(m.e.rise(m.startX, d))
	}
	return integrate(integrand, math.Sqrt(z0-m.turnAround), math.Sqrt(z1-m.turnAround))
}

// slowRate returns E.
func (m *Model) slowRate(z float64) float64 {
	if m.turns && z < 0 {
		return math.Sqrt(m.e.rise(m.startX, z-m.turnAround))
	}
	return math.Sqrt(m.e.squared(1 + z))
}

// slowDrift returns (1+z) - E; near z = 0 as ((1+z)^2 - E^2)/((1+z) + E), which
// does not cancel there.
func (m *Model) slowDrift(z float64) float64 {
	if math.Abs(z) > 0.5 {
		return (1 + z) - m.slowRate(z)
	}
	return (float64(z*(2+z)) - m.e.rise(1, z)) / ((1 + z) + m.slowRate(z))
}

// slowAge returns the age at z.
func (m *Model) slowAge(z float64) float64 {
	switch {
	case !m.aging:
		return math.NaN()
	case z >= 0:
		return m.ageFrom(exact.Log1p(z))
	}
	return m.scalars().age - m.slowTime(0, z)
}
