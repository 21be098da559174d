package exact

import (
	"math"
	"math/big"
	"math/rand/v2"
	"testing"
)

// A function under test, over a range, with the error its comment promises.
type function struct {
	name      string
	ours      func(float64) float64
	judge     func(*big.Float) *big.Float
	low, high float64
	ulps      float64
}

var functions = []function{
	{"Exp", Exp, bigExp, -700, 709, 0.51},
	{"Exp", Exp, bigExp, -1, 1, 0.51},
	{"Expm1", Expm1, bigExpm1, -40, 100, 1},
	{"Expm1", Expm1, bigExpm1, -0.02, 0.02, 1},
	{"Expm1", Expm1, bigExpm1, -1, 1, 1},
	{"Exp10", Exp10, bigExp10, -300, 300, 0.52},
	{"Exp10", Exp10, bigExp10, -5, 5, 0.52},
	{"Log", Log, bigLog, 0, 1e300, 0.51},
	{"Log", Log, bigLog, 0.5, 2, 0.51},
	{"Log", Log, bigLog, 0.99, 1.01, 0.51},
	{"Log1p", Log1p, bigLog1p, -0.9, 3, 1},
	{"Log1p", Log1p, bigLog1p, -0.01, 0.01, 1},
	{"Log10", Log10, bigLog10, 0, 1e5, 0.52},
	{"Log10", Log10, bigLog10, 0.98, 1.02, 0.52},
	{"Sin", Sin, bigSin, -7, 7, 0.8},
	{"Sin", Sin, bigSin, -1e6, 1e6, 0.8},
	{"Cos", Cos, bigCos, -7, 7, 0.8},
	{"Cos", Cos, bigCos, -1e6, 1e6, 0.8},
	{"Sinh", Sinh, bigSinh, -1, 1, 1},
	{"Sinh", Sinh, bigSinh, -700, 700, 1},
	{"Cosh", Cosh, bigCosh, -1, 1, 0.6},
	{"Cosh", Cosh, bigCosh, -700, 700, 0.6},
	{"Asin", Asin, bigAsin, -1, 1, 2},
	{"Asin", Asin, bigAsin, -1e-3, 1e-3, 2},
}

// ulps returns the distance of got from want in units in want's last place.
func ulps(got float64, want *big.Float) float64 {
	w, _ := want.Float64()
	d := zero().Sub(newBig(got), want)
	_, e := math.Frexp(w)
	v, _ := zero().SetMantExp(d, 53-max(e, -1021)).Float64()
	return math.Abs(v)
}

func TestErrors(t *testing.T) {
	n := 1000
	if testing.Short() {
		n = 300
	}
	r := rand.New(rand.NewPCG(7, 7))
	for _, f := range functions {
		worst, at := 0.0, 0.0
		for range n {
			x := f.low + (f.high-f.low)*r.Float64()
			if u := ulps(f.ours(x), f.judge(newBig(x))); !(u <= worst) {
				worst, at = u, x
			}
		}
		t.Logf("%-6s in [%g, %g]: %.3f ulp", f.name, f.low, f.high, worst)
		if !(worst <= f.ulps) {
			t.Errorf("%s(%.17g) is off by %.3f ulp, promised %g", f.name, at, worst, f.ulps)
		}
	}
}

func TestTwoArguments(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 8))
	var atan, pow float64
	for range 3000 {
		y, x := r.NormFloat64()*math.Exp(3*r.NormFloat64()), r.NormFloat64()
		want := bigAtan(zero().Quo(newBig(y), newBig(x)))
		if x < 0 {
			want.Add(want, zero().Mul(piBig, newBig(math.Copysign(1, y))))
		}
		atan = max(atan, ulps(Atan2(y, x), want))
		base := math.Exp(5 * r.NormFloat64())
		power := 20 * r.NormFloat64()
		if l := math.Abs(power * math.Log(base)); l < 700 {
			pow = max(pow, ulps(Pow(base, power), bigExp(zero().Mul(newBig(power), bigLog(newBig(base))))))
		}
	}
	t.Logf("Atan2 %.3f ulp, Pow %.3f ulp", atan, pow)
	if !(atan <= 1.1) || !(pow <= 1) {
		t.Errorf("Atan2 is off by %.3f ulp, promised 1.1; Pow by %.3f, promised 1", atan, pow)
	}
}

func TestTables(t *testing.T) {
	two := func(what string, hi, lo float64, want *big.Float) {
		t.Helper()
		rest := zero().Sub(want, newBig(hi))
		if r, _ := rest.Float64(); math.Abs(r-lo) > 1e-15*math.Abs(lo)+1e-37 {
			t.Errorf("%s: %x + %x, want the rest %x", what, hi, lo, r)
		}
	}
	two("ln 2", ln2Hi, ln2Lo, ln2Big())
	two("ln 10", ln10Hi, ln10Lo, ln10Big)
	two("log10 2", log2Hi, log2Lo, bigLog10(newBig(2)))
	two("ln 2/128", ln2Over128Hi, ln2Over128Lo, zero().SetMantExp(ln2Big(), -7))
	two("1/ln 10", invLn10Hi, invLn10Lo, zero().Quo(newBig(1), ln10Big))
	half := zero().SetMantExp(piBig, -1)
	two("pi/2", 2*piOver4, piOver2Lo, half)
	two("pi/2 in parts", piOver2A, piOver2B+piOver2C, zero().Add(half, newBig(-piOver2D)))
	for i, c := range exp2Table {
		two("2^(i/128)", c.hi, c.lo, bigExp(zero().Mul(ln2Big(), newBig(float64(i)/128))))
	}
	for i, c := range logTable {
		f := newBig(0.75 + float64(i)/256)
		if i > 64 {
			f = newBig(1 + float64(i-64)/128)
		}
		two("ln F", c.ln, c.lnLo, bigLog(f))
		two("log10 F", c.log10, c.l10Lo, bigLog10(f))
		if inv, _ := zero().Quo(newBig(1), f).Float64(); inv != c.inv {
			t.Errorf("1/F is %x, want %x", c.inv, inv)
		}
	}
	for i, c := range atanTable {
		two("atan", c.hi, c.lo, bigAtan(newBig(float64(i)/32)))
	}
}

// Special values are those of package math.
func TestSpecialValues(t *testing.T) {
	inf, nan := math.Inf(1), math.NaN()
	values := []float64{0, math.Copysign(0, -1), 1, -1, 2, -2, 3, -3, 0.5, -0.5, inf, -inf, nan, 1e300, -1e300, 1e-300, 5e-324, -5e-324, math.MaxFloat64}
	same := func(what string, got, want float64, args ...float64) {
		t.Helper()
		if math.Float64bits(got) == math.Float64bits(want) || got != got && want != want {
			return
		}
		if math.Abs(got-want) <= 4e-16*math.Abs(want) && got != 0 && !math.IsInf(got, 0) {
			return // ordinary values are TestErrors' business
		}
		t.Errorf("%s%v = %g, want %g", what, args, got, want)
	}
	for _, x := range values {
		same("Exp", Exp(x), math.Exp(x), x)
		same("Expm1", Expm1(x), math.Expm1(x), x)
		if x > 0 && x < 0x1p-1022 { // math.Log is wrong there on amd64
			for _, f := range []function{{"Log", Log, bigLog, 0, 0, 0.51}, {"Log10", Log10, bigLog10, 0, 0, 0.52}} {
				if u := ulps(f.ours(x), f.judge(newBig(x))); u > f.ulps {
					t.Errorf("%s(%g) is off by %.3f ulp", f.name, x, u)
				}
			}
			continue
		}
		same("Log", Log(x), math.Log(x), x)
		same("Log1p", Log1p(x), math.Log1p(x), x)
		same("Log10", Log10(x), math.Log10(x), x)
		same("Exp10", Exp10(x), math.Pow(10, x), x)
		same("Sinh", Sinh(x), math.Sinh(x), x)
		same("Cosh", Cosh(x), math.Cosh(x), x)
		same("Asin", Asin(x), math.Asin(x), x)
		for _, y := range values {
			if y == 0 || y/x != 0 || x > 0 { // where y/x underflows math.Atan2 loses the sign
				same("Atan2", Atan2(y, x), math.Atan2(y, x), y, x)
			}
			same("Pow", Pow(x, y), math.Pow(x, y), x, y)
		}
	}
	for _, x := range []float64{inf, -inf, nan, 1e7} {
		if !math.IsNaN(Sin(x)) || !math.IsNaN(Cos(x)) {
			t.Errorf("Sin or Cos of %g is a number", x)
		}
	}
	same("Sin", Sin(math.Copysign(0, -1)), math.Copysign(0, -1))
}

func TestPowersOfTen(t *testing.T) {
	want := 1.0
	for n := range 23 {
		if got := Exp10(float64(n)); got != want {
			t.Errorf("Exp10(%d) = %g, want %g", n, got, want)
		}
		if got := Log10(want); got != float64(n) {
			t.Errorf("Log10(%g) = %.17g, want %d", want, got, n)
		}
		want *= 10
	}
}

func TestLog10Slice(t *testing.T) {
	x := []float64{-1, 0, 5e-324, 1e-310, 0.3, 1, 1.0000001, 7e5, math.MaxFloat64, math.Inf(1), math.NaN()}
	r := rand.New(rand.NewPCG(2, 2))
	for range 10000 {
		x = append(x, math.Exp(1400*r.Float64()-700), 0.9+0.2*r.Float64())
	}
	got := make([]float64, len(x)+1)
	Log10Slice(got, x)
	for i, v := range x {
		if want := Log10(v); math.Float64bits(got[i]) != math.Float64bits(want) && want == want {
			t.Errorf("Log10Slice of %g is %g, Log10 %g", v, got[i], want)
		}
	}
}

func BenchmarkLog10Slice(b *testing.B) {
	x, out := make([]float64, 2048), make([]float64, 2048)
	r := rand.New(rand.NewPCG(1, 1))
	for i := range x {
		x[i] = 1e4 * r.Float64()
	}
	b.SetBytes(8 * 2048)
	for b.Loop() {
		Log10Slice(out, x)
	}
	b.ReportMetric(b.Elapsed().Seconds()*1e9/float64(2048*b.N), "ns/row")
}

func BenchmarkExp(b *testing.B) {
	x, out := make([]float64, 2048), make([]float64, 2048)
	r := rand.New(rand.NewPCG(1, 1))
	for i := range x {
		x[i] = 20*r.Float64() - 10
	}
	b.SetBytes(8 * 2048)
	for b.Loop() {
		for i, v := range x {
			out[i] = Exp(v)
		}
	}
	b.ReportMetric(b.Elapsed().Seconds()*1e9/float64(2048*b.N), "ns/row")
}

// TestSinCos holds that both at once have the bits of each alone.
func TestSinCos(t *testing.T) {
	rng := rand.New(rand.NewPCG(6, 7))
	angles := []float64{0, math.Copysign(0, -1), 1e-300, 0x1p-28, math.Pi / 4, math.Nextafter(math.Pi/4, 1), math.Pi / 2, math.Pi, 1 << 20, 1<<20 + 1, math.Inf(1), math.NaN()}
	for range 100_000 {
		angles = append(angles, 20*(rng.Float64()-0.5))
	}
	for _, x := range angles {
		for _, x := range []float64{x, -x} {
			sin, cos := SinCos(x)
			if math.Float64bits(sin) != math.Float64bits(Sin(x)) || math.Float64bits(cos) != math.Float64bits(Cos(x)) {
				t.Fatalf("SinCos(%v) = %v, %v, want %v, %v", x, sin, cos, Sin(x), Cos(x))
			}
		}
	}
}
