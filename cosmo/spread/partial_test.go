package spread

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"catenrich/cosmo"
	"catenrich/cosmo/photo"
)

// A row that can be moved: z_cos, and the other two redshifts by their ratios.
type row struct{ z, q, frame float64 }

// columns are the quantities as functions of a row, by their formulas in
// terms of the model's own numbers; the judge of every partial.
func columns(m *cosmo.Model, k photo.Correction, e photo.Evolution) map[string]func(r row) float64 {
	dh, th, h0 := m.HubbleDistance(), m.HubbleTime(), m.Params().H0
	at := func(q cosmo.Quantity, z float64) float64 { return m.At(q, z) }
	zobs := func(r row) float64 { return r.q*(1+r.z) - 1 }
	zframe := func(r row) float64 { return r.frame*(1+r.z) - 1 }
	da := func(r row) float64 { return dh * at(cosmo.DM, r.z) * (1 + zframe(r)) / ((1 + r.z) * (1 + zobs(r))) }
	dl := func(r row) float64 { return da(r) * (1 + zobs(r)) * (1 + zobs(r)) }
	mu := func(r row) float64 { return 5*math.Log10(dl(r)) + 25 }
	return map[string]func(r row) float64{
		"comoving":   func(r row) float64 { return dh * at(cosmo.DC, r.z) },
		"transverse": func(r row) float64 { return dh * at(cosmo.DM, r.z) },
		"angular":    da, "luminosity": dl, "modulus": mu,
		"emission":    func(r row) float64 { return dh * at(cosmo.DC, r.z) / (1 + r.z) },
		"lookback":    func(r row) float64 { return th * at(cosmo.Lookback, r.z) },
		"age":         func(r row) float64 { return th * at(cosmo.Age, r.z) },
		"volume":      func(r row) float64 { return dh * dh * dh * at(cosmo.Volume, r.z) },
		"element":     func(r row) float64 { return dh * dh * dh * math.Pow(at(cosmo.DM, r.z), 2) / at(cosmo.E, r.z) },
		"now":         func(r row) float64 { return h0 * dh * at(cosmo.DC, r.z) },
		"at emission": func(r row) float64 { return cosmo.SpeedOfLight * at(cosmo.E, r.z) / (1 + r.z) * at(cosmo.DC, r.z) },
		"drift":       func(r row) float64 { return 1e-9 / th * at(cosmo.Drift, r.z) },
		"velocity drift": func(r row) float64 {
			return 1e5 * cosmo.SpeedOfLight / (1 + r.z) * 1e-9 / th * at(cosmo.Drift, r.z)
		},
		"redshift":  func(r row) float64 { return r.z },
		"dimming":   func(r row) float64 { return 10 * math.Log10(1+zobs(r)) },
		"k":         func(r row) float64 { return k.Value(zobs(r)) },
		"evolution": func(r row) float64 { return e.At(r.z) },
		"absolute":  func(r row) float64 { return 19 - mu(r) - k.Value(zobs(r)) - e.At(r.z) },
		"line":      func(r row) float64 { return dl(r) * dl(r) },
		"radio":     func(r row) float64 { return dl(r) * dl(r) * math.Pow(1+zobs(r), -(1-0.7)) },
		"size":      func(r row) float64 { return 3 * da(r) },
	}
}

// partials computes every partial for rows of one model.
func partials(m *cosmo.Model, rows []row, k photo.Correction, e photo.Evolution) map[string]*Partial {
	var z, q, frame, zobs, slope, logE, dl2, radio, size []float64
	cols := columns(m, k, e)
	for _, r := range rows {
		z, q, frame = append(z, r.z), append(q, r.q), append(frame, r.frame)
		zobs = append(zobs, r.q*(1+r.z)-1)
		slope = append(slope, k.Slope(r.q*(1+r.z)-1))
		const h = 1e-5
		logE = append(logE, (math.Log(m.At(cosmo.E, r.z+h*(1+r.z)))-math.Log(m.At(cosmo.E, r.z-h*(1+r.z))))/(math.Log1p(h)-math.Log1p(-h)))
		dl2, radio, size = append(dl2, cols["line"](r)), append(radio, cols["radio"](r)), append(size, cols["size"](r))
	}
	b := new(cosmo.Base)
	m.Fill(b, cosmo.DC|cosmo.DM|cosmo.Slope|cosmo.E, z)
	n := NewInputs(m, b)
	n.ObsRatio, n.FrameRatio, n.LogSlopeE = q, frame, logE
	out := make(map[string]*Partial)
	fill := func(name string, f func(p *Partial)) {
		p := new(Partial)
		p.Resize(len(rows))
		f(p)
		out[name] = p
	}
	fill("comoving", n.ComovingDistance)
	fill("transverse", n.TransverseDistance)
	fill("angular", n.AngularDiameterDistance)
	fill("luminosity", n.LuminosityDistance)
	fill("modulus", n.DistanceModulus)
	fill("emission", n.EmissionDistance)
	fill("lookback", n.Lookback)
	fill("age", n.Age)
	fill("volume", n.Volume)
	fill("element", n.VolumeElement)
	fill("now", n.VelocityNow)
	fill("at emission", n.VelocityAtEmission)
	fill("drift", n.RedshiftDrift)
	fill("velocity drift", n.VelocityDrift)
	fill("redshift", n.CosmologicalRedshift)
	fill("dimming", n.Dimming)
	fill("k", func(p *Partial) { Correction(p, slope, zobs) })
	fill("evolution", func(p *Partial) { n.Evolution(p, e) })
	fill("absolute", func(p *Partial) { n.AbsoluteMagnitude(p, slope, zobs, e) })
	fill("line", func(p *Partial) { n.LineLuminosity(p, dl2, -1, nil) })
	fill("radio", func(p *Partial) { n.LineLuminosity(p, radio, -0.7, nil) })
	fill("size", func(p *Partial) { n.Size(p, size) })
	return out
}

var testModels = map[string]cosmo.Params{
	"flat":   {H0: 70, OmegaM: 0.3, W0: -1, Flat: true},
	"open":   {H0: 68, OmegaM: 0.28, OmegaDE: 0.5, W0: -0.9, Wa: -0.2},
	"closed": {H0: 70, OmegaM: 0.3, OmegaDE: 1.6, W0: -1},
}

// Every partial against a central difference of its column: moved in z_cos
// alone, and moved all together.
func TestPartials(t *testing.T) {
	k, e := photo.PowerLaw{Alpha: -0.5, Rest: 0.1}, photo.Evolution{Q: 1.6, Z0: 0.1}
	rows := []row{{0.01, 1.001, 0.999}, {0.3, 0.998, 1.001}, {1.4, 1, 1}, {4, 1.0005, 1.0005}}
	for name, p := range testModels {
		m := model(t, p)
		cols := columns(m, k, e)
		got := partials(m, rows, k, e)
		if len(got) != len(cols) {
			t.Errorf("%d partials of %d columns", len(got), len(cols))
		}
		for col, f := range cols {
			for i, r := range rows {
				const h = 1e-5
				move := func(d float64, alone bool) row {
					s := row{(1+r.z)*(1+d) - 1, r.q, r.frame}
					if alone {
						s.q, s.frame = s.q/(1+d), s.frame/(1+d)
					}
					return s
				}
				unit := math.Log1p(h) - math.Log1p(-h)
				scale := 1e-6*math.Abs(f(r)) + 1e-300 // both sides of the difference are good to 1e-13 of f
				cos := (f(move(h, true)) - f(move(-h, true))) / unit
				both := (f(move(h, false)) - f(move(-h, false))) / unit
				where := fmt.Sprintf("%s, %s at z = %v", name, col, r.z)
				if d := math.Abs(got[col].Cos[i] - cos); !(d <= 1e-6*math.Abs(cos)+scale) {
					t.Errorf("%s: Cos = %.9g, want %.9g (central difference)", where, got[col].Cos[i], cos)
				}
				if d := math.Abs(got[col].Cos[i] + got[col].Rest[i] - both); !(d <= 1e-6*math.Abs(both)+scale) {
					t.Errorf("%s: Cos + Rest = %.9g, want %.9g (central difference)", where, got[col].Cos[i]+got[col].Rest[i], both)
				}
			}
		}
	}
}

// About 0.18 mag at z = 0.01 for 250 km/s: (5/ln 10)(1+z) σ_v/(c z) = 0.183,
// common practice, no source; tolerance 2 %.
func TestPeculiarVelocityFloor(t *testing.T) {
	m := model(t, testModels["flat"])
	p := partials(m, []row{{0.01, 1, 1}}, photo.None{}, photo.Evolution{})["modulus"]
	var s Sigmas
	s.Set([]float64{0}, []float64{0.01}, 250, nil)
	got := []float64{0}
	s.Fill(got, p)
	if want := 0.183; math.Abs(got[0]-want) > 0.02*want {
		t.Errorf("σ_mu = %.4f, want %.4f ± 2%%", got[0], want)
	}
}

// σ_M and σ_L against a seeded Monte-Carlo through the formulas themselves: the
// measured redshift moves everything, K and e partly undo mu, the magnitude and
// the extinction are independent. 200 000 draws give σ to 0.16 %, so 0.8 % is
// five of their standard deviations.
func TestMonteCarlo(t *testing.T) {
	m := model(t, testModels["flat"])
	k, e := photo.PowerLaw{Alpha: -2.5}, photo.Evolution{Q: 3, Z0: 0.1}
	const z, q, frame = 0.35, 0.9985, 1.0007
	const sigmaZ, floor, sigmaM, sigmaA, sigmaEBV, r = 0.002, 300.0, 0.01, 0.006, 0.004, 2.285
	zin := q*(1+z) - 1 // the catalogue is heliocentric
	cols := columns(m, k, e)
	p := partials(m, []row{{z, q, frame}}, k, e)["absolute"]
	variance := []float64{0}
	MagnitudeVariance(variance, []float64{sigmaM}, []float64{sigmaA}, r, []float64{sigmaEBV})
	var s Sigmas
	s.Set([]float64{sigmaZ}, []float64{zin}, floor, nil)
	sM, sL := []float64{0}, []float64{0}
	s.FillWith(sM, p, variance)
	lum := []float64{math.Pow(10, -0.4*(cols["absolute"](row{z, q, frame})-4.65))}
	Luminosities(sL, lum, sM)

	rng := rand.New(rand.NewPCG(11, 12))
	const n = 200000
	var sum, square, lsum, lsquare float64
	for range n {
		d := (1 + zin + sigmaZ*rng.NormFloat64()) / (1 + zin)
		v := 1 + floor/cosmo.SpeedOfLight*rng.NormFloat64()
		moved := row{(1+z)*d*v - 1, q / v, frame / v}
		x := cols["absolute"](moved) + sigmaM*rng.NormFloat64() - sigmaA*rng.NormFloat64() - r*sigmaEBV*rng.NormFloat64()
		sum, square = sum+x, square+x*x
		l := math.Pow(10, -0.4*(x-4.65))
		lsum, lsquare = lsum+l, lsquare+l*l
	}
	std := func(sum, square float64) float64 { return math.Sqrt(square/n - sum/n*sum/n) }
	if want := std(sum, square); math.Abs(sM[0]-want) > 0.008*want {
		t.Errorf("σ_M = %.6f, want %.6f ± 0.8%% (Monte-Carlo)", sM[0], want)
	}
	if want := std(lsum, lsquare); math.Abs(sL[0]-want) > 0.01*want {
		t.Errorf("σ_L = %.6g, want %.6g ± 1%% (Monte-Carlo, with what is not linear in 10^-0.4M)", sL[0], want)
	}
	// Squared one by one, mu, K and e would give another answer: the signs matter.
	wrong := 0.0
	for _, c := range []string{"modulus", "k", "evolution"} {
		p := partials(m, []row{{z, q, frame}}, k, e)[c]
		wrong += math.Pow((p.Cos[0]+p.Rest[0])*sigmaZ/(1+zin), 2)
	}
	if math.Abs(math.Sqrt(wrong+variance[0])-sM[0]) < 0.05*sM[0] {
		t.Error("this case cannot tell signs before squares from squares before signs")
	}
}

// The interval of D_A and mu from 16 and 84 % quantiles against draws of the
// redshift: monotone, the quantiles of the quantity are its values at the ends.
func TestIntervalMonteCarlo(t *testing.T) {
	m := model(t, testModels["flat"])
	cols := columns(m, photo.None{}, photo.Evolution{})
	rng := rand.New(rand.NewPCG(3, 4))
	for _, col := range []string{"modulus", "angular", "age"} {
		f := func(z float64) float64 { return cols[col](row{z, 1, 1}) }
		turns := FindTurns(f, 1e-6, 1000)
		const z, lo, hi = 0.5, 0.42, 0.61
		v := Interval{Zlo: []float64{lo}, Zhi: []float64{hi}, Xlo: []float64{f(lo)}, Xhi: []float64{f(hi)}, X: []float64{f(z)}}
		xlo, xhi := []float64{0}, []float64{0}
		v.Fill(xlo, xhi, turns)
		inside, n := 0, 100000
		for range n {
			d := rng.NormFloat64() * 0.9945 // 68 % within ±1 of this scale
			x := f(z + d*(hi-z))
			if d < 0 {
				x = f(z + d*(z-lo))
			}
			if x >= xlo[0] && x <= xhi[0] {
				inside++
			}
		}
		want := math.Erf(1 / 0.9945 / math.Sqrt2)
		if got := float64(inside) / float64(n); math.Abs(got-want) > 5*math.Sqrt(want*(1-want)/float64(n)) {
			t.Errorf("%s: %.4f of the draws inside, want %.4f", col, got, want)
		}
	}
}
