package cosmo

import (
	"math"

	"catenrich/internal/exact"
)

// pastScalars are the integrals to z = +Inf, in units of t_H and D_H.
type pastScalars struct{ age, particle float64 }

// specialRedshifts are the places in the past where a surface lies, NaN for
// none.
type specialRedshifts struct{ hubbleSphere, recessionAtEmission, eventHorizon float64 }

// findPast integrates from today to the big bang.
func (m *Model) findPast() pastScalars {
	s := pastScalars{math.Inf(1), math.Inf(1)}
	if m.aging {
		s.age = m.ageFrom(0)
	}
	if m.bounded {
		s.particle = integrateOut(m.e.distanceIntegrand, 0, 1)
	}
	return s
}

// ageFrom returns the age at u = ln(1+z) in t_H, from the far end.
func (m *Model) ageFrom(u float64) float64 {
	return integrateOut(m.e.timeIntegrand, u, 1)
}

// Age returns the time since the big bang in Gyr; +Inf where it diverges.
// Source: Hogg 1999, eq. 30 at z = 0.
func (m *Model) Age() float64 { return float64(m.hubbleTime * m.scalars().age) }

// ParticleHorizon returns the distance today, in Mpc, of the farthest matter
// whose light can have reached us; +Inf where it diverges.
// Source: Davis & Lineweaver 2004, PASA 21, 97, eq. 27.
func (m *Model) ParticleHorizon() float64 { return float64(m.hubbleDistance * m.scalars().particle) }

// EventHorizon returns the distance today, in Mpc, beyond which no signal sent
// now from here ever arrives; +Inf where there is no such distance, as in a
// model that turns around.
// Source: Davis & Lineweaver 2004, PASA 21, 97, eq. 26.
func (m *Model) EventHorizon() float64 {
	if !m.horizon {
		return math.Inf(1)
	}
	return float64(m.hubbleDistance * m.future.grid().total)
}

// HubbleSphereRedshift returns the redshift of matter that recedes at c today,
// D_C = c/H0; NaN where there is none up to MaxRedshift.
func (m *Model) HubbleSphereRedshift() float64 { return m.special().hubbleSphere }

// RecessionAtEmissionRedshift returns the redshift of matter that receded at c
// when its light left, E D_C/((1+z) D_H) = 1; the smallest if there are
// several, NaN where there is none up to MaxRedshift.
func (m *Model) RecessionAtEmissionRedshift() float64 { return m.special().recessionAtEmission }

// EventHorizonRedshift returns the redshift of matter on the event horizon
// today; NaN where there is none up to MaxRedshift.
func (m *Model) EventHorizonRedshift() float64 { return m.special().eventHorizon }

// findSpecial looks for the three redshifts.
func (m *Model) findSpecial() specialRedshifts {
	m.Prepare(DC | E)
	s := specialRedshifts{eventHorizon: math.NaN()}
	s.hubbleSphere = firstRoot(func(z float64) float64 { return m.At(DC, z) - 1 })
	s.recessionAtEmission = firstRoot(func(z float64) float64 {
		return m.At(DC, z) - (1+z)/m.At(E, z)
	})
	if m.horizon {
		limit := m.future.grid().total
		s.eventHorizon = firstRoot(func(z float64) float64 { return m.At(DC, z) - limit })
	}
	return s
}

// firstRoot returns the smallest z in (0, MaxRedshift] where f, negative at 0,
// turns positive, to the last bits; NaN if a scan by 1 % in 1+z finds none.
func firstRoot(f func(float64) float64) float64 {
	low := 0.0
	for u := 0.01; ; u += 0.01 {
		high := min(exact.Expm1(u), MaxRedshift)
		if f(high) >= 0 {
			return bisect(f, low, high)
		}
		if high == MaxRedshift {
			return math.NaN()
		}
		low = high
	}
}

// bisect halves [low, high] until no number lies between; f(high) >= 0.
func bisect(f func(float64) float64, low, high float64) float64 {
	for range 200 {
		middle := 0.5 * (low + high)
		if middle <= low || middle >= high {
			break
		}
		if f(middle) >= 0 {
			high = middle
		} else {
			low = middle
		}
	}
	return high
}
