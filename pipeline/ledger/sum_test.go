package ledger

import (
	"encoding/json"
	"math"
	"math/big"
	"math/rand/v2"
	"testing"
)

// ratSum is the sum by another road: rational arithmetic of math/big.
func ratSum(v []float64) *big.Rat {
	sum := new(big.Rat)
	for _, x := range v {
		if r := new(big.Rat).SetFloat64(x); r != nil { // nil for NaN and infinities
			sum.Add(sum, r)
		}
	}
	return sum
}

// rat reads the notation of [Sum.Exact] by its definition.
func rat(t *testing.T, exact string) *big.Rat {
	t.Helper()
	f, _, err := big.ParseFloat(exact, 0, 32*limbs, big.ToNearestEven)
	if err != nil {
		t.Fatal(err)
	}
	r, _ := f.Rat(nil)
	if r == nil {
		r = new(big.Rat)
	}
	return r
}

// anyFloat is a float64 of any bits, with the odd kinds more often than chance.
func anyFloat(r *rand.Rand) float64 {
	switch r.IntN(12) {
	case 0:
		return math.Float64frombits(r.Uint64() & (1<<52 - 1) * (1 | 1<<63)) // denormal
	case 1:
		return [...]float64{0, math.Copysign(0, -1), math.NaN(), math.Inf(1), math.Inf(-1),
			math.MaxFloat64, -math.MaxFloat64, math.SmallestNonzeroFloat64, 0x1p-1022, -0x1p-1022}[r.IntN(10)]
	case 2, 3, 4, 5:
		return r.NormFloat64() * 1000
	}
	return math.Float64frombits(r.Uint64())
}

func floats(r *rand.Rand, n int, next func(*rand.Rand) float64) []float64 {
	v := make([]float64, n)
	for i := range v {
		v[i] = next(r)
	}
	return v
}

func sameJSON(t *testing.T, what string, got, want json.Marshaler) {
	t.Helper()
	g, err := got.MarshalJSON()
	if err != nil {
		t.Fatal(err)
	}
	w, err := want.MarshalJSON()
	if err != nil {
		t.Fatal(err)
	}
	if string(g) != string(w) {
		t.Fatalf("%s: %.300s, want %.300s", what, g, w)
	}
}

func TestSumAgainstRationals(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	for _, n := range []int{0, 1, 2, 3, 1023, 1024, 1025, 5000} {
		for range 4 {
			v := floats(r, n, anyFloat)
			s := new(Sum)
			s.Add(v)
			want := ratSum(v)
			if got := rat(t, s.Exact()); got.Cmp(want) != 0 {
				t.Fatalf("the sum of %d numbers is %s, want %s", n, s.Exact(), want.FloatString(20))
			}
			if got, _ := want.Float64(); s.Float64() != got {
				t.Errorf("rounded to %g, want %g", s.Float64(), got)
			}
		}
	}
}

// TestSumExtremes: the cases where a bucket or a limb would overflow first.
func TestSumExtremes(t *testing.T) {
	repeat := func(x float64, n int) []float64 { return floats(nil, n, func(*rand.Rand) float64 { return x }) }
	biggestMantissa := math.Nextafter(2, 1) // all 53 bits set
	cases := []struct {
		name string
		v    []float64
	}{
		{"the greatest mantissa, often", repeat(biggestMantissa, 100_000)},
		{"its negative", repeat(-biggestMantissa, 100_000)},
		{"overflow", repeat(math.MaxFloat64, 3000)},
		{"negative overflow", repeat(-math.MaxFloat64, 3000)},
		{"denormals", repeat(math.SmallestNonzeroFloat64, 3000)},
		{"cancellation", []float64{math.MaxFloat64, 1, -math.MaxFloat64, 0x1p-1074}},
		{"a tie to even", []float64{1, 0x1p-53}},
		{"just over a tie", []float64{1, 0x1p-53, 0x1p-1074}},
		{"minus a little", []float64{-0x1p-1074}},
		{"zero", []float64{1e300, -1e300}},
	}
	for _, c := range cases {
		s := new(Sum)
		s.Add(c.v)
		want := ratSum(c.v)
		if got := rat(t, s.Exact()); got.Cmp(want) != 0 {
			t.Errorf("%s: %s", c.name, s.Exact())
		}
		if got, _ := want.Float64(); s.Float64() != got {
			t.Errorf("%s: rounded to %g, want %g", c.name, s.Float64(), got)
		}
		if s.Count() != int64(len(c.v)) {
			t.Errorf("%s: counted %d, want %d", c.name, s.Count(), len(c.v))
		}
	}
}

// TestSumOrder: the same numbers, in any order, in any pieces, over any number
// of sums merged in any order, read back from JSON at any time: the same bytes.
func TestSumOrder(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	v := floats(r, 10_000, anyFloat)
	want := new(Sum)
	want.Add(v)
	for range 30 {
		r.Shuffle(len(v), func(i, j int) { v[i], v[j] = v[j], v[i] })
		parts := make([]*Sum, 1+r.IntN(9))
		for i := range parts {
			parts[i] = new(Sum)
		}
		for rest := v; len(rest) > 0; {
			n := min(len(rest), 1+r.IntN(3000))
			p := r.IntN(len(parts))
			parts[p].Add(rest[:n])
			rest = rest[n:]
			if r.IntN(4) == 0 {
				parts[p] = reread(t, parts[p])
			}
		}
		r.Shuffle(len(parts), func(i, j int) { parts[i], parts[j] = parts[j], parts[i] })
		got := new(Sum)
		for _, p := range parts {
			got.Merge(p)
		}
		sameJSON(t, "a sum in other pieces", got, want)
	}
}

func reread(t *testing.T, s *Sum) *Sum {
	t.Helper()
	text, err := json.Marshal(s)
	if err != nil {
		t.Fatal(err)
	}
	again := new(Sum)
	if err := json.Unmarshal(text, again); err != nil {
		t.Fatal(err)
	}
	return again
}

func TestSumSpelling(t *testing.T) {
	good := map[string]float64{"0x0p+0": 0, "0x1p+0": 1, "-0x3p-1": -1.5, "0x1p-1074": math.SmallestNonzeroFloat64}
	for text, want := range good {
		s := new(Sum)
		if err := s.setExact(text); err != nil || s.Float64() != want {
			t.Errorf("%s reads as %g, %v; want %g", text, s.Float64(), err, want)
		}
	}
	for _, text := range []string{"", "0", "0x2p+0", "0x1P+0", "0x1p0", "0x01p+0", "-0x0p+0", "0x1p-1075", "0x1p+99999", "0xAp+1", "0x1.8p+0", "+0x1p+0", "0x-1p+0", "0x_1p+0"} {
		if err := new(Sum).setExact(text); err == nil {
			t.Errorf("%q was read as an exact sum", text)
		}
	}
}

func BenchmarkSumAdd(b *testing.B) {
	r := rand.New(rand.NewPCG(5, 6))
	near := floats(r, 8192, func(r *rand.Rand) float64 { return 3000 + 500*r.Float64() })
	cases := []struct {
		name string
		v    []float64
	}{
		{"one octave", near},
		{"ten octaves, both signs", floats(r, 8192, func(r *rand.Rand) float64 { return r.NormFloat64() * 1000 })},
		{"every exponent", floats(r, 8192, func(r *rand.Rand) float64 { return math.Float64frombits(r.Uint64()) })},
		{"1% null", floats(r, 8192, func(r *rand.Rand) float64 {
			if r.IntN(100) == 0 {
				return math.NaN()
			}
			return 3000 + 500*r.Float64()
		})},
	}
	for _, c := range cases {
		b.Run(c.name, func(b *testing.B) {
			s := new(Sum)
			b.ReportAllocs()
			for b.Loop() {
				s.Add(c.v)
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*len(c.v)), "ns/number")
		})
	}
}
