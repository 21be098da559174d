package photo

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"gonum.org/v1/gonum/integrate/quad"

	"catenrich/internal/fault"
	"catenrich/internal/status"
)

// sampled makes an SED of a function at n wavelengths, equal steps in ln λ.
func sampled(name string, from, to float64, n int, f func(w float64) float64) *Spectrum {
	wave, flux := make([]float64, n), make([]float64, n)
	for i := range n {
		wave[i] = from * math.Pow(to/from, float64(i)/float64(n-1))
		flux[i] = f(wave[i])
	}
	return newSpectrum(name, wave, flux)
}

func topHat(from, to float64, energy bool) *Bandpass {
	return newBandpass(fmt.Sprintf("%g to %g", from, to), []float64{from, to}, []float64{1, 1}, energy)
}

func mustSynthetic(t testing.TB, s Synthesis) *Synthetic {
	t.Helper()
	k, err := NewSynthetic(s)
	if err != nil {
		t.Fatal(err)
	}
	return k
}

// f_nu ~ nu^α is f_lambda ~ λ^(-2-α). With α = -1 and photon counting the
// integrand of a sampled power law is exact but for the sampling, so K is
// compared with the power law's own formula to 1e-6 mag.
func TestSyntheticOfPowerLaw(t *testing.T) {
	for _, alpha := range []float64{-2.5, -0.5, 1} {
		sed := sampled("power law", 900, 12000, 5000, func(w float64) float64 { return math.Pow(w/5000, -2-alpha) })
		for _, energy := range []bool{false, true} {
			for _, rest := range []float64{0, 0.7} {
				k := mustSynthetic(t, Synthesis{SED: sed, Band: topHat(5500, 7000, energy), RestRedshift: rest})
				law := PowerLaw{Alpha: alpha, Rest: rest}
				for z := 0.0; z < 5; z += 0.0137 {
					near(t, fmt.Sprintf("α %v, energy %v, rest %v: K(%.4f)", alpha, energy, rest, z), k.Value(z), law.Value(z), 1e-6, "Hogg et al. 2002 in closed form")
					near(t, fmt.Sprintf("α %v: slope at %.4f", alpha, z), k.Slope(z), law.Slope(z), 2e-4, "the same")
				}
			}
		}
	}
}

// K of any SED at z_r into the same band shifted to z_r is -2.5 log10(1+z_r):
// -0.10348 at 0.1 (analytic).
func TestSyntheticIntoShiftedBand(t *testing.T) {
	sed := sampled("wiggly", 2000, 11000, 3000, func(w float64) float64 { return 2 + math.Sin(w/90)*math.Cos(w/23) })
	k := mustSynthetic(t, Synthesis{SED: sed, Band: topHat(5500, 7000, false), RestRedshift: 0.1})
	near(t, "K(0.1)", k.Value(0.1), -0.10348, 5e-6, "published_checks.csv, as printed")
	near(t, "K(0.1)", k.Value(0.1), -2.5*math.Log10(1.1), 1e-6, "analytic")
}

// blackBody is B_lambda at T kelvin, up to a constant; w in Angstrom.
func blackBody(w, temperature float64) float64 {
	const hcOverK = 1.438776877e8 // Angstrom K, second radiation constant (CODATA 2018)
	return math.Pow(w/5000, -5) / math.Expm1(hcOverK/(w*temperature))
}

// A black body through two top-hats, from an observed band to another rest
// band, against gonum's quadrature of the black body itself.
func TestSyntheticOfBlackBody(t *testing.T) {
	const temperature = 5800
	sed := sampled("black body", 1500, 12000, 12000, func(w float64) float64 { return blackBody(w, temperature) })
	photons := func(a, b, x float64, f func(float64) float64) float64 {
		return quad.Fixed(func(w float64) float64 { return w * f(w/x) }, a, b, 200, nil, 0)
	}
	body := func(w float64) float64 { return blackBody(w, temperature) }
	ab := func(w float64) float64 { return 1 / (w * w) }
	k := mustSynthetic(t, Synthesis{SED: sed, Band: topHat(7000, 8200, false), RestBand: topHat(5500, 7000, false), RestRedshift: 0.05})
	zp := mustSynthetic(t, Synthesis{SED: sed, Band: topHat(7000, 8200, false), RestBand: topHat(5500, 7000, false), RestRedshift: 0.05,
		ZeroPoint: sampled("AB", 3000, 12000, 20000, ab)})
	for z := 0.0; z < 3.6; z += 0.05 {
		x := 1 + z
		// The rest band shifted by x_r: photons of λ_e through P(λ_e x_r).
		rest := photons(5500/1.05, 7000/1.05, 1, body)
		restAB := photons(5500/1.05, 7000/1.05, 1, ab)
		want := -2.5 * math.Log10(photons(7000, 8200, x, body)/x/photons(7000, 8200, 1, ab)*restAB/rest)
		near(t, fmt.Sprintf("K(%.2f)", z), k.Value(z), want, 2e-6, "gonum quadrature")
		near(t, fmt.Sprintf("K(%.2f), AB as an SED", z), zp.Value(z), want, 2e-6, "gonum quadrature")
	}
}

// An SED as unkind as they come: breaks, unresolved lines, noise, a gap.
func unkind(rng *rand.Rand) *Spectrum {
	s := sampled("unkind", 1100, 11000, 2500, func(w float64) float64 {
		f := 1 + 0.5*rng.Float64()
		if w < 4000 {
			f *= 0.3
		}
		if w > 2500 && w < 2600 {
			f = 0
		}
		return f
	})
	for range 12 {
		i := rng.IntN(len(s.flux))
		s.flux[i] += 400 * rng.Float64() // one point wide
	}
	return newSpectrum(s.Name, s.wave, s.flux)
}

// The promise of Synthetic: below 1e-4 mag for any SED, at points other than
// those where the table was made.
func TestSyntheticAccuracy(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 1))
	narrow := newBandpass("narrow", []float64{6560, 6570, 6600, 6610}, []float64{0, 1, 1, 0}, false)
	var wave, resp []float64
	for w := 5500.0; w <= 7000; w += 10 {
		wave, resp = append(wave, w), append(resp, rng.Float64())
	}
	ragged := newBandpass("ragged", wave, resp, false)
	for trial := range 2 {
		sed := unkind(rng)
		for _, band := range []*Bandpass{topHat(5500, 7000, false), narrow, ragged} {
			s := &synthesis{Synthesis: Synthesis{SED: sed, Band: band, RestBand: band}}
			k, err := NewSynthetic(s.Synthesis)
			if err != nil {
				t.Fatal(err)
			}
			if err := s.calibrate(); err != nil {
				t.Fatal(err)
			}
			worst, at := 0.0, 0.0
			for range 4000 {
				x := k.lo + (k.hi-k.lo)*rng.Float64()
				want, _ := s.direct(x)
				if d := math.Abs(k.Value(x-1) - want); !(d <= worst) {
					worst, at = d, x-1
				}
			}
			if !(worst < 1e-4) {
				t.Errorf("SED %d through %s: %.3g mag off the integral at z = %.6f", trial, band.Name, worst, at)
			}
			t.Logf("SED %d through %s: worst %.2g mag, %.2g while tabulating, %d pieces", trial, band.Name, worst, k.Worst(), len(k.coef))
		}
	}
}

// The integral and its slope against gonum and a difference quotient.
func TestIntegral(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 9))
	sed := unkind(rng)
	band := newBandpass("b", []float64{5000, 5200, 5900, 6000}, []float64{0, 0.8, 0.5, 0.1}, false)
	lin := func(xs, ys []float64, x float64) float64 {
		for i := 1; i < len(xs); i++ {
			if x <= xs[i] {
				return ys[i-1] + (x-xs[i-1])*(ys[i]-ys[i-1])/(xs[i]-xs[i-1])
			}
		}
		return 0
	}
	for _, x := range []float64{1, 1.3, 2.7} {
		// Many panels, each with a low order: the integrand has kinks.
		want, panels := 0.0, 40000
		for p := range panels {
			a := 5000 + 1000*float64(p)/float64(panels)
			want += quad.Fixed(func(w float64) float64 { return w * lin(sed.wave, sed.flux, w/x) * lin(band.wave, band.resp, w) }, a, a+1000/float64(panels), 3, nil, 0)
		}
		got, slope := band.integral(sed, x)
		near(t, "photons", got, want, 1e-6*want, "gonum quadrature")
		const h = 1e-6
		up, _ := band.integral(sed, x*(1+h))
		down, _ := band.integral(sed, x*(1-h))
		near(t, "slope by ln x", slope, (up-down)/(2*h), 2e-4*want, "difference quotient")
	}
}

func TestSyntheticRange(t *testing.T) {
	sed := sampled("short", 3000, 9000, 500, func(w float64) float64 { return 1 })
	k := mustSynthetic(t, Synthesis{SED: sed, Band: topHat(6000, 7000, false)})
	lo, hi := k.Range()
	near(t, "range", lo, 7000./9000-1, 1e-15, "band edge over SED edge")
	near(t, "range", hi, 1, 1e-15, "6000/3000 - 1")
	for _, z := range []float64{lo, 0, 0.5, hi} {
		if v := k.Value(z); v != v {
			t.Errorf("K(%v) is NaN inside the range", z)
		}
	}
	kk, st := make([]float64, 3), make([]int32, 3)
	slope := make([]float64, 3)
	Single(k).Fill(kk, slope, []float64{0.5, 1.0001, math.NaN()}, nil, st)
	if kk[0] != kk[0] || kk[1] == kk[1] || st[1] != status.Coverage || st[2] != 0 || kk[2] == kk[2] {
		t.Errorf("K %v, status %v", kk, st)
	}

	// Nothing below 4000 Angstrom: the range ends where the band leaves the light.
	dark := sampled("dark", 1000, 9000, 800, func(w float64) float64 {
		if w < 4000 {
			return 0
		}
		return 1
	})
	k = mustSynthetic(t, Synthesis{SED: dark, Band: topHat(6000, 7000, false)})
	if _, hi := k.Range(); !(hi > 0.7 && hi < 0.76) {
		t.Errorf("range ends at %v, want just under 7000/4000 - 1", hi)
	}
}

func TestSyntheticRefuses(t *testing.T) {
	flat := sampled("flat.csv", 4000, 8000, 100, func(w float64) float64 { return 1 })
	for _, c := range []struct {
		name string
		s    Synthesis
		says string
	}{
		{"band beyond the SED", Synthesis{SED: flat, Band: topHat(7500, 8500, false)}, "does not"},
		{"rest band beyond the SED", Synthesis{SED: flat, Band: topHat(6000, 7000, false), RestRedshift: 1}, "rest band"},
		{"other rest band", Synthesis{SED: flat, Band: topHat(6000, 7000, false), RestBand: topHat(3000, 3500, false)}, "covers it"},
		{"rest redshift", Synthesis{SED: flat, Band: topHat(6000, 7000, false), RestRedshift: -1}, "rest_band_redshift"},
		{"zero point", Synthesis{SED: flat, Band: topHat(6000, 7000, false), RestRedshift: 0.1, ZeroPoint: sampled("vega.csv", 6500, 9000, 9, func(float64) float64 { return 1 })}, "zero_point_sed"},
		{"observed band bluer than the SED", Synthesis{SED: flat, Band: topHat(3000, 3500, false), RestBand: topHat(6000, 7000, false)}, "not covered"},
	} {
		_, err := NewSynthetic(c.s)
		if err == nil || fault.Of(err) != fault.Config || c.name != "band beyond the SED" && !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s: %v, want a Config error with %q", c.name, err, c.says)
		}
	}
}

func BenchmarkNewSynthetic(b *testing.B) {
	sed := unkind(rand.New(rand.NewPCG(7, 1)))
	band := topHat(5500, 7000, false)
	for b.Loop() {
		mustSynthetic(b, Synthesis{SED: sed, Band: band})
	}
}
