package delim

import (
	"flag"
	"math"
	"math/big"
	"math/rand/v2"
	"strconv"
	"strings"
	"testing"
)

var many = flag.Int("many", 50_000, "random numbers of each distribution to format")

// wantForm lays out what strconv finds the shortest digits to be, the plain
// way: the judge of AppendFloat.
func wantForm(v float64, bitSize, precision int) string {
	text := strconv.FormatFloat(v, 'e', precision, bitSize)
	sign := ""
	if text[0] == '-' {
		sign, text = "-", text[1:]
	}
	mantissa, power, _ := strings.Cut(text, "e")
	digits := strings.TrimRight(strings.Replace(mantissa, ".", "", 1), "0")
	if digits == "" {
		return sign + "0"
	}
	x, _ := strconv.Atoi(power)
	switch {
	case x < minPlain || x > maxPlain:
		if len(digits) > 1 {
			digits = digits[:1] + "." + digits[1:]
		}
		return sign + digits + "e" + strconv.Itoa(x)
	case x < 0:
		return sign + "0." + strings.Repeat("0", -x-1) + digits
	case len(digits) <= x+1:
		return sign + digits + strings.Repeat("0", x+1-len(digits))
	}
	return sign + digits[:x+1] + "." + digits[x+1:]
}

func TestAppendFloatForm(t *testing.T) {
	for _, c := range []struct {
		v    float64
		want string
	}{
		{0, "0"}, {math.Copysign(0, -1), "-0"}, {1, "1"}, {-1.5, "-1.5"}, {1000000, "1000000"},
		{0.1, "0.1"}, {0.00001, "0.00001"}, {0.0000099, "9.9e-6"}, {1e16, "10000000000000000"},
		{1e17, "1e17"}, {99999999999999984, "99999999999999980"}, {1.25e17, "1.25e17"}, {0.3, "0.3"}, {1.0 / 3, "0.3333333333333333"},
		{5e-324, "5e-324"}, {math.MaxFloat64, "1.7976931348623157e308"}, {123456789.125, "123456789.125"},
		{12345678, "12345678"}, {123456789, "123456789"}, {4282.7494, "4282.7494"}, {1.2e12, "1200000000000"},
	} {
		if got := string(AppendFloat(nil, c.v)); got != c.want {
			t.Errorf("AppendFloat(%g) = %s, want %s", c.v, got, c.want)
		}
	}
}

// distributions are where random numbers are drawn from.
var distributions = []struct {
	name string
	draw func(*rand.Rand) float64
}{
	{"bits", func(r *rand.Rand) float64 {
		for {
			if v := math.Float64frombits(r.Uint64()); v-v == 0 {
				return v
			}
		}
	}},
	{"redshift", func(r *rand.Rand) float64 { return r.ExpFloat64() }},
	{"distance", func(r *rand.Rand) float64 { return 4000 * r.ExpFloat64() }},
	{"volume", func(r *rand.Rand) float64 { return math.Exp(30 * r.Float64()) }},
	{"decimal", func(r *rand.Rand) float64 {
		return float64(r.Int64N(1e9)) / math.Pow10(r.IntN(12))
	}},
	{"integer", func(r *rand.Rand) float64 { return float64(r.Int64N(1<<r.IntN(62) + 1)) }},
	{"float32", func(r *rand.Rand) float64 { return float64(float32(r.NormFloat64())) }},
	{"edges", func(r *rand.Rand) float64 { // next to powers of two and ten
		v := math.Ldexp(1, r.IntN(2000)-1050)
		if r.IntN(2) == 0 {
			v = math.Pow10(r.IntN(628) - 320)
		}
		b := math.Float64bits(v) + uint64(r.IntN(5)) - 2
		if v := math.Float64frombits(b); v-v == 0 {
			return v
		}
		return v
	}},
	{"subnormal", func(r *rand.Rand) float64 { return math.Float64frombits(r.Uint64N(1 << (1 + r.IntN(53)))) }},
}

func TestAppendFloatAgreesWithStrconv(t *testing.T) {
	for i, d := range distributions {
		t.Run(d.name, func(t *testing.T) {
			t.Parallel()
			r := rand.New(rand.NewPCG(uint64(i), 7))
			var got []byte
			for range *many {
				v := d.draw(r)
				if got = AppendFloat(got[:0], v); string(got) != wantForm(v, 64, -1) {
					t.Fatalf("AppendFloat(%x) = %s, want %s", v, got, wantForm(v, 64, -1))
				}
			}
		})
	}
}

func TestAppendFloat32AgreesWithStrconv(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 7))
	for i := range *many {
		v := float64(math.Float32frombits(r.Uint32()))
		if i%2 == 0 {
			v = r.ExpFloat64() * 1000
		}
		if v-v != 0 || v == 0 {
			continue
		}
		if got, want := string(AppendFloat32(nil, v)), wantForm(float64(float32(v)), 32, -1); got != want {
			t.Fatalf("AppendFloat32(%x) = %s, want %s", v, got, want)
		}
	}
	for _, c := range []struct {
		v    float64
		want string
	}{{1e42, "1e42"}, {-3e-60, "-3e-60"}, {0.1, "0.1"}, {0, "0"}, {1e-45, "1e-45"}} {
		if got := string(AppendFloat32(nil, c.v)); got != c.want {
			t.Errorf("AppendFloat32(%g) = %s, want %s", c.v, got, c.want)
		}
	}
}

func TestAppendDigits(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 7))
	for i := range *many {
		v := distributions[i%len(distributions)].draw(r)
		n := 1 + r.IntN(17)
		want := wantForm(v, 64, n-1)
		if short := wantForm(v, 64, -1); significant([]byte(short)) <= n {
			want = short
		}
		if got := string(AppendDigits(nil, v, n)); got != want {
			t.Fatalf("AppendDigits(%x, %d) = %s, want %s", v, n, got, want)
		}
	}
}

func TestPowersAreNormalized(t *testing.T) {
	for i, g := range powers {
		if g.hi>>63 == 0 {
			t.Errorf("10^%d has no leading bit", i+minPower)
		}
	}
	if powers[-minPower] != (power{1 << 63, 0}) {
		t.Errorf("10^0 is %x", powers[-minPower])
	}
}

// TestLogarithms checks the integer forms against exact powers.
func TestLogarithms(t *testing.T) {
	pow := func(base, e int64) *big.Rat {
		p := new(big.Rat).SetInt(new(big.Int).Exp(big.NewInt(base), big.NewInt(max(e, -e)), nil))
		if e < 0 {
			p.Inv(p)
		}
		return p
	}
	floorLog := func(base int64, of *big.Rat, guess int) bool {
		return pow(base, int64(guess)).Cmp(of) <= 0 && of.Cmp(pow(base, int64(guess)+1)) < 0
	}
	for q := -1074; q <= 971; q++ {
		two := pow(2, int64(q))
		if !floorLog(10, two, floorLog10Pow2(q)) {
			t.Errorf("floorLog10Pow2(%d) = %d", q, floorLog10Pow2(q))
		}
		if !floorLog(10, two.Mul(two, big.NewRat(3, 4)), floorLog10ThreeQuartersPow2(q)) {
			t.Errorf("floorLog10ThreeQuartersPow2(%d) = %d", q, floorLog10ThreeQuartersPow2(q))
		}
	}
	for k := minPower; k <= maxPower; k++ {
		if !floorLog(2, pow(10, int64(k)), floorLog2Pow10(k)) {
			t.Errorf("floorLog2Pow10(%d) = %d", k, floorLog2Pow10(k))
		}
	}
}

func FuzzAppendFloat(f *testing.F) {
	f.Add(uint64(1))
	f.Add(math.Float64bits(1e23))
	f.Fuzz(func(t *testing.T, b uint64) {
		v := math.Float64frombits(b)
		if v-v != 0 {
			return
		}
		got := AppendFloat([]byte("x,"), v)
		if want := "x," + wantForm(v, 64, -1); string(got) != want {
			t.Fatalf("AppendFloat(%x) = %s, want %s", v, got, want)
		}
		back, ok := ParseFloat(got[2:])
		if !ok || math.Float64bits(back) != b {
			t.Fatalf("%s reads back as %v", got, back)
		}
	})
}

func BenchmarkAppendFloat(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 2))
	values := make([]float64, 4096)
	for i := range values {
		values[i] = 4000 * r.ExpFloat64()
	}
	forms := []struct {
		name string
		f    func([]byte, float64) []byte
	}{
		{"ours", AppendFloat},
		{"strconv", func(dst []byte, v float64) []byte { return strconv.AppendFloat(dst, v, 'g', -1, 64) }},
		{"narrow", AppendFloat32},
		{"digits=8", func(dst []byte, v float64) []byte { return AppendDigits(dst, v, 8) }},
	}
	for _, form := range forms {
		b.Run(form.name, func(b *testing.B) {
			b.ReportAllocs()
			var out []byte
			for b.Loop() {
				out = out[:0]
				for _, v := range values {
					out = form.f(out, v)
				}
			}
			b.SetBytes(int64(len(out)))
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(len(values)), "ns/number")
		})
	}
}
