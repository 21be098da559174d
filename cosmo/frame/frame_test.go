package frame

import (
	"math"
	"math/big"
	"math/rand/v2"
	"testing"

	"catenrich/internal/fault"
	"catenrich/internal/status"
)

// near fails unless got is within tol of want.
func near(t *testing.T, what string, got, want, tol float64, source string) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s = %.17g, want %.17g ± %.2g (%s)", what, got, want, tol, source)
	}
}

// one makes Vectors of a single direction.
func one(x, y, z float64) *Vectors {
	return &Vectors{X: []float64{x}, Y: []float64{y}, Z: []float64{z}}
}

func toward(t *testing.T, ra, dec float64) *Vectors {
	t.Helper()
	st := []int32{0}
	var u Vectors
	Directions(&u, []float64{ra}, []float64{dec}, st)
	if st[0] != 0 {
		t.Fatalf("Directions(%v, %v) set status %d", ra, dec, st[0])
	}
	return &u
}

func TestPublishedFrames(t *testing.T) {
	x, y, z := SunInCMB.Apex()
	ra := math.Mod(math.Atan2(y, x)*180/math.Pi+360, 360)
	dec := math.Asin(z) * 180 / math.Pi
	near(t, "CMB apex, right ascension", ra, 167.942, 0.007, "Planck 2018 results I, from memory")
	near(t, "CMB apex, declination", dec, -6.944, 0.007, "Planck 2018 results I, from memory")

	g := math.Sqrt(float64(SunInCMB.gb[0]*SunInCMB.gb[0]) + SunInCMB.gb[1]*SunInCMB.gb[1] + SunInCMB.gb[2]*SunInCMB.gb[2])
	near(t, "dipole speed", g/(1+SunInCMB.gamma1)*speedOfLight, 3362.08e-6/2.7255*speedOfLight, 0.11, "Planck 2018 I, Table 3, from memory")

	r, err := NewRoute(Heliocentric, CMB, true)
	if err != nil {
		t.Fatal(err)
	}
	zf, zo, s := []float64{0}, []float64{0}, []float64{0}
	r.Apply(zf, zo, []float64{0.00082}, s, toward(t, 210.774, 54.274))
	near(t, "z_cmb of a source at z_hel 0.00082", zf[0], 0.00122, 1e-5, "a public redshift compilation, from memory")
	if zo[0] != 0.00082 {
		t.Errorf("z_obs = %v, want the catalogue's own 0.00082", zo[0])
	}

	n := Galactic(121.17, -21.57)
	SunInLocalGroup.SunRedshift(s, one(n[0], n[1], n[2]))
	// The paper's term is c β·n; γ - 1, which it does not have, is 0.17 km/s.
	near(t, "Local Group term, km/s", (SunInLocalGroup.gamma1-s[0])*speedOfLight, 266.5, 0.1, "Karachentsev & Makarov 1996, formula")
}

// Toward, against and across the dipole the Doppler factor has a closed form:
// 1+z_sun = √((1-β)/(1+β)), its inverse, and γ. math/big gives z_cmb.
func TestDipoleClosedForms(t *testing.T) {
	const prec = 200
	f := func(x float64) *big.Float { return new(big.Float).SetPrec(prec).SetFloat64(x) }
	op := func() *big.Float { return new(big.Float).SetPrec(prec) }
	beta := op().Quo(f(369.82), f(speedOfLight))
	up, down := op().Add(f(1), beta), op().Sub(f(1), beta)
	ahead := op().Sqrt(op().Quo(down, up))
	across := op().Quo(f(1), op().Sqrt(op().Mul(up, down)))

	ax, ay, az := SunInCMB.Apex()
	h := math.Hypot(ax, ay)
	for _, c := range []struct {
		name   string
		n      *Vectors
		factor *big.Float
		// eps bounds the rounding of the direction itself, which z_sun = O(β) scales down.
		eps float64
	}{
		{"toward", one(ax, ay, az), ahead, 4e-19},
		{"against", one(-ax, -ay, -az), op().Quo(f(1), ahead), 4e-19},
		{"across", one(-ay/h, ax/h, 0), across, 2e-19},
	} {
		for _, zhel := range []float64{0, 1e-6, 0.001, 0.5, 8} {
			exact, _ := op().Sub(op().Quo(op().Add(f(1), f(zhel)), c.factor), f(1)).Float64()
			s, z := []float64{0}, []float64{0}
			SunInCMB.SunRedshift(s, c.n)
			FromHeliocentric(z, []float64{zhel}, s)
			near(t, "z_cmb "+c.name, z[0], exact, c.eps+4e-16*math.Abs(exact), "closed form, math/big")
			ToHeliocentric(z, z, s)
			near(t, "z_hel again, "+c.name, z[0], zhel, 1e-18+5e-16*zhel, "the inverse")
		}
	}
}

func TestRoutes(t *testing.T) {
	for _, c := range []struct {
		from, to  Frame
		positions bool
		ok        bool
	}{
		{AsGiven, AsGiven, false, true}, {Heliocentric, AsGiven, false, true}, {CMB, CMB, false, true},
		{CMB, AsGiven, true, true}, {Heliocentric, CMB, true, true}, {CMB, LocalGroup, true, true},
		{AsGiven, CMB, true, false}, {Heliocentric, CMB, false, false}, {CMB, LocalGroup, false, false},
		{AsGiven, Heliocentric, true, false}, {CMB, Heliocentric, true, false},
	} {
		_, err := NewRoute(c.from, c.to, c.positions)
		if (err == nil) != c.ok {
			t.Errorf("NewRoute(%v, %v, %v): %v, want ok %v", c.from, c.to, c.positions, err, c.ok)
		}
		if err != nil && fault.Of(err) != fault.Config {
			t.Errorf("NewRoute(%v, %v, %v): class %d, want Config", c.from, c.to, c.positions, fault.Of(err))
		}
	}

	rng := rand.New(rand.NewPCG(1, 2))
	const n = 1000
	ra, dec, z := make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range ra {
		ra[i], dec[i], z[i] = rng.Float64()*360, rng.Float64()*180-90, math.Pow(10, rng.Float64()*6-5)
	}
	var u Vectors
	Directions(&u, ra, dec, make([]int32, n))
	buf := make([][]float64, 6)
	for i := range buf {
		buf[i] = make([]float64, n)
	}
	cmb, _ := NewRoute(Heliocentric, CMB, true)
	group, _ := NewRoute(CMB, LocalGroup, true)
	direct, _ := NewRoute(Heliocentric, LocalGroup, true)
	cmb.Apply(buf[0], buf[1], z, buf[5], &u)
	group.Apply(buf[2], buf[1], buf[0], buf[5], &u)
	direct.Apply(buf[3], buf[4], z, buf[5], &u)
	for i := range z {
		tol := 3e-18 + 8e-16*(z[i]+2e-3)
		near(t, "heliocentric recovered from cmb", buf[1][i], z[i], tol, "inverse")
		near(t, "local-group by way of cmb", buf[2][i], buf[3][i], tol, "composition of Doppler factors")
	}
}

func TestPeculiar(t *testing.T) {
	st := make([]int32, 5)
	z := make([]float64, 5)
	Peculiar(z, []float64{0.01, 0.01, 0.01, 0.01, math.NaN()}, []float64{300, 0, math.NaN(), -3e5, 100}, st)
	near(t, "z_cos", z[0], 1.01/(1+300/speedOfLight)-1, 2e-16, "1+z_cos = (1+z)/(1+v/c)")
	if z[1] != 0.01 {
		t.Errorf("v = 0 moved z to %v", z[1])
	}
	for i, want := range []int32{0, 0, status.Input, status.Redshift, 0} {
		if st[i] != want || i > 1 && z[i] == z[i] {
			t.Errorf("row %d: z %v, status %d, want %d", i, z[i], st[i], want)
		}
	}
}

func TestDirections(t *testing.T) {
	nan := math.NaN()
	ra := []float64{0, 90, 360, 10, -1, 361, nan, 10, math.Inf(1)}
	dec := []float64{0, 0, 90, -91, 0, 0, 0, nan, 0}
	st := make([]int32, len(ra))
	var u Vectors
	Directions(&u, ra, dec, st)
	for i, bad := range []bool{false, false, false, true, true, true, true, true, true} {
		if bad != (st[i] == status.Position) || bad != (u.X[i] != u.X[i]) {
			t.Errorf("(%v, %v): status %d, x %v, want bad %v", ra[i], dec[i], st[i], u.X[i], bad)
		}
	}
	if u.X[1] != 0 || u.Y[1] != 1 || u.X[2] != 0 || u.Z[2] != 1 {
		t.Errorf("axes: %v %v, %v %v", u.X[1], u.Y[1], u.X[2], u.Z[2])
	}
	x, y, z := []float64{0}, []float64{0}, []float64{0}
	Comoving(x, y, z, []float64{100}, toward(t, 30, -30))
	near(t, "comoving x", x[0], 75, 1e-13, "100 cos30 cos30")
	near(t, "comoving y", y[0], 100*math.Sqrt(3)/4, 1e-13, "100 cos30 sin30")
	near(t, "comoving z", z[0], -50, 1e-13, "-100 sin30")
}

func BenchmarkHeliocentricToCMB(b *testing.B) {
	const n = 2048
	ra, dec, z := make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range ra {
		ra[i], dec[i], z[i] = float64(i)*360/n, float64(i)*180/n-90, float64(i+1)/n
	}
	r, _ := NewRoute(Heliocentric, CMB, true)
	zf, zo, scratch, st := make([]float64, n), make([]float64, n), make([]float64, n), make([]int32, n)
	var u Vectors
	u.Resize(n)
	b.ReportAllocs()
	for b.Loop() {
		Directions(&u, ra, dec, st)
		r.Apply(zf, zo, z, scratch, &u)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/n, "ns/row")
}
