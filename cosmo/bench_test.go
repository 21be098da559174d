package cosmo

import (
	"math"
	"math/rand/v2"
	"testing"
)

// plausible draws n redshifts from n(z) ~ z^2 exp(-(z/0.4)^1.5), 0 < z < 2: the
// shape of a magnitude-limited survey (common practice, no source).
func plausible(n int) []float64 {
	r := rand.New(rand.NewPCG(20, 26))
	z := make([]float64, 0, n)
	for len(z) < n {
		v := 2 * r.Float64()
		if x := v / 0.4; r.Float64() < x*x*math.Exp(-math.Pow(x, 1.5)) {
			z = append(z, v)
		}
	}
	return z
}

// BenchmarkFill measures what the twelve columns of a survey need: distance,
// E, both times, and in curved space D_M and the volume too.
func BenchmarkFill(b *testing.B) {
	const batch = 2048
	base, _ := FindPreset("planck2018")
	curved := base.Params
	curved.Flat, curved.OmegaDE = false, 0.70
	closed := curved
	closed.OmegaDE = 0.68
	for _, c := range []struct {
		name   string
		params Params
		q      Quantity
	}{
		{"distance", base.Params, DC},
		{"flat", base.Params, DC | DM | E | Lookback | Age | Volume},
		{"closed", curved, DC | DM | E | Lookback | Age | Volume},
		{"open", closed, DC | DM | E | Lookback | Age | Volume},
		{"contactlost", base.Params, ContactLost},
	} {
		b.Run(c.name, func(b *testing.B) {
			m := mustNew(b, c.params)
			z := plausible(64 * batch)
			var base Base
			m.Fill(&base, c.q, z[:batch])
			b.SetBytes(8 * batch)
			b.ReportAllocs()
			at := 0
			for b.Loop() {
				m.Fill(&base, c.q, z[at:at+batch])
				at = (at + batch) % len(z)
			}
			b.ReportMetric(float64(batch*b.N)/b.Elapsed().Seconds(), "rows/s")
			b.ReportMetric(b.Elapsed().Seconds()*1e9/float64(batch*b.N), "ns/row")
		})
	}
}

// BenchmarkPrepare measures what a start costs.
func BenchmarkPrepare(b *testing.B) {
	base, _ := FindPreset("planck2018")
	curved := base.Params
	curved.Flat, curved.OmegaDE = false, 0.70
	for _, c := range []struct {
		name   string
		params Params
		q      Quantity
	}{
		{"new", base.Params, 0},
		{"base", base.Params, DC | E | Lookback | Age},
		{"curved", curved, DC | DM | Slope | E | Lookback | Age | Volume},
		{"everything", base.Params, everything},
	} {
		b.Run(c.name, func(b *testing.B) {
			for b.Loop() {
				m := mustNew(b, c.params)
				if c.q != 0 {
					m.Prepare(c.q)
				}
			}
		})
	}
}
