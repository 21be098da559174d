package selection

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"catenrich/cosmo"
	"catenrich/cosmo/photo"
	"catenrich/internal/status"
)

func newModel(t testing.TB, p cosmo.Params) *cosmo.Model {
	t.Helper()
	m, err := cosmo.New(p)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// w is mu + K + e by another road: D_M from the model, the rest from package
// math, the frames written out in full.
func w(m *cosmo.Model, k photo.Correction, e photo.Evolution, z, q, frame float64) float64 {
	zobs, zframe := q*(1+z)-1, frame*(1+z)-1
	dl := m.HubbleDistance() * m.At(cosmo.DM, z) * (1 + zframe) * (1 + zobs) / (1 + z)
	if q == 1 {
		zobs = z
	}
	return 5*math.Log10(dl) + 25 + k.Value(zobs) + e.At(z)
}

func models(t testing.TB) map[string]*cosmo.Model {
	return map[string]*cosmo.Model{
		"flat":   newModel(t, cosmo.Params{H0: 70, OmegaM: 0.3, W0: -1, Flat: true}),
		"open":   newModel(t, cosmo.Params{H0: 70, OmegaM: 0.3, W0: -1}),
		"closed": newModel(t, cosmo.Params{H0: 70, OmegaM: 0.3, OmegaDE: 1.6, W0: -1}), // past equator and antipode
	}
}

// kTable is a K table with kinks, steep enough to make w turn.
func kTable(t testing.TB, turning bool) photo.Correction {
	z := []float64{-0.05, 0.1, 0.25, 0.4, 0.8, 1, 1.1, 1.5, 3, 6}
	k := []float64{-0.03, 0.1, 0.3, 0.55, 1.2, 1.3, 1.31, 0.9, 1.5, 3}
	if turning {
		k[5], k[6], k[7] = 2.2, 0.3, -0.8
	}
	c, err := photo.NewTable(z, k)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// At z_min and z_max the object has the limiting magnitude, it is within the
// limits everywhere in between, and an object whose own magnitude is a limit is
// its own root. The judge is w on a grid, computed by another road.
func TestRoots(t *testing.T) {
	ks := map[string]photo.Correction{"none": photo.None{}, "power law": photo.PowerLaw{Alpha: -1.7, Rest: 0.1}, "table": kTable(t, false), "turning table": kTable(t, true)}
	e := photo.Evolution{Q: 0.8, Z0: 0.1}
	rng := rand.New(rand.NewPCG(5, 8))
	for mname, m := range models(t) {
		for kname, k := range ks {
			for _, moving := range []bool{false, true} {
				name := fmt.Sprintf("%s, %s, moving %v", mname, kname, moving)
				lim := Limits{Bright: 14, Faint: 20, Zmin: 0, Zmax: 5}
				s := New(m, photo.Single(k), e, lim)
				const n = 120
				r := &Rows{Z: make([]float64, n), Apparent: make([]float64, n), Offset: make([]float64, n)}
				q, frame := make([]float64, n), make([]float64, n)
				for i := range n {
					r.Z[i] = math.Pow(10, -2.5+3.1*rng.Float64())
					q[i], frame[i] = 1, 1
					if moving {
						q[i], frame[i] = 1+0.003*rng.NormFloat64(), 1+0.001*rng.NormFloat64()
					}
					r.Apparent[i] = 14 + 6*rng.Float64()
					if i%50 == 0 {
						r.Apparent[i] = lim.Faint
					}
					r.Offset[i] = w(m, k, e, r.Z[i], q[i], frame[i])
				}
				if moving {
					r.ObsRatio, r.Shift = q, make([]float64, n)
					for i := range n {
						r.Shift[i] = 5 * math.Log10(q[i]*frame[i])
					}
				}
				zmin, zmax, st := make([]float64, n), make([]float64, n), make([]int32, n)
				s.Roots(zmin, zmax, r, st)
				for i := range n {
					if st[i] != 0 {
						t.Errorf("%s: row %d at z %v: status %d", name, i, r.Z[i], st[i])
						continue
					}
					abs := r.Apparent[i] - r.Offset[i]
					mag := func(z float64) float64 { return abs + w(m, k, e, z, q[i], frame[i]) }
					checkInterval(t, name, mag, lim, r.Z[i], zmin[i], zmax[i])
				}
			}
		}
	}
}

func checkInterval(t *testing.T, name string, mag func(float64) float64, lim Limits, z, zmin, zmax float64) {
	t.Helper()
	if !(zmin <= z && z <= zmax) {
		t.Errorf("%s: z_min %v, z %v, z_max %v", name, zmin, z, zmax)
	}
	for _, root := range []float64{zmin, zmax} {
		if root == lim.Zmin || root == lim.Zmax {
			continue
		}
		// The slope of w at z is at least 5/ln10/z where it matters, so 1e-9 mag is 1e-10 of z.
		if d := min(math.Abs(mag(root)-lim.Faint), math.Abs(mag(root)-lim.Bright)); !(d <= 1e-9) {
			t.Errorf("%s: z = %.6g: root %.17g is %.3g mag off the limit", name, z, root, d)
		}
	}
	const steps = 300
	for j := range steps {
		x := zmin + (zmax-zmin)*(float64(j)+0.5)/steps
		// At a turning point w may touch a limit by the rounding of z_turn, 1e-8, and what q moves it.
		if v := mag(x); !(v >= lim.Bright-1e-6 && v <= lim.Faint+1e-6) {
			t.Errorf("%s: z = %.6g: between z_min %.9g and z_max %.9g, at %.9g, m = %.9g", name, z, zmin, zmax, x, v)
			return
		}
	}
}

func TestOwnMagnitudeIsOwnRoot(t *testing.T) {
	m := models(t)["flat"]
	for kname, k := range map[string]photo.Correction{"none": photo.None{}, "table": kTable(t, false), "power law": photo.PowerLaw{Alpha: 0.4}} {
		for _, q := range []float64{1, 1.0012} {
			for _, z := range []float64{1e-5, 0.003, 0.1, 0.7, 2.5} {
				offset := w(m, k, photo.Evolution{}, z, q, 1.0005)
				r := &Rows{Z: []float64{z}, Apparent: []float64{18.3}, Offset: []float64{offset}, ObsRatio: []float64{q}, Shift: []float64{5 * math.Log10(q*1.0005)}}
				zmin, zmax, st := []float64{0}, []float64{0}, []int32{0}
				New(m, photo.Single(k), photo.Evolution{}, Limits{Bright: 18.3, Faint: 18.3, Zmax: 5}).Roots(zmin, zmax, r, st)
				for _, root := range []float64{zmin[0], zmax[0]} {
					// The inverse is proved to 1e-10 mag when it is made: 5e-11 of z.
					if d := math.Abs(root-z) / z; !(d < 5e-11) {
						t.Errorf("%s, q %v: root %.17g of an object at the limit at z = %v (%.2g off)", kname, q, root, z, d)
					}
				}
				own := 18.3 - offset + w(m, k, photo.Evolution{}, zmax[0], q, 1.0005)
				if math.Abs(own-18.3) > 2e-10 {
					t.Errorf("%s, q %v, z %v: m at the root %.12f, want its own 18.3", kname, q, z, own)
				}
			}
		}
	}
}

func TestRootsStatus(t *testing.T) {
	m := models(t)["flat"]
	k := kTable(t, false)
	nan, inf := math.NaN(), math.Inf(1)
	at := func(z float64) float64 { return w(m, k, photo.Evolution{}, z, 1, 1) }
	for _, c := range []struct {
		name      string
		lim       Limits
		z, mag    float64
		offset    float64
		faint     []float64
		template  []int32
		want      int32
		nanMin    bool
		nanMax    bool
		zmax      float64 // checked if positive
		zminEqual float64
	}{
		{"fainter than the limit", Limits{Bright: -inf, Faint: 18, Zmax: 5}, 0.2, 19, at(0.2), nil, nil, status.Selection, true, true, 0, 0},
		{"brighter than the limit", Limits{Bright: 15, Faint: 18, Zmax: 5}, 0.2, 14, at(0.2), nil, nil, status.Selection, true, true, 0, 0},
		{"nearer than the sample", Limits{Bright: -inf, Faint: 18, Zmin: 0.3, Zmax: 5}, 0.2, 17, at(0.2), nil, nil, status.Selection, true, true, 0, 0},
		{"cut at the redshift limit", Limits{Bright: -inf, Faint: 25, Zmin: 0.1, Zmax: 0.5}, 0.2, 17, at(0.2), nil, nil, 0, false, false, 0.5, 0.1},
		{"K ends first", Limits{Bright: -inf, Faint: 40, Zmin: 0.1, Zmax: 9}, 0.2, 17, at(0.2), nil, nil, status.Coverage, false, true, 0, 0.1},
		{"K ends first, but no faint limit", Limits{Bright: 10, Faint: inf, Zmin: 0.1, Zmax: 9}, 0.2, 17, at(0.2), nil, nil, 0, false, false, 9, 0.1},
		{"row limit missing", Limits{Bright: -inf, Faint: 18, Zmax: 5}, 0.2, 17, at(0.2), []float64{nan}, nil, status.Input, true, true, 0, 0},
		{"row limit", Limits{Bright: -inf, Faint: 18, Zmax: 5}, 0.2, 17, at(0.2), []float64{17}, nil, 0, false, false, 0.2, 0},
		{"unknown template", Limits{Bright: -inf, Faint: 18, Zmax: 5}, 0.2, 17, at(0.2), nil, []int32{-1}, 0, true, true, 0, 0},
		{"no magnitude", Limits{Bright: -inf, Faint: 18, Zmax: 5}, 0.2, nan, at(0.2), nil, nil, 0, true, true, 0, 0},
		{"no redshift", Limits{Bright: -inf, Faint: 18, Zmax: 5}, nan, 17, nan, nil, nil, 0, true, true, 0, 0},
	} {
		r := &Rows{Z: []float64{c.z}, Apparent: []float64{c.mag}, Offset: []float64{c.offset}, Faint: c.faint, Template: c.template}
		zmin, zmax, st := []float64{0}, []float64{0}, []int32{0}
		New(m, photo.Single(k), photo.Evolution{}, c.lim).Roots(zmin, zmax, r, st)
		if st[0] != c.want || (zmin[0] != zmin[0]) != c.nanMin || (zmax[0] != zmax[0]) != c.nanMax {
			t.Errorf("%s: z_min %v, z_max %v, status %d, want %d", c.name, zmin[0], zmax[0], st[0], c.want)
		}
		if c.zmax > 0 && math.Abs(zmax[0]-c.zmax) > 1e-13 || c.zminEqual > 0 && zmin[0] != c.zminEqual {
			t.Errorf("%s: z_min %v, z_max %v, want %v, %v", c.name, zmin[0], zmax[0], c.zminEqual, c.zmax)
		}
	}
}

func BenchmarkRoots(b *testing.B) {
	m := models(b)["flat"]
	for kname, k := range map[string]photo.Correction{"none": photo.None{}, "table": kTable(b, false)} {
		for _, q := range []float64{1, 1.0012} {
			b.Run(fmt.Sprintf("%s/q=%v", kname, q), func(b *testing.B) {
				const n = 2048
				s := New(m, photo.Single(k), photo.Evolution{Q: 1}, Limits{Bright: 14, Faint: 20, Zmax: 5})
				r := &Rows{Z: make([]float64, n), Apparent: make([]float64, n), Offset: make([]float64, n), ObsRatio: make([]float64, n), Shift: make([]float64, n)}
				rng := rand.New(rand.NewPCG(5, 8))
				for i := range n {
					r.Z[i] = math.Pow(10, -2+2*rng.Float64())
					r.Apparent[i] = 16 + 4*rng.Float64()
					r.ObsRatio[i], r.Shift[i] = q, 5*math.Log10(q)
					r.Offset[i] = w(m, k, photo.Evolution{Q: 1}, r.Z[i], q, 1)
				}
				r.Work = new(Work)
				zmin, zmax, st := make([]float64, n), make([]float64, n), make([]int32, n)
				b.ReportAllocs()
				report := cpu(b, n)
				for b.Loop() {
					s.Roots(zmin, zmax, r, st)
				}
				report()
			})
		}
	}
}

func appendRow(text []byte, w, v float64) []byte { return fmt.Appendf(text, "%.6f %.9f\n", w, v) }
