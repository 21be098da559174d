package cosmo

import (
	"math"

	"catenrich/internal/exact"
)

// gauss is a Gauss-Legendre rule on [-1, 1].
type gauss struct{ node, weight []float64 }

// newGauss finds the rule of n nodes by Newton's method on the Legendre
// polynomial (Abramowitz & Stegun, eqs. 22.7.10 and 25.4.29). It is our own, not
// gonum's, because its bits reach the outputs.
func newGauss(n int) gauss {
	g := gauss{make([]float64, n), make([]float64, n)}
	for i := range n {
		x := exact.Cos(math.Pi * (float64(i) + 0.75) / (float64(n) + 0.5))
		var slope float64
		for range 8 {
			before, p := 1.0, x
			for k := 2; k <= n; k++ {
				before, p = p, (float64(float64(2*k-1)*x*p)-float64(float64(k-1)*before))/float64(k)
			}
			slope = float64(n) * (float64(x*p) - before) / (float64(x*x) - 1)
			x -= p / slope
		}
		g.node[i] = x
		g.weight[i] = 2 / ((1 - float64(x*x)) * slope * slope)
	}
	return g
}

var (
	coarse = newGauss(12)
	short  = newGauss(4)
)

// apply returns the integral of f from a to b by one panel of the rule.
func (g *gauss) apply(f func(float64) float64, a, b float64) float64 {
	middle, half := float64(0.5*(a+b)), float64(0.5*(b-a))
	sum := 0.0
	for i, x := range g.node {
		sum += float64(g.weight[i] * f(middle+float64(half*x)))
	}
	return float64(sum * half)
}

// mostPanels bounds the halvings of one integral: an integrand so close to a
// singularity that its rounding errors show would otherwise be halved for ever.
const mostPanels = 600

// integrate returns the integral of f from a to b, halving panels until a
// panel and its two halves agree to about 1e-15 of the whole. The order of the
// sums is fixed.
func integrate(f func(float64) float64, a, b float64) float64 {
	whole := coarse.apply(f, a, b)
	left := mostPanels
	return refine(f, a, b, whole, math.Abs(whole), &left)
}

func refine(f func(float64) float64, a, b, whole, size float64, panels *int) float64 {
	middle := float64(0.5 * (a + b))
	left, right := coarse.apply(f, a, middle), coarse.apply(f, middle, b)
	sum := left + right
	size = max(size, math.Abs(sum))
	*panels--
	if d := math.Abs(sum - whole); !(d > 1e-15*size) || *panels < 0 {
		return sum
	}
	return refine(f, a, middle, left, size, panels) + refine(f, middle, b, right, size, panels)
}

// integrateOut returns the integral of f from u to +Inf (step > 0) or to -Inf
// (step < 0), for an integrand that dies away: by panels that double until
// three in a row add nothing.
func integrateOut(f func(float64) float64, u, step float64) float64 {
	sum, idle := 0.0, 0
	for range 60 {
		part := integrate(f, u, u+step)
		u += step
		step *= 1.5
		sum += part
		if math.Abs(part) <= 1e-18*math.Abs(sum) {
			idle++
		} else {
			idle = 0
		}
		if idle == 3 {
			break
		}
	}
	return math.Abs(sum)
}
