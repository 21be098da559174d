package demo

import (
	"math"
	"sort"
	"sync"
	"testing"

	"gonum.org/v1/gonum/integrate/quad"
	"gonum.org/v1/gonum/interp"
)

// What the tests below know of the universe comes from here and gonum, not
// from the packages that made the survey.
//
// The cosmology is that of Planck 2018 results VI, table 2, last column, with
// radiation, and with neutrinos counted as two massless species and one of 0.06
// eV that has long become matter: right to 1e-5 in distance below z = 0.6.
const (
	outsideH0 = 67.66
	outsideDH = 299792.458 / outsideH0
)

func outsideE(z float64) float64 {
	const h2 = 0.6766 * 0.6766
	const gamma = 2.4728e-5 / h2 // T = 2.7255 K; common practice, no source
	const massless = gamma * (1 + 2*0.2271*3.046/3)
	const matter = 0.30964 + 0.06/93.14/h2
	x := 1 + z
	return math.Sqrt(matter*x*x*x + massless*x*x*x*x + 1 - matter - massless)
}

// outsideDistance returns D_C in Mpc, by a spline through 1200 quadratures: right
// to 1e-9.
func outsideDistance(z float64) float64 { return outsideDH * outsideSpline().Predict(z) }

var outsideSpline = sync.OnceValue(func() *interp.AkimaSpline {
	var z, d []float64
	for i := range 1200 {
		z = append(z, 0.001*float64(i))
		d = append(d, quad.Fixed(func(t float64) float64 { return 1 / outsideE(t) }, 0, z[i], 20, nil, 0))
	}
	s := new(interp.AkimaSpline)
	if err := s.Fit(z, d); err != nil {
		panic(err)
	}
	return s
})

func outsideModulus(z, zobs float64) float64 {
	return 5*math.Log10(outsideDistance(z)*(1+zobs)) + 25
}

// alphas are the power laws of the templates, mag per dex as documented.
var alphas = map[string]float64{"E": -2.2, "Sbc": -1.6, "Im": -0.9}

var shares = map[string]float64{"E": 0.35, "Sbc": 0.40, "Im": 0.25}

// offset is mu + K + e in r at rest.
func offset(z, zobs float64, template string) float64 {
	return outsideModulus(z, zobs) - 2.5*(1+alphas[template])*math.Log10(1+zobs) - 0.8*(z-0.1)
}

// outsideSchechter is the luminosity function per mag, without phi* (Schechter
// 1976).
func outsideSchechter(m float64) float64 {
	x := math.Pow(10, 0.4*(-20.8-m))
	return 0.4 * math.Ln10 * math.Pow(x, -1.1+1) * math.Exp(-x)
}

// farthest returns the redshift, at most high, at which a galaxy of absolute
// magnitude m has the corrected magnitude limit; ratio is (1+z_obs)/(1+z_cos).
func farthest(m, limit, high, ratio float64, template string) float64 {
	seen := func(z float64) bool { return m+offset(z, ratio*(1+z)-1, template) < limit }
	if seen(high) {
		return high
	}
	low := 1e-4
	for range 45 {
		if middle := (low + high) / 2; seen(middle) {
			low = middle
		} else {
			high = middle
		}
	}
	return low
}

// kolmogorov returns the largest distance between the cumulative distribution
// of x and cdf, times the square root of the number: by chance it exceeds 1.63
// once in a hundred times (Kolmogorov 1933; Smirnov 1948, table).
func kolmogorov(x []float64, cdf func(float64) float64) float64 {
	sort.Float64s(x)
	n, worst := float64(len(x)), 0.0
	for i, v := range x {
		p := cdf(v)
		worst = max(worst, p-float64(i)/n, float64(i+1)/n-p)
	}
	return worst * math.Sqrt(n)
}

// cumulative tabulates the integral of f from a to b, scaled to end at 1, and
// returns it with the integral.
func cumulative(f func(float64) float64, a, b float64, steps int) (cdf func(float64) float64, total float64) {
	sums := make([]float64, steps+1)
	h := (b - a) / float64(steps)
	for i := range steps {
		sums[i+1] = sums[i] + quad.Fixed(f, a+float64(i)*h, a+float64(i+1)*h, 4, nil, 0)
	}
	total = sums[steps]
	return func(x float64) float64 {
		p := min(max((x-a)/h, 0), float64(steps)-1e-9)
		i := int(p)
		return (sums[i] + (sums[i+1]-sums[i])*(p-float64(i))) / total
	}, total
}

func normal(x float64) float64 { return 0.5 * math.Erfc(-x/math.Sqrt2) }

// checkPulls tests that pulls have mean 0 and width 1 within 3 standard errors
// and look normal.
func checkPulls(t *testing.T, what string, pulls []float64) {
	t.Helper()
	n := float64(len(pulls))
	mean, square := 0.0, 0.0
	for _, p := range pulls {
		mean += p / n
	}
	for _, p := range pulls {
		square += (p - mean) * (p - mean) / n
	}
	width := math.Sqrt(square)
	ks := kolmogorov(pulls, normal)
	t.Logf("%s: %d pulls, mean %+.4f ± %.4f, width %.4f ± %.4f, KS %.2f", what, len(pulls), mean, 1/math.Sqrt(n), width, 1/math.Sqrt(2*n), ks)
	if !(math.Abs(mean) < 3/math.Sqrt(n)) || !(math.Abs(width-1) < 3/math.Sqrt(2*n)) || !(ks < 1.63) {
		t.Errorf("%s: %d pulls with mean %.4f, width %.4f, KS %.2f: want 0 ± %.4f, 1 ± %.4f, below 1.63", what, len(pulls), mean, width, ks, 3/math.Sqrt(n), 3/math.Sqrt(2*n))
	}
}
