package cosmo

import (
	"math"
	"testing"
)

// The derivatives against those of closed forms, and against the differences of
// the direct path.
func TestLogSlopeE(t *testing.T) {
	z := []float64{-0.9, -0.3, 0, 1e-6, 0.01, 0.3, 1, 3, 30, 1089, 9000}
	check := func(p Params, want func(x float64) float64, source string) {
		t.Helper()
		m, err := New(p)
		if err != nil {
			t.Fatal(err)
		}
		var b Base
		m.Fill(&b, E, z)
		got := make([]float64, len(z))
		m.LogSlopeE(got, &b)
		for i := range z {
			if w := want(1 + z[i]); math.Abs(got[i]-w) > 1e-9*math.Max(1, math.Abs(w)) {
				t.Errorf("%+v: d ln E/d ln(1+z) at z = %g is %.12g, want %.12g (%s)", p, z[i], got[i], w, source)
			}
		}
	}
	check(Params{H0: 70, OmegaM: 1, Flat: true, W0: -1}, func(float64) float64 { return 1.5 }, "Einstein-de Sitter, E = (1+z)^1.5")
	check(Params{H0: 70, OmegaM: 0.3, Flat: true, W0: -1}, func(x float64) float64 {
		return 1.5 * 0.3 * x * x * x / (0.3*x*x*x + 0.7)
	}, "flat matter and Lambda, differentiated by hand")
	check(Params{H0: 70, OmegaM: 0.3, OmegaDE: 0, W0: -1}, func(x float64) float64 {
		return (0.45*x*x*x + 0.7*x*x) / (0.3*x*x*x + 0.7*x*x)
	}, "open matter, differentiated by hand")
}

func TestContactLostSlope(t *testing.T) {
	preset, _ := FindPreset("planck2018")
	m, err := New(preset.Params)
	if err != nil {
		t.Fatal(err)
	}
	z := []float64{1e-9, 1e-4, 0.02, 0.5, 1.85, 3, 20, 1000}
	var b Base
	m.Fill(&b, ContactLost, z)
	got := make([]float64, len(z))
	m.ContactLostSlope(got, &b)
	for i := range z {
		h := 1e-3 * z[i]
		d := func(k float64) float64 { return m.Direct(z[i] + k*h).ContactLost }
		want := (8*(d(1)-d(-1)) - (d(2) - d(-2))) / (12 * h) * (1 + z[i]) // five-point difference, error of order h^4
		if math.Abs(got[i]/want-1) > 1e-6 {
			t.Errorf("contact-lost slope at z = %g is %.10g, the direct path's differences give %.10g", z[i], got[i], want)
		}
	}
}
