package cosmo

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// sampleModels are one of each kind.
func sampleModels(t testing.TB) map[string]*Model {
	out := map[string]*Model{}
	for name, p := range referenceParams(t) {
		out[name] = mustNew(t, p)
	}
	out["turns around"] = mustNew(t, extremeParams["turns around at -0.5"])
	out["loitering"] = mustNew(t, extremeParams["loitering"])
	return out
}

func TestAtHasTheBitsOfFill(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	z := []float64{math.NaN(), math.Inf(1), math.Inf(-1), -1, -0.99, math.Nextafter(-0.99, 0), 0, math.Copysign(0, -1), 5e-324, -5e-324, 1e4, 1e4 + 1e-9}
	for range 300 {
		z = append(z, math.Exp(-20+29*r.Float64()), -0.995*r.Float64())
	}
	for name, m := range sampleModels(t) {
		var b Base
		m.Fill(&b, everything, z)
		for q := DC; q <= ContactLost; q <<= 1 {
			for i, v := range b.slice(q) {
				if at := m.At(q, z[i]); math.Float64bits(at) != math.Float64bits(v) && (at == at || v == v) {
					t.Errorf("%s: At(%d, %g) = %g, Fill gives %g", name, q, z[i], at, v)
				}
			}
		}
	}
}

func TestOutsideTheDomain(t *testing.T) {
	for name, m := range sampleModels(t) {
		var b Base
		m.Fill(&b, everything, []float64{math.NaN(), math.Inf(1), -0.99, -1, -7, 1.0000001e4})
		for i := range b.Z {
			for q := DC; q <= ContactLost; q <<= 1 {
				if v := b.slice(q)[i]; !math.IsNaN(v) {
					t.Errorf("%s: quantity %d at z = %g is %g, want NaN", name, q, b.Z[i], v)
				}
			}
		}
	}
}

func TestToday(t *testing.T) {
	for name, m := range sampleModels(t) {
		for _, c := range []struct {
			q    Quantity
			want float64
		}{{DC, 0}, {DM, 0}, {Lookback, 0}, {Volume, 0}, {Drift, 0}, {Slope, 1}, {E, 1}} {
			if got := m.At(c.q, 0); !(math.Abs(got-c.want) <= 1e-15) {
				t.Errorf("%s: quantity %d at z = 0 is %g, want %g", name, c.q, got, c.want)
			}
		}
	}
}

// For z1 < z2 an increasing quantity has value(z2) >= value(z1) (1 - 2e-14),
// across the edges of cells too.
func TestOrder(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	for name, m := range sampleModels(t) {
		m.Prepare(everything)
		var z []float64
		for _, s := range m.past.cells[1:] {
			edge := s.edge + s.width
			z = append(z, edge, math.Nextafter(edge, -1), math.Nextafter(edge, 1e9), edge+1e-12*math.Abs(s.width))
		}
		for range 3000 {
			v := math.Exp(-25 + 34*r.Float64())
			z = append(z, v, v*(1+1e-15), v*(1+1e-13))
		}
		z = slices.DeleteFunc(z, func(v float64) bool { return !(v > 1e-11 && v <= MaxRedshift) })
		slices.Sort(z)
		var b Base
		m.Fill(&b, DC|Lookback|Volume|Age, z)
		for i := 1; i < len(z); i++ {
			for _, q := range []Quantity{DC, Lookback, Volume} {
				if v := b.slice(q); !(v[i] >= v[i-1]*(1-2e-14)) {
					t.Errorf("%s: quantity %d falls from %.17g to %.17g between z = %.17g and %.17g", name, q, v[i-1], v[i], z[i-1], z[i])
				}
			}
			if !(b.Age[i-1] >= b.Age[i]*(1-2e-14)) {
				t.Errorf("%s: the age rises from %.17g to %.17g between z = %.17g and %.17g", name, b.Age[i-1], b.Age[i], z[i-1], z[i])
			}
		}
	}
}

func TestFillAllocatesNothing(t *testing.T) {
	z := plausible(2048)
	for name, m := range sampleModels(t) {
		var b Base
		m.Fill(&b, everything, z)
		if n := testing.AllocsPerRun(5, func() { m.Fill(&b, everything, z) }); n != 0 {
			t.Errorf("%s: %g allocations a batch, want none", name, n)
		}
	}
}

func TestPresets(t *testing.T) {
	for _, p := range Presets() {
		if p.Source == "" || p.Doc == "" {
			t.Errorf("%s has no source or doc", p.Name)
		}
		mustNew(t, p.Params)
		p.Params.NeutrinoMasses = append(p.Params.NeutrinoMasses[:0], 9) // must be the caller's own
	}
	if p, ok := FindPreset("planck2018"); !ok || !slices.Equal(p.Params.NeutrinoMasses, []float64{0, 0, 0.06}) {
		t.Errorf("planck2018 is %+v", p)
	}
	if _, ok := FindPreset("nothing"); ok {
		t.Error("there is a set called nothing")
	}
}

// The order of the masses means nothing, and three zeros are the default.
func TestNeutrinoMassesAreASet(t *testing.T) {
	with := func(masses ...float64) float64 {
		return mustNew(t, Params{H0: 70, OmegaM: 0.3, Flat: true, W0: -1, TCMB: 2.7255, Neff: 3.046, NeutrinoMasses: masses}).At(DC, 3)
	}
	if a, b := with(0.05, 0, 0.009), with(0, 0.009, 0.05); a != b {
		t.Errorf("DC(3) is %.17g or %.17g by the order of the masses", a, b)
	}
	if a, b := with(), with(0, 0, 0); a != b {
		t.Errorf("DC(3) is %.17g without masses, %.17g with three zeros", a, b)
	}
}
