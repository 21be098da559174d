package spread

import (
	"math"
	"testing"

	"catenrich/cosmo"
	"catenrich/internal/status"
)

func model(t testing.TB, p cosmo.Params) *cosmo.Model {
	t.Helper()
	m, err := cosmo.New(p)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// Where D_A is largest, by the 45-digit tables of testdata/reference/scalars.csv
// (z_max_da and max_da_mpc).
func TestTurnOfAngularDiameterDistance(t *testing.T) {
	for _, c := range []struct {
		name   string
		p      cosmo.Params
		z, max float64
	}{
		{"eds", cosmo.Params{H0: 70, OmegaM: 1, W0: -1}, 1.25, 1268.9627851851851852},
		{"seventy_thirty", cosmo.Params{H0: 70, OmegaM: 0.3, W0: -1, Flat: true}, 1.6054226423475552636, 1747.5719008787132233},
		{"open", cosmo.Params{H0: 70, OmegaM: 0.3, W0: -1}, 1.900063295424039518, 1583.254825969128448},
		{"closed", cosmo.Params{H0: 70, OmegaM: 0.5, OmegaDE: 0.8, W0: -1}, 1.3348272831066345191, 1600.0849779473789008},
	} {
		m := model(t, c.p)
		turns := FindTurns(func(z float64) float64 { return m.HubbleDistance() * m.At(cosmo.DM, z) / (1 + z) }, 1e-6, 1000)
		if len(turns.Z) != 1 {
			t.Errorf("%s: turns at %v, want one", c.name, turns.Z)
			continue
		}
		if math.Abs(turns.Z[0]-c.z) > 1e-7 || math.Abs(turns.X[0]-c.max) > 1e-9*c.max {
			t.Errorf("%s: D_A turns at z = %.12g, %.12g Mpc, want %.12g, %.12g", c.name, turns.Z[0], turns.X[0], c.z, c.max)
		}
		for name, f := range map[string]func(float64) float64{
			"D_C": func(z float64) float64 { return m.At(cosmo.DC, z) },
			"age": func(z float64) float64 { return m.At(cosmo.Age, z) },
		} {
			if turns := FindTurns(f, -0.5, 1e4); len(turns.Z) != 0 {
				t.Errorf("%s: %s turns at %v, want nowhere", c.name, name, turns.Z)
			}
		}
	}
}

func TestInterval(t *testing.T) {
	m := model(t, cosmo.Params{H0: 70, OmegaM: 0.3, W0: -1, Flat: true})
	da := func(z float64) float64 { return m.HubbleDistance() * m.At(cosmo.DM, z) / (1 + z) }
	turns := FindTurns(da, 1e-6, 1000)
	zlo := []float64{0.1, 1.2, 1.7, 1.2}
	z := []float64{0.2, 1.6, 2.0, 1.3}
	zhi := []float64{0.3, 2.5, 3.0, math.NaN()}
	v := Interval{Zlo: zlo, Zhi: zhi, Scale: []float64{1, 1.001, 1, 1}}
	for i := range z {
		s := v.Scale[i]
		v.X, v.Xlo, v.Xhi = append(v.X, s*da(z[i])), append(v.Xlo, s*da(zlo[i])), append(v.Xhi, s*da(zhi[i]))
	}
	lo, hi := make([]float64, 4), make([]float64, 4)
	v.Fill(lo, hi, turns)
	for i, want := range [][2]float64{{da(0.1), da(0.3)}, {1.001 * da(2.5), 1.001 * 1747.5719008787132}, {da(3), da(1.7)}} {
		if math.Abs(lo[i]-want[0]) > 1e-9 || math.Abs(hi[i]-want[1]) > 1e-9 || !(lo[i] <= v.X[i] && v.X[i] <= hi[i]) {
			t.Errorf("[%v, %v]: D_A in [%.9f, %.9f], want %v", zlo[i], zhi[i], lo[i], hi[i], want)
		}
	}
	if lo[3] == lo[3] || hi[3] == hi[3] {
		t.Errorf("a missing quantile gave [%v, %v]", lo[3], hi[3])
	}
}

func TestQuantiles(t *testing.T) {
	nan := math.NaN()
	lo := []float64{0.1, nan, 0.3, 0.21, 0.1, nan}
	z := []float64{0.2, 0.2, 0.2, 0.2, 0.2, nan}
	hi := []float64{0.3, 0.3, 0.1, 0.3, 0.15, 0.2}
	st := make([]int32, len(z))
	Quantiles(lo, z, hi, st)
	for i := range z {
		want := int32(0)
		if i > 0 && i < 5 {
			want = status.Quantiles
		}
		if st[i] != want || (lo[i] == lo[i]) != (i == 0) || (hi[i] == hi[i]) != (i == 0) {
			t.Errorf("row %d: [%v, %v], status %d, want %d", i, lo[i], hi[i], st[i], want)
		}
	}
}
