package cosmo

import (
	"errors"
	"math"
	"testing"
)

// near fails unless got is want to a relative tol.
func near(t *testing.T, what string, got, want, tol float64, source string) {
	t.Helper()
	if !(math.Abs(got-want) <= tol*math.Abs(want)) {
		t.Errorf("%s = %.17g, want %.17g (%s)", what, got, want, source)
	}
}

func TestClosedForms(t *testing.T) {
	redshifts := []float64{-0.9, -0.3, 1e-9, 1e-3, 0.1, 1, 5, 1100, 9000}
	eds := mustNew(t, Params{H0: 70, OmegaM: 1, W0: -1})
	milne := mustNew(t, Params{H0: 70, W0: -1})
	lambda := mustNew(t, Params{H0: 70, OmegaM: 0.3, Flat: true, W0: -1})
	open := mustNew(t, Params{H0: 70, OmegaM: 0.3, W0: -1})
	deSitter := mustNew(t, Params{H0: 70, OmegaDE: 1, W0: -1})
	const tol = 2e-13
	for _, z := range redshifts {
		x := 1 + z
		u := math.Log1p(z)
		near(t, "Einstein-de Sitter DC", eds.At(DC, z), -2*math.Expm1(-u/2), tol, "2 (1 - (1+z)^-1/2), Hogg 1999 eq. 17 at Omega_M = 1")
		near(t, "Einstein-de Sitter age", eds.At(Age, z), 2.0/3*math.Pow(x, -1.5), tol, "(2/3) (1+z)^-3/2")
		near(t, "Milne DC", milne.At(DC, z), u, tol, "ln(1+z)")
		near(t, "Milne DM", milne.At(DM, z), math.Sinh(u), tol, "sinh ln(1+z)")
		near(t, "Milne slope", milne.At(Slope, z), math.Cosh(u), tol, "cosh ln(1+z)")
		near(t, "Milne age", milne.At(Age, z), 1/x, tol, "1/(1+z)")
		near(t, "flat matter + Lambda age", lambda.At(Age, z), 2/(3*math.Sqrt(0.7))*math.Asinh(math.Sqrt(0.7/0.3)*math.Pow(x, -1.5)), tol, "Peebles 1993 eq. 13.20 (from memory)")
		near(t, "de Sitter DC", deSitter.At(DC, z), z, tol, "E = 1")
		if z > 1e-4 { // the closed form cancels below
			const om = 0.3
			near(t, "open DM", open.At(DM, z), 2*(om*z+(om-2)*(math.Sqrt(1+om*z)-1))/(om*om*x), 1e-11, "Mattig 1958")
		}
	}
	near(t, "Einstein-de Sitter age today", eds.Age(), 9.312306873, 1e-9, "2/3 of the Hubble time")
	near(t, "Einstein-de Sitter particle horizon", eds.ParticleHorizon(), 8565.4988, 1e-12, "2 c/H0")
	near(t, "de Sitter event horizon", deSitter.EventHorizon(), deSitter.HubbleDistance(), 1e-15, "c/H0")
	if !math.IsInf(deSitter.Age(), 1) || !math.IsNaN(deSitter.At(Age, 1)) || !math.IsNaN(deSitter.At(ContactLost, 1)) {
		t.Error("de Sitter has an age")
	}
	if !math.IsInf(milne.ParticleHorizon(), 1) || !math.IsInf(milne.EventHorizon(), 1) {
		t.Error("Milne has a finite horizon")
	}
}

// A closed model of matter alone, Omega_M = 2, is a cycloid: x = 1/(1-cos a),
// t = (a - sin a), today at a = pi/2; it turns around at z = -1/2 (analytic).
func TestTurnAround(t *testing.T) {
	m := mustNew(t, Params{H0: 70, OmegaM: 2, W0: -1})
	turn, ok := m.TurnAround()
	if !ok {
		t.Fatal("Omega_M = 2 does not turn around")
	}
	near(t, "turn-around", turn, -0.5, 1e-14, "2 x^3 = x^2")
	if !math.IsInf(m.EventHorizon(), 1) || !math.IsNaN(m.EventHorizonRedshift()) || !math.IsNaN(m.At(ContactLost, 1)) {
		t.Error("a model that turns around has an event horizon")
	}
	for _, z := range []float64{-0.4999999, -0.49, -0.3, -1e-3, -1e-9, 1e-9, 0.5, 10, 9000} {
		a := math.Acos(1 - 1/(1+z))
		if z > 2 { // acos cancels
			a = 2 * math.Asin(math.Sqrt(0.5/(1+z)))
		}
		near(t, "cycloid age", m.At(Age, z), a-math.Sin(a), 1e-11, "cycloid")
		if math.Abs(z) > 1e-4 {
			near(t, "conformal distance", m.At(DC, z), math.Pi/2-a, 1e-11, "angle on the 3-sphere, radius c/H0")
		}
		near(t, "E", m.At(E, z), (1+z)*math.Sqrt(1+2*z), 1e-12, "x sqrt(2x-1)")
	}
	for _, z := range []float64{-0.5, -0.500001, -0.9} {
		if v := m.At(DC, z); !math.IsNaN(v) {
			t.Errorf("DC(%g) = %g beyond the turn-around, want NaN", z, v)
		}
	}
}

// The volume's closed form cancels where curvature or distance is small; its
// expansion is (4 pi/3) D^3 (1 + Ok D^2/5 + 2 Ok^2 D^4/105 + ...) (analytic).
func TestVolumeNearlyFlat(t *testing.T) {
	for _, k := range []float64{1e-15, 1e-12, 1e-9, 1e-6, 1e-3} {
		for _, sign := range []float64{1, -1} {
			m := mustNew(t, Params{H0: 70, OmegaM: 0.3, OmegaDE: 0.7 - sign*k, W0: -1})
			for _, z := range []float64{1e-9, 1e-5, 0.01, 1, 9999} {
				d, ok := m.At(DC, z), m.OmegaK()
				q := ok * d * d
				want := 4 * math.Pi / 3 * d * d * d * (1 + q/5 + 2*q*q/105 + q*q*q/945 + 2*q*q*q*q/51975)
				near(t, "volume", m.At(Volume, z), want, 1e-13, "series in Ok D^2")
				near(t, "DM", m.At(DM, z), d*(1+q/6+q*q/120+q*q*q/5040+q*q*q*q/362880), 1e-13, "series in Ok D^2")
			}
		}
	}
}

func TestPublishedBackground(t *testing.T) {
	preset := func(name string) *Model {
		p, ok := FindPreset(name)
		if !ok {
			t.Fatal("no set " + name)
		}
		return mustNew(t, p.Params)
	}
	planck, wmap, round := preset("planck2018"), preset("wmap9"), preset("seventy-thirty")
	gly := 1e6 * Parsec / LightYear / 1e9 // in 1 Mpc
	massless := planck.OmegaPhoton() * (1 + neutrinosPerPhoton*3.046)
	volumes := func(m *Model) float64 { // within the particle horizon, flat
		return 1 - math.Pow(m.HubbleDistance()/m.ParticleHorizon(), 3)
	}
	within := func(what string, got, want, tol float64, source string) {
		t.Helper()
		if !(math.Abs(got-want) <= tol) {
			t.Errorf("%s = %.6g, want %g ± %g (%s)", what, got, want, tol, source)
		}
	}
	const vi = "Planck 2018 results VI, table 2, last column, from memory; tolerance a quarter of their 1 sigma"
	within("age, Planck", planck.Age(), 13.787, 0.005, vi)
	within("Omega_Lambda, Planck", planck.OmegaDE(), 0.6889, 0.0014, vi)
	within("Omega_m with the massive neutrino", planck.OmegaM()+planck.OmegaNu(), 0.3111, 0.0014, vi)
	within("equality", planck.OmegaM()/massless-1, 3387, 5, vi)
	within("100 theta_*", 100*144.57/(planck.HubbleDistance()*planck.At(DC, 1089.8)), 1.0411, 0.0003, "Planck 2018 VI, abstract; r_* and z_* from memory; tolerance 1 sigma")
	within("age, WMAP9", wmap.Age(), 13.772, 0.015, "Hinshaw et al. 2013, table 4, from memory; a quarter of 1 sigma")
	within("distance of z = 10.957, Gly", planck.HubbleDistance()*planck.At(DC, 10.957)*gly, 32, 0.5, "common practice, no source")
	within("age at z = 10.957, Myr", 1e3*planck.HubbleTime()*planck.At(Age, 10.957), 410, 10, "common practice, no source")
	within("light travel time of z = 10.957", planck.HubbleTime()*planck.At(Lookback, 10.957), 13.4, 0.05, "common practice, no source")
	within("age at z = 14.32, Myr", 1e3*planck.HubbleTime()*planck.At(Age, 14.32), 290, 5, "common practice, no source")
	const dl = "Davis & Lineweaver 2004, from memory"
	within("particle horizon, Gly", planck.ParticleHorizon()*gly, 46, 0.5, dl)
	within("event horizon, Gly", round.EventHorizon()*gly, 16, 0.5, dl)
	within("Hubble radius, Gly", round.HubbleDistance()*gly, 14, 0.5, dl)
	within("z of the Hubble sphere", round.HubbleSphereRedshift(), 1.46, 0.005, dl)
	within("z of the event horizon", round.EventHorizonRedshift(), 1.8, 0.05, dl)
	within("recession of z = 1100 now, c", round.At(DC, 1100), 3.2, 0.05, dl)
	within("recession of z = 1100 at emission, c", round.At(E, 1100)*round.At(DC, 1100)/1101, 58.1, 0.05, dl)
	within("share of the volume beyond the Hubble sphere", volumes(planck), 0.97, 0.005, "common practice, no source")
	drift := func(z float64) float64 {
		return round.At(Drift, z) / (1 + z) * SpeedOfLight * 1e5 / (round.HubbleTime() * 1e9)
	}
	within("velocity drift at z = 1, cm/s/yr", drift(1), 0.26, 0.01, "Liske et al. 2008, figure, from memory")
	within("velocity drift at z = 4, cm/s/yr", drift(4), -0.51, 0.01, "Liske et al. 2008, figure, from memory")
	within("Hubble time x h", round.HubbleTime()*0.7, 9.78, 0.01, "Hogg 1999, eq. 3")
	within("Hubble distance x h", round.HubbleDistance()*0.7, 3000, 3, "Hogg 1999, eq. 4")
	within("sum of masses over Omega_nu h^2, eV", 0.06/(0.6766*0.6766*(planck.OmegaNu()-planck.OmegaPhoton()*neutrinosPerPhoton*3.046*2/3)), 93, 1, "93 eV: Lesgourgues & Pastor 2006, from memory (92.6 with Neff shared equally)")
}

func TestRefusals(t *testing.T) {
	inf, nan := math.Inf(1), math.NaN()
	good := Params{H0: 70, OmegaM: 0.3, Flat: true, W0: -1, TCMB: 2.7255, Neff: 3.046}
	for _, c := range []struct {
		name, param string
		change      func(*Params)
	}{
		{"no H0", "h0", func(p *Params) { p.H0 = 0 }},
		{"negative H0", "h0", func(p *Params) { p.H0 = -70 }},
		{"infinite H0", "h0", func(p *Params) { p.H0 = inf }},
		{"tiny H0", "h0", func(p *Params) { p.H0 = 1e-300 }},
		{"negative matter", "omega_m", func(p *Params) { p.OmegaM = -0.1 }},
		{"matter is NaN", "omega_m", func(p *Params) { p.OmegaM = nan }},
		{"dark energy is NaN", "omega_de", func(p *Params) { p.Flat, p.OmegaDE = false, nan }},
		{"w0 is infinite", "w0", func(p *Params) { p.W0 = inf }},
		{"wa is NaN", "wa", func(p *Params) { p.Wa = nan }},
		{"negative temperature", "cmb_temperature", func(p *Params) { p.TCMB = -1 }},
		{"negative Neff", "effective_neutrinos", func(p *Params) { p.Neff = -1 }},
		{"negative mass", "neutrino_masses", func(p *Params) { p.NeutrinoMasses = []float64{0, -0.1} }},
		{"mass without temperature", "neutrino_masses", func(p *Params) { p.TCMB, p.NeutrinoMasses = 0, []float64{0.1} }},
		{"mass without neutrinos", "neutrino_masses", func(p *Params) { p.Neff, p.NeutrinoMasses = 0, []float64{0.1} }},
		// Carroll, Press & Turner 1992, eq. 28: no big bang above OL = 1.7134... for Omega_M = 0.3
		{"bounce", "omega_de", func(p *Params) { *p = Params{H0: 70, OmegaM: 0.3, OmegaDE: 1.72, W0: -1} }},
		{"bounce without matter", "omega_de", func(p *Params) { *p = Params{H0: 70, OmegaDE: 1.1, W0: -1} }},
		{"curvature alone is negative", "omega_de", func(p *Params) { *p = Params{H0: 70, OmegaDE: 2, W0: -0.5} }},
		{"dark energy negative and growing", "wa", func(p *Params) { *p = Params{H0: 70, OmegaM: 1.2, Flat: true, W0: -1, Wa: 2} }},
		{"barely negative far out", "omega_m", func(p *Params) { *p = Params{H0: 70, OmegaM: 1.0001, Flat: true, W0: 0.1} }},
	} {
		p := good
		c.change(&p)
		_, err := New(p)
		var pe *ParamError
		if !errors.As(err, &pe) || pe.Param != c.param {
			t.Errorf("%s: New gave %v, want a refusal of %s", c.name, err, c.param)
		}
	}
	_, err := New(Params{H0: -1, OmegaM: nan, W0: inf})
	if joined, ok := err.(interface{ Unwrap() []error }); !ok || len(joined.Unwrap()) != 3 {
		t.Errorf("three bad numbers gave %v, want three errors joined", err)
	}
}

// The border between a big bang and a bounce, for matter and a cosmological
// constant: Carroll, Press & Turner 1992, ARA&A 30, 499, eq. 28 (from memory), for
// Omega_M < 1/2: 4 Omega_M cosh^3(arcosh((1-Omega_M)/Omega_M)/3).
func TestBounceBorder(t *testing.T) {
	for _, om := range []float64{0.01, 0.1, 0.3, 0.45} {
		c := math.Cosh(math.Acosh((1-om)/om) / 3)
		border := 4 * om * c * c * c
		if _, err := New(Params{H0: 70, OmegaM: om, OmegaDE: border * (1 - 1e-6), W0: -1}); err != nil {
			t.Errorf("Omega_M = %g just below the border: %v", om, err)
		}
		if _, err := New(Params{H0: 70, OmegaM: om, OmegaDE: border * (1 + 1e-6), W0: -1}); err == nil {
			t.Errorf("Omega_M = %g just above the border is accepted", om)
		}
	}
}
