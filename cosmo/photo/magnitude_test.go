package photo

import (
	"math"
	"testing"

	"catenrich/internal/fault"
	"catenrich/internal/status"
)

func TestZeroPoints(t *testing.T) {
	for _, c := range []struct {
		unit string
		want float64
	}{{"maggies", 0}, {"nanomaggies", 22.5}, {"microJy", 23.90007}, {"Jy", 8.90007}} {
		got, ok := ZeroPoint(c.unit)
		if !ok {
			t.Errorf("no zero point for %s", c.unit)
		}
		near(t, "zero point of "+c.unit, got, c.want, 5e-6, "3631 Jy, Oke & Gunn 1983")
	}
	if _, ok := ZeroPoint("mJy per beam"); ok {
		t.Error("a zero point for an unknown unit")
	}
}

func TestMagnitudes(t *testing.T) {
	nan := math.NaN()
	const b = 1.4e-10 // maggies
	// An asinh magnitude made by the published definition, eq. 3 of Lupton et
	// al. 1999: mu = -(2.5/ln10) [asinh(x/2b) + ln b].
	asinh := func(flux float64) float64 { return -2.5 / math.Ln10 * (math.Asinh(flux/(2*b)) + math.Log(b)) }
	for _, c := range []struct {
		name   string
		p      Photometer
		value  float64
		want   float64
		status int32
	}{
		{"magnitude", Photometer{}, 19.25, 19.25, 0},
		{"Vega to AB", Photometer{Offset: 0.91}, 19.25, 20.16, 0},
		{"missing", Photometer{}, nan, nan, status.Magnitude},
		{"nanomaggies", Photometer{Measure: Flux, ZeroPoint: 22.5}, 100, 17.5, 0},
		{"flux 0", Photometer{Measure: Flux}, 0, nan, status.Flux},
		{"flux below 0", Photometer{Measure: Flux}, -3, nan, status.Flux},
		{"flux missing", Photometer{Measure: Flux}, nan, nan, status.Magnitude},
		{"asinh, bright", Photometer{Measure: Asinh, Softening: b}, asinh(1e-7), 17.5, 0},
		{"asinh, at the softening", Photometer{Measure: Asinh, Softening: b, Offset: 0.1}, asinh(b), -2.5*math.Log10(b) + 0.1, 0},
		{"asinh, very bright", Photometer{Measure: Asinh, Softening: b}, 3, 3, 0},
		{"asinh, negative flux", Photometer{Measure: Asinh, Softening: b}, asinh(-b), nan, status.Flux},
	} {
		m, st := []float64{0}, []int32{0}
		c.p.Magnitudes(m, []float64{c.value}, st)
		if st[0] != c.status || (m[0] != m[0]) != (c.want != c.want) || math.Abs(m[0]-c.want) > 2e-13 {
			t.Errorf("%s: m = %.16g, status %d, want %.16g, %d", c.name, m[0], st[0], c.want, c.status)
		}
	}
}

// Errors against the difference quotient of the magnitude itself.
func TestMagnitudeErrors(t *testing.T) {
	for _, c := range []struct {
		name      string
		p         Photometer
		value, s  float64
		kind      Spread
		step      float64 // the standard error as a step of the value
		tolerance float64
	}{
		{"magnitude", Photometer{}, 19, 0.05, MagnitudeError, 0.05, 1e-12},
		{"flux", Photometer{Measure: Flux}, 80, 2e-4, FluxError, 2e-4, 1e-9},
		{"inverse variance", Photometer{Measure: Flux}, 80, 1e8, FluxIvar, 1e-4, 1e-9},
		{"asinh, faint", Photometer{Measure: Asinh, Softening: 1e-10}, 24.6, 1e-4, MagnitudeError, 1e-4, 1e-7},
		{"asinh, bright", Photometer{Measure: Asinh, Softening: 1e-10}, 3, 0.01, MagnitudeError, 0.01, 1e-12},
	} {
		m, sm, st := make([]float64, 2), []float64{0}, []int32{0, 0}
		c.p.Magnitudes(m, []float64{c.value - c.step, c.value + c.step}, st)
		c.p.Errors(sm, []float64{c.value}, []float64{c.s}, c.kind, st)
		if st[0] != 0 {
			t.Errorf("%s: status %d", c.name, st[0])
		}
		near(t, c.name, sm[0], math.Abs(m[1]-m[0])/2, c.tolerance, "difference quotient")
	}

	nan := math.NaN()
	flux := Photometer{Measure: Flux}
	for _, c := range []struct {
		name     string
		p        Photometer
		value, s float64
		kind     Spread
		want     int32
	}{
		{"negative", Photometer{}, 19, -0.1, MagnitudeError, status.Error},
		{"missing", Photometer{}, 19, nan, MagnitudeError, status.Error},
		{"ivar 0", flux, 1, 0, FluxIvar, status.Error},
		{"ivar below 0", flux, 1, -4, FluxIvar, status.Error},
		{"no flux", flux, -1, 0.5, FluxError, status.Flux},
		{"no flux, magnitude error", flux, -1, 0.5, MagnitudeError, status.Flux},
		{"asinh, no flux", Photometer{Measure: Asinh, Softening: 1e-10}, 26, 0.5, MagnitudeError, status.Flux},
		{"no value", flux, nan, 0.5, FluxError, status.Magnitude},
	} {
		sm, st := []float64{0}, []int32{0}
		c.p.Errors(sm, []float64{c.value}, []float64{c.s}, c.kind, st)
		if st[0] != c.want || sm[0] == sm[0] {
			t.Errorf("%s: %v, status %d, want NaN, %d", c.name, sm[0], st[0], c.want)
		}
	}
}

func TestPhotometerIsChecked(t *testing.T) {
	for _, p := range []Photometer{
		{Offset: math.NaN()}, {Measure: Flux, ZeroPoint: math.Inf(1)}, {Measure: Asinh}, {Measure: Asinh, Softening: -1},
	} {
		if err := p.Validate("r", false, 0); fault.Of(err) != fault.Config {
			t.Errorf("%+v: %v, want a Config error", p, err)
		}
	}
	if err := (&Photometer{}).Validate("r", true, FluxIvar); fault.Of(err) != fault.Config {
		t.Errorf("a flux error beside a magnitude: %v, want a Config error", err)
	}
	if err := (&Photometer{Measure: Flux}).Validate("r", true, FluxIvar); err != nil {
		t.Error(err)
	}
}

// Schlafly & Finkbeiner 2011, Table 6, R_V = 3.1, from memory: A/E(B-V) for
// SDSS ugriz. The coefficients are the job's; this holds the arithmetic.
func TestExtinction(t *testing.T) {
	for _, c := range []struct{ r, want float64 }{{4.239, 0.4239}, {3.303, 0.3303}, {2.285, 0.2285}, {1.698, 0.1698}, {1.263, 0.1263}} {
		a, st := make([]float64, 2), make([]int32, 2)
		Extinction(a, c.r, []float64{0.1, math.NaN()}, st)
		near(t, "A at E(B-V) = 0.1", a[0], c.want, 1e-15, "Schlafly & Finkbeiner 2011, from memory")
		if a[1] == a[1] || st[1] != status.Input || st[0] != 0 {
			t.Errorf("missing E(B-V): %v, status %v", a[1], st)
		}
	}
}

func TestAbsolute(t *testing.T) {
	term := func(x float64) []float64 { return []float64{x} }
	all := Terms{Apparent: term(19), Extinction: term(0.25), Modulus: term(40), K: term(0.5), Evolution: term(-0.125)}
	m := term(0)
	all.Absolute(m)
	near(t, "M", m[0], 19-0.25-40-0.5+0.125, 0, "exact in binary")
	all.Offset(m)
	near(t, "mu+K+e", m[0], 40.375, 0, "exact in binary")
	bare := Terms{Apparent: term(19), Modulus: term(40)}
	bare.Absolute(m)
	near(t, "M without corrections", m[0], -21, 0, "exact in binary")

	// Lin et al. 1999: M = m - ... + Q (z - z0).
	e := term(0)
	Evolution{Q: 1.5, Z0: 0.1}.Fill(e, term(0.3))
	near(t, "e", e[0], -0.3, 1e-15, "-1.5 (0.3 - 0.1)")
}

func TestLuminosities(t *testing.T) {
	// Willmer 2018, Table 3, from memory: the Sun in SDSS r, AB, is 4.65.
	l := []float64{0, 0}
	Luminosity(l, []float64{4.65, -20.35}, 4.65)
	near(t, "the Sun's luminosity", l[0], 1, 0, "definition")
	near(t, "25 mag brighter", l[1], 1e10, 1e-4, "Pogson")

	st := []int32{0, 0}
	// 1 Mpc = 3.0856775814913673e24 cm (IAU 2015 B2).
	LineLuminosity(l, []float64{2, math.NaN()}, []float64{100, 1}, 1e-17, st)
	want := 4 * math.Pi * 3.0856775814913673e24 * 3.0856775814913673e24 * 1e4 * 2e-17
	near(t, "line luminosity", l[0], want, 1e-14*want, "4 pi D_L^2 F")
	if st[1] != status.Magnitude || l[1] == l[1] {
		t.Errorf("missing flux: %v, %d", l[1], st[1])
	}

	st = []int32{0, 0}
	Radio{Alpha: -0.7, Scale: 1e-3}.Luminosity(l, []float64{5, 5}, []float64{100, 100}, []float64{1, 1}, nil, st)
	want = 4 * math.Pi * 3.0856775814913673e22 * 3.0856775814913673e22 * 1e4 * 5e-29 * math.Pow(2, -0.3)
	near(t, "radio luminosity", l[0], want, 1e-14*want, "4 pi D_L^2 S (1+z)^-(1+alpha)")
	Radio{Scale: 1e-3}.Luminosity(l, []float64{5, math.NaN()}, []float64{100, 100}, []float64{1, 1}, []float64{-0.7, math.NaN()}, st)
	near(t, "radio luminosity, alpha a column", l[0], want, 1e-14*want, "the same")
	if st[1] != status.Magnitude|status.Input {
		t.Errorf("missing flux and alpha: status %d", st[1])
	}

	st = []int32{0, 0}
	Size(l, []float64{3, math.NaN()}, []float64{8, 8}, st)
	if l[0] != 24 || st[1] != status.Input || l[1] == l[1] {
		t.Errorf("sizes %v, status %v", l, st)
	}
}
