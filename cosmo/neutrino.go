package cosmo

import (
	"math"
	"sync"

	"catenrich/internal/exact"
)

// fermiDirac holds the nodes of the energy integral of a relic neutrino,
//
//	g(y) = (120/(7 pi^4)) int_0^inf p^2 sqrt(p^2 + y^2)/(e^p + 1) dp
//
// with momentum p in units of k T_nu and y = m c^2/(k T_nu), so that g(0) = 1.
// The trapezoidal rule in ln p converges exponentially, because the nearest
// singularities lie pi/2 off the real axis; at this step the error is below
// 1e-15 (at 1/4 it was 6e-14). The cut ends hold less than 1e-16.
//
// Source: Komatsu et al. 2011, ApJS 192, 18, eqs. 23 and 24. (Their fit, eq. 26, is
// wrong by up to 3e-3 and not used.)
var fermiDirac = sync.OnceValue(func() []momentum {
	const (
		step    = 0.1875
		first   = -67 // ln p = -12.6
		last    = 22  // ln p = 4.1
		sevenPi = 7 * pi2 * pi2
	)
	nodes := make([]momentum, 0, last-first+1)
	for i := first; i <= last; i++ {
		p := exact.Exp(step * float64(i))
		nodes = append(nodes, momentum{p * p, 120 * step / sevenPi * p * p * p / (exact.Exp(p) + 1)})
	}
	return nodes
})

// A momentum is a node of fermiDirac: p^2 and its weight.
type momentum struct{ p2, weight float64 }

// A species is the massive neutrinos of one mass.
type species struct {
	omega float64 // density today, were they massless
	y     float64 // m c^2/(k T_nu) today
}

// density returns the species' density at 1+z = x over today's critical one:
// omega x^4 g(y/x), written so that neither limit loses digits.
func (s *species) density(x float64) float64 {
	sum, x2, y2 := 0.0, float64(x*x), float64(s.y*s.y)
	for _, n := range fermiDirac() {
		sum += float64(n.weight * math.Sqrt(float64(n.p2*x2)+y2))
	}
	return float64(s.omega * sum * x2 * x)
}

// rise returns density(a+d) - density(a) without cancellation.
func (s *species) rise(a, d float64) float64 {
	b := a + d
	a2, b2, y2 := float64(a*a), float64(b*b), float64(s.y*s.y)
	squares := float64(d * (a + b))                // b^2 - a^2
	cubes := float64(d * (b2 + float64(a*b) + a2)) // b^3 - a^3
	var first, second float64
	for _, n := range fermiDirac() {
		ra, rb := math.Sqrt(float64(n.p2*a2)+y2), math.Sqrt(float64(n.p2*b2)+y2)
		first += float64(n.weight * rb)
		second += float64(n.weight * n.p2 / (ra + rb))
	}
	return float64(s.omega * (float64(cubes*first) + float64(a2*a*squares*second)))
}

// stretched returns density(e^u)/e^(pu), for any u: p = 4 where u > 0, else 3.
func (s *species) stretched(u float64) (p, value float64) {
	sum, y2 := 0.0, float64(s.y*s.y)
	p2, q2 := 1.0, y2 // at u > 0: sqrt(p^2 + (y/x)^2), below: sqrt(p^2 x^2 + y^2)
	if u > 0 {
		p, q2 = 4, float64(y2*exact.Exp(-2*u))
	} else {
		p, p2 = 3, exact.Exp(2*u)
	}
	for _, n := range fermiDirac() {
		sum += float64(n.weight * math.Sqrt(float64(n.p2*p2)+q2))
	}
	return p, float64(s.omega * sum)
}
