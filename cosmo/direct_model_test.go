package cosmo

import (
	"math"
	"testing"
)

// TestQuadratureAgreesWithDirect holds that the interpolated neutrinos change
// nothing that matters.
func TestQuadratureAgreesWithDirect(t *testing.T) {
	for _, name := range []string{"planck2018", "wmap9", "seventy-thirty"} {
		p, ok := FindPreset(name)
		if !ok {
			t.Fatal(name)
		}
		m, err := New(p.Params)
		if err != nil {
			t.Fatal(err)
		}
		q := m.Quadrature()
		for _, z := range []float64{-0.5, 1e-8, 0.01, 0.7, 3, 40, 1100, 1e4} {
			want := m.Direct(z)
			for one := DC; one <= ContactLost; one <<= 1 {
				got, want := q.At(one, z), want.of(one)
				if got != got && want != want {
					continue
				}
				if !(math.Abs(got-want) <= 2e-13*math.Abs(want)) {
					t.Errorf("%s, z = %v, quantity %d: %.17g, want %.17g", name, z, one, got, want)
				}
			}
		}
	}
}

// TestQuadratureAgreesWithCells compares the two paths where a Model answers
// for a batch, and the slopes that errors are made of.
func TestQuadratureAgreesWithCells(t *testing.T) {
	z := []float64{-0.9, -0.3, 1e-7, 0.004, 0.3, 1.1, 2.5, 9, 1000}
	for _, p := range []Params{
		{H0: 67.66, OmegaM: 0.30964, Flat: true, W0: -1, TCMB: 2.7255, Neff: 3.046, NeutrinoMasses: []float64{0, 0, 0.06}},
		{H0: 70, OmegaM: 0.3, OmegaDE: 0.9, W0: -0.9, Wa: 0.2},
		{H0: 70, OmegaM: 0.3, OmegaDE: 0.4, W0: -1.1},
	} {
		m, err := New(p)
		if err != nil {
			t.Fatal(err)
		}
		const all = DC | DM | Slope | E | Lookback | Age | Volume | Drift | ContactLost
		q := m.Quadrature()
		var cells, direct Base
		m.Fill(&cells, all, z)
		q.Fill(&direct, all, z)
		for one := DC; one <= ContactLost; one <<= 1 {
			compareSlices(t, z, cells.slice(one), direct.slice(one), 1e-11)
		}
		a, b := make([]float64, len(z)), make([]float64, len(z))
		m.LogSlopeE(a, &cells)
		q.LogSlopeE(b, &direct)
		compareSlices(t, z, a, b, 1e-9)
		m.ContactLostSlope(a, &cells)
		q.ContactLostSlope(b, &direct)
		compareSlices(t, z, a, b, 2e-10)
		if got, want := q.EventHorizon(), m.EventHorizon(); got != want && math.Abs(got-want) > 1e-12*want {
			t.Errorf("event horizon %v by quadrature, %v", got, want)
		}
	}
}

func compareSlices(t *testing.T, z, a, b []float64, tolerance float64) {
	t.Helper()
	for i := range z {
		if a[i] != a[i] && b[i] != b[i] {
			continue
		}
		if !(math.Abs(a[i]-b[i]) <= tolerance*math.Max(math.Abs(a[i]), 1e-3)) {
			t.Errorf("z = %v: %.17g by cells, %.17g by quadrature, apart by %.2g", z[i], a[i], b[i], a[i]/b[i]-1)
		}
	}
}

func BenchmarkQuadrature(b *testing.B) {
	p, _ := FindPreset("planck2018")
	m, err := New(p.Params)
	if err != nil {
		b.Fatal(err)
	}
	q := m.Quadrature()
	for name, set := range map[string]Quantity{"distance": DM, "age": Age, "drift": Drift, "contact lost": ContactLost} {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				q.At(set, 0.7)
			}
		})
	}
	b.Run("setting up", func(b *testing.B) {
		for b.Loop() {
			m.Quadrature()
		}
	})
}
