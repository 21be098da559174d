package cosmo

import (
	"math"
	"sync"

	"gonum.org/v1/gonum/integrate/quad"
)

// Direct returns all quantities at z by a path that shares nothing with the
// cells but the densities: gonum's Gauss-Legendre rule in s = (1+z)^(-1/2), in
// which matter and radiation are smooth down to the big bang, package math for
// the functions, another rule for the neutrinos' energy, the volume as
// 4 pi int D_M^2 dD_C, the drift as the integral of 1 - dE/dz and the
// contact-lost age by bracketing its root. It is right to about 1e-12 and takes
// milliseconds; its last bits may differ between machines, so it judges outputs
// and never makes them.
func (m *Model) Direct(z float64) Values {
	if !m.holds(z) {
		return noValues()
	}
	d := direct{m: m}
	v := Values{
		DC:       d.distance(z),
		E:        d.rate(1 + z),
		Lookback: d.lookback(z),
		Age:      d.age(z),
		Drift:    d.drift(z),
	}
	v.DM, v.Slope, v.Volume = d.geometry(v.DC, z > 0)
	v.ContactLost = d.contactLost(z, v.DC)
	return v
}

// holds reports whether rows at z have quantities.
func (m *Model) holds(z float64) bool {
	return z > MinRedshift && z <= MaxRedshift && !(m.turns && z <= m.turnAround)
}

// direct is the model as Direct sees it.
type direct struct {
	m *Model

	// Where many redshifts are asked for, else nil: the density of each massive
	// species, and how the event horizon shrinks from today on.
	neutrinos []*energyCurve
	ahead     func() shrinking
}

// shrinking is what direct.shrunk returns from today on for places as near as
// leastAhead, and the age today.
type shrinking struct {
	x, radius []float64
	now       float64
}

const leastAhead = 1e-12

// legendre integrates f from a to b by one panel.
func legendre(f func(float64) float64, a, b float64) float64 {
	middle, half := (a+b)/2, (b-a)/2
	sum := 0.0
	for i, x := range legendreRule.node {
		sum += legendreRule.weight[i] * f(middle+half*x)
	}
	return sum * half
}

// legendreRule is gonum's rule of 24 nodes.
var legendreRule = func() gauss {
	g := gauss{make([]float64, 24), make([]float64, 24)}
	quad.Legendre{}.FixedLocations(g.node, g.weight, -1, 1)
	return g
}()

// energyNodes is a rule for the Fermi-Dirac energy integral: Gauss-Legendre in
// the momentum over panels that double from 2^-16 to 64.
var energyNodes = sync.OnceValue(func() (nodes []momentum) {
	x, w := make([]float64, 16), make([]float64, 16)
	low := 0.0
	for high := 0x1p-16; high <= 64; high *= 2 {
		quad.Legendre{}.FixedLocations(x, w, low, high)
		for i, p := range x {
			nodes = append(nodes, momentum{p * p, w[i] * p * p / (math.Exp(p) + 1) * 120 / (7 * math.Pow(math.Pi, 4))})
		}
		low = high
	}
	return nodes
})

// massiveDensity returns a species' density at x and its derivative.
func massiveDensity(s *species, x float64) (density, slope float64) {
	var sum, rise float64
	for _, n := range energyNodes() {
		root := math.Sqrt(n.p2*x*x + s.y*s.y)
		sum += n.weight * root
		rise += n.weight * n.p2 * x / root
	}
	x3 := x * x * x
	return s.omega * x3 * sum, s.omega * (3*x*x*sum + x3*rise)
}

// squared returns E^2.
func (d direct) squared(x float64) float64 {
	e := &d.m.e
	sum := e.matter*x*x*x + e.curvature*x*x + e.radiation*x*x*x*x + e.dark*d.dark(x)
	for i := range e.massive {
		if d.neutrinos != nil {
			sum += d.neutrinos[i].density(x)
			continue
		}
		v, _ := massiveDensity(&e.massive[i], x)
		sum += v
	}
	return sum
}

// dark returns f(z).
func (d direct) dark(x float64) float64 {
	p := &d.m.params
	if p.W0 == -1 && p.Wa == 0 {
		return 1
	}
	return math.Exp(3*(1+p.W0+p.Wa)*math.Log(x) - 3*p.Wa*(x-1)/x)
}

// squaredSlope returns dE^2/dz.
func (d direct) squaredSlope(x float64) float64 {
	e, p := &d.m.e, &d.m.params
	w := p.W0 + p.Wa*(x-1)/x
	sum := 3*e.matter*x*x + 2*e.curvature*x + 4*e.radiation*x*x*x + e.dark*d.dark(x)*3*(1+w)/x
	for i := range e.massive {
		_, v := massiveDensity(&e.massive[i], x)
		sum += v
	}
	return sum
}

func (d direct) rate(x float64) float64 { return math.Sqrt(d.squared(x)) }

// between integrates f(1+z) dz from 0 to z, cutting the range until twice as
// many panels change nothing.
func (d direct) between(z float64, f func(x float64) float64) float64 {
	if d.m.turns && z < 0 {
		return d.towardTurn(z, f)
	}
	if math.Abs(z) < 1e-20 {
		return z * f(1) // and panels of a denormal would be empty
	}
	u := math.Log1p(z)
	integrand := func(below float64) float64 { // below = 1 - s
		s := 1 - below
		return 2 * f(1/(s*s)) / (s * s * s)
	}
	return converge(int(math.Abs(u)/0.7)+1, func(n int) (sum float64) {
		for k := range n {
			sum += legendre(integrand, -math.Expm1(-u/2*float64(k)/float64(n)), -math.Expm1(-u/2*float64(k+1)/float64(n)))
		}
		return sum
	})
}

// towardTurn is between for z < 0 in a model that turns around at z0: with
// z = z0 cos^2(a), in which 1/E stays finite.
func (d direct) towardTurn(z float64, f func(x float64) float64) float64 {
	z0 := d.m.turnAround
	end := math.Asin(math.Sqrt(z / z0)) // measured from today, where z = z0 sin^2
	integrand := func(a float64) float64 {
		sin, cos := math.Sincos(a)
		return f(1+z0*sin*sin) * 2 * z0 * sin * cos
	}
	return converge(4, func(n int) (sum float64) {
		for k := range n {
			sum += legendre(integrand, end*float64(k)/float64(n), end*float64(k+1)/float64(n))
		}
		return sum
	})
}

// converge doubles n from its start until the sum stands still.
func converge(n int, sum func(n int) float64) float64 {
	last := sum(n)
	for range 7 {
		n *= 2
		next := sum(n)
		if math.Abs(next-last) <= 2e-14*math.Abs(next) {
			return next
		}
		last = next
	}
	return last
}

func (d direct) distance(z float64) float64 {
	return d.between(z, func(x float64) float64 { return 1 / d.rate(x) })
}

func (d direct) lookback(z float64) float64 {
	return d.between(z, func(x float64) float64 { return 1 / (x * d.rate(x)) })
}

// drift integrates 1 - dE/dz.
func (d direct) drift(z float64) float64 {
	return d.between(z, func(x float64) float64 { return 1 - d.squaredSlope(x)/(2*d.rate(x)) })
}

// age integrates over s from the big bang at s = 0, by panels that halve.
func (d direct) age(z float64) float64 {
	if !d.m.aging {
		return math.NaN()
	}
	if z != z {
		return z
	}
	if z < 0 {
		return d.age(0) - d.lookback(z)
	}
	integrand := func(s float64) float64 { return 2 / (s * d.rate(1/(s*s))) }
	sum := 0.0
	for high := 1 / math.Sqrt(1+z); high > 1e-30; high /= 2 {
		part := converge(1, func(n int) (sum float64) {
			step := high / 2 / float64(n)
			for k := range n {
				sum += legendre(integrand, high/2+step*float64(k), high/2+step*float64(k+1))
			}
			return sum
		})
		sum += part
		if part <= 1e-17*sum {
			break
		}
	}
	return sum
}

// geometry returns D_M, C_k and the volume.
func (d direct) geometry(dc float64, past bool) (dm, slope, volume float64) {
	k := d.m.e.curvature
	r := math.Sqrt(math.Abs(k))
	arc := func(i float64) float64 {
		switch {
		case k > 0:
			return math.Sinh(r*i) / r
		case k < 0:
			return math.Sin(r*i) / r
		}
		return i
	}
	dm, slope = arc(dc), 1
	end := dc
	switch {
	case k > 0:
		slope = math.Cosh(r * dc)
	case k < 0:
		slope = math.Cos(r * dc)
		end = math.Copysign(min(math.Abs(dc), math.Pi/r), dc)
		if past {
			dm = math.Abs(dm)
		}
	}
	return dm, slope, converge(1, func(n int) (sum float64) {
		for j := range n {
			sum += legendre(func(i float64) float64 { return 4 * math.Pi * arc(i) * arc(i) }, end*float64(j)/float64(n), end*float64(j+1)/float64(n))
		}
		return sum
	})
}

// tiniest is the 1+z below which E^2 might underflow.
const tiniest = 0x1p-250

// shrunk returns places 1+z = x that halve downward from high, and for each
// int_0^x dx'/E: the event horizon's comoving radius then, over D_H.
func (d direct) shrunk(high, least float64) (x, radius []float64) {
	var parts []float64
	rest := 0.0
	for x = []float64{high}; ; {
		part := d.radiusBetween(high/2, high)
		high /= 2
		x, parts = append(x, high), append(parts, part)
		if d.m.params.Wa == 0 {
			// dark energy alone: each further half adds a fixed share of the last
			rest = part / (math.Exp2(1-1.5*(1+d.m.params.W0)) - 1)
		}
		if high < 0x1p-30 && rest < 1e-16*least || part == 0 || high < tiniest {
			break
		}
	}
	radius = make([]float64, len(x))
	for k := len(parts); k >= 0; k-- {
		radius[k] = rest
		if k > 0 {
			rest += parts[k-1]
		}
	}
	return x, radius
}

// radiusBetween integrates dx/E.
func (d direct) radiusBetween(low, high float64) float64 {
	return converge(1, func(n int) (sum float64) {
		step := (high - low) / float64(n)
		for k := range n {
			sum += legendre(func(x float64) float64 { return 1 / d.rate(x) }, low+step*float64(k), low+step*float64(k+1))
		}
		return sum
	})
}

// contactLost returns the age when the event horizon has shrunk to dc.
func (d direct) contactLost(z, dc float64) float64 {
	u := d.exit(z, dc)
	if !(u < 0) {
		return d.age(math.Expm1(u))
	}
	later := d.until(max(u, alone))
	if u < alone { // where E = sqrt(O_de) x^p
		p := 1.5 * (1 + d.m.params.W0)
		rise := alone - u
		if p != 0 {
			rise = (math.Exp(-p*u) - math.Exp(-p*alone)) / p
		}
		later += rise / math.Sqrt(d.m.e.dark)
	}
	if later > math.MaxFloat64 {
		return math.NaN()
	}
	if d.ahead != nil {
		return d.ahead().now + later
	}
	return d.age(0) + later
}

// until returns the time from today until ln(1+z) = u < 0, integrated over u
// because s would be large.
func (d direct) until(u float64) float64 {
	return converge(int(-u/0.5)+1, func(n int) (sum float64) {
		for k := range n {
			sum += legendre(func(v float64) float64 { return 1 / d.rate(math.Exp(v)) }, u*float64(k+1)/float64(n), u*float64(k)/float64(n))
		}
		return sum
	})
}

// alone is ln(1+z) where constant dark energy is all that is left, unless it is
// so soft that others keep up with it; direct.exit has made sure of that.
const alone = -120.0

// exit finds ln(1+z_x) where the event horizon has shrunk to dc, by bisection
// that changes to Newton's method once close; NaN where there is no such place.
func (d direct) exit(z, dc float64) float64 {
	if !d.m.horizon || !d.m.aging || !(z > 0) {
		return math.NaN()
	}
	var x, radius []float64
	if d.ahead != nil && dc >= leastAhead && dc < d.ahead().radius[0] {
		x, radius = d.ahead().x, d.ahead().radius
	} else {
		x, radius = d.shrunk(1+z, dc)
	}
	j := 0
	for j+1 < len(x) && radius[j+1] > dc {
		j++
	}
	if last := math.Exp(alone); d.m.params.Wa == 0 && (j+1 == len(x) || x[j+1] < last) {
		p := 1.5 * (1 + d.m.params.W0)
		root := math.Sqrt(d.m.e.dark)
		if math.Abs(d.rate(last)/(root*math.Pow(last, p))-1) < 1e-13 {
			// dc = x^(1-p)/[(1-p) sqrt(O_de)], brought away from the denormals, of
			// which math.Log is wrong on amd64
			return (math.Log(dc*0x1p100*(1-p)*root) - 100*math.Ln2) / (1 - p)
		}
	}
	if j+1 == len(x) || x[j+1] < tiniest {
		return math.NaN() // dark energy so soft that the age is astronomical
	}
	low, high := math.Log(x[j+1]), math.Log(x[j])
	u := high
	for range 100 {
		at := math.Exp(u)
		here := radius[j+1] + d.radiusBetween(x[j+1], at)
		step := math.Log(dc/here) * here * d.rate(at) / at
		if here > dc {
			high = u
		} else {
			low = u
		}
		if math.Abs(step) < 1e-15*max(1, math.Abs(u)) {
			break
		}
		if u += step; !(low <= u && u <= high) {
			u = (low + high) / 2
		}
	}
	return u
}
