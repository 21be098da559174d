package cosmo

import (
	"math"
	"math/bits"
	"sync"
)

// A Quadrature answers for a [Model] as the Model itself does, but by the
// integrals of [Model.Direct] instead of its cells: some thousand times slower,
// and sharing nothing with them. It proves outputs and never makes them. Any
// number of goroutines may use one at once.
type Quadrature struct {
	*Model
	d       direct
	horizon func() float64 // event horizon, Mpc
	now     func() float64 // age today, t_H
}

// Quadrature returns the model by quadrature.
func (m *Model) Quadrature() *Quadrature {
	q := &Quadrature{Model: m, d: direct{m: m}}
	for i := range m.e.massive {
		q.d.neutrinos = append(q.d.neutrinos, newEnergyCurve(&m.e.massive[i]))
	}
	q.horizon = sync.OnceValue(func() float64 {
		if !m.horizon {
			return math.Inf(1)
		}
		_, radius := q.d.shrunk(1, 1)
		return m.hubbleDistance * radius[0]
	})
	q.now = sync.OnceValue(func() float64 { return q.d.age(0) })
	q.d.ahead = sync.OnceValue(func() shrinking {
		x, radius := q.d.shrunk(1, leastAhead)
		return shrinking{x, radius, q.now()}
	})
	return q
}

// EventHorizon is described at [Model.EventHorizon].
func (q *Quadrature) EventHorizon() float64 { return q.horizon() }

// Prepare does nothing: there are no tables.
func (q *Quadrature) Prepare(Quantity) {}

// At returns one quantity at one redshift; see [Model.At].
func (q *Quadrature) At(one Quantity, z float64) float64 { return q.at(one, z).of(one) }

// at returns the values in set at z; the others are 0.
func (q *Quadrature) at(set Quantity, z float64) (v Values) {
	if !q.Model.holds(z) {
		return noValues()
	}
	d := q.d
	if set&(DC|DM|Slope|Volume|ContactLost) != 0 {
		v.DC = d.distance(z)
	}
	if set&(DM|Slope|Volume) != 0 {
		v.DM, v.Slope, v.Volume = d.geometry(v.DC, z > 0)
	}
	if set&E != 0 {
		v.E = d.rate(1 + z)
	}
	if set&Lookback != 0 {
		v.Lookback = d.lookback(z)
	}
	if set&Age != 0 {
		v.Age = q.age(z)
	}
	if set&Drift != 0 {
		v.Drift = q.drift(z)
	}
	if set&ContactLost != 0 {
		v.ContactLost = d.contactLost(z, v.DC)
	}
	return v
}

// age saves the way to the big bang where the difference to the age today
// loses no digits.
func (q *Quadrature) age(z float64) float64 {
	if z > 1 {
		return q.d.age(z)
	}
	return q.now() - q.d.lookback(z)
}

// drift saves the integral where (1+z) and E are no nearly equal numbers.
func (q *Quadrature) drift(z float64) float64 {
	if math.Abs(z) < 0.1 {
		return q.d.drift(z)
	}
	return (1 + z) - q.d.rate(1+z)
}

// of returns the value of one quantity.
func (v Values) of(q Quantity) float64 {
	return [...]float64{v.DC, v.DM, v.Slope, v.E, v.Lookback, v.Age, v.Volume, v.Drift, v.ContactLost}[bits.TrailingZeros16(uint16(q))]
}

// Fill computes the quantities in set for each redshift of z; see [Model.Fill].
func (q *Quadrature) Fill(b *Base, set Quantity, z []float64) {
	if set&(DM|Volume) != 0 {
		set |= DC
	}
	n := len(z)
	b.Z, b.X = z, grow(b.X, n)
	for one := DC; one <= ContactLost; one <<= 1 {
		if set&one != 0 {
			s := b.own(one)
			*s = grow(*s, n)
		}
	}
	if set&DM != 0 {
		b.DM = b.ownDM
	}
	for i, at := range z {
		b.X[i] = 1 + at
		v := q.at(set, at)
		for one := DC; one <= ContactLost; one <<= 1 {
			if set&one != 0 {
				(*b.own(one))[i] = v.of(one)
			}
		}
	}
}

// own returns where b keeps the memory of a quantity.
func (b *Base) own(q Quantity) *[]float64 {
	return [...]*[]float64{&b.DC, &b.ownDM, &b.Slope, &b.E, &b.Lookback, &b.Age, &b.Volume, &b.Drift, &b.ContactLost}[bits.TrailingZeros16(uint16(q))]
}

// LogSlopeE fills out with d ln E/d ln(1+z) at the redshifts of a filled base.
func (q *Quadrature) LogSlopeE(out []float64, b *Base) {
	for i, z := range b.Z[:len(out)] {
		out[i] = math.NaN()
		if q.Model.holds(z) {
			out[i] = q.d.squaredSlope(1+z) * (1 + z) / (2 * q.d.squared(1+z))
		}
	}
}

// ContactLostSlope fills out with the derivative of [ContactLost] by ln(1+z):
// with 1+z_x where the horizon has shrunk to D_C, D_C(z_x) moves as D_C(z) does,
// so it is -(1+z)/(E(z) (1+z_x)).
func (q *Quadrature) ContactLostSlope(out []float64, b *Base) {
	for i, z := range b.Z[:len(out)] {
		out[i] = math.NaN()
		if q.Model.holds(z) {
			u := q.d.exit(z, q.d.distance(z))
			out[i] = -(1 + z) / (q.d.rate(1+z) * math.Exp(u))
		}
	}
}

// An energyCurve is the density of a species of neutrinos as a function of
// ln(1+z), interpolated: the sum over momenta takes ten times as long as
// everything else in E.
type energyCurve struct {
	omega float64
	low   float64 // ln x of the first knot
	knots []energyKnot
}

// An energyKnot is the logarithm of the density over omega x^3, and its slope
// times the distance of the knots.
type energyKnot struct{ value, slope float64 }

// The knots lie so close that cubics through values and slopes are right to
// 1e-13, and reach so far that beyond them the neutrinos are radiation, or
// matter, to the last digit.
const (
	energySteps = 1 << 13
	energyReach = 25 * math.Ln2 // to either side of where kT is the mass
	energyStep  = 2 * energyReach / energySteps
)

func newEnergyCurve(s *species) *energyCurve {
	c := &energyCurve{omega: s.omega, low: math.Log(s.y) - energyReach}
	for i := range energySteps + 1 {
		x := math.Exp(c.low + energyStep*float64(i))
		density, slope := massiveDensity(s, x)
		c.knots = append(c.knots, energyKnot{math.Log(density / s.omega / (x * x * x)), energyStep * (slope*x/density - 3)})
	}
	return c
}

// density returns the density at 1+z = x over today's critical one.
func (c *energyCurve) density(x float64) float64 {
	at := (math.Log(x) - c.low) / energyStep
	i := min(max(int(at), 0), energySteps-1)
	u := min(max(at-float64(i), 0), 1)
	p, q := &c.knots[i], &c.knots[i+1]
	rise := q.value - p.value
	v := p.value + u*(p.slope+u*((3*rise-2*p.slope-q.slope)+u*(p.slope+q.slope-2*rise)))
	if at > energySteps {
		v += (at - energySteps) * energyStep
	}
	return c.omega * x * x * x * math.Exp(v)
}
