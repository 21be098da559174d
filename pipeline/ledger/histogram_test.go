package ledger

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"testing"
)

// key finds the bin of v by its edges, by looking at all of them.
func (a *Axis) keyBySearch(v float64) (key int64, ok bool) {
	if v != v {
		return 0, false
	}
	x := v
	edge := a.Edge
	if a.Scale == "binary" {
		x = v + a.Plus
		edge = a.edgeOfX
	}
	switch {
	case x < edge(a.First):
		return a.First - 1, true
	case x > edge(a.End):
		return a.End, true
	case x == edge(a.End):
		return a.End - 1, true
	}
	for k := a.First; ; k++ {
		if x < edge(k+1) {
			return k, true
		}
	}
}

func TestHistogramBins(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 1))
	axes := []Axis{RedshiftAxis(), FractionAxis("V/Vmax"), CoarseRedshiftAxis(), CoarseMagnitudeAxis("M"), Binary("x", 0, 0, -3, 3)}
	for _, a := range axes {
		var v []float64
		for k := a.First; k <= a.End; k++ { // the edges, and their neighbours
			e := a.Edge(k)
			v = append(v, e, math.Nextafter(e, math.Inf(-1)), math.Nextafter(e, math.Inf(1)))
		}
		for range 2000 {
			v = append(v, a.Edge(a.First+r.Int64N(a.bins()))+r.NormFloat64())
		}
		v = append(v, math.NaN(), math.Inf(1), math.Inf(-1), 0, math.Copysign(0, -1), 1e300, -1e300, -1)
		want := map[int64]int64{}
		for _, x := range v {
			if k, ok := a.keyBySearch(x); ok {
				want[k]++
			}
		}
		h := NewHistogram(a)
		for _, x := range v {
			h.Add([]float64{x})
		}
		got := map[int64]int64{}
		for c := range h.Cells {
			got[c.Keys[0]] = c.Count
		}
		for k, n := range want {
			if got[k] != n {
				t.Errorf("axis %q: bin %d holds %d, want %d", a.Name, k, got[k], n)
			}
		}
		if len(got) != len(want) {
			t.Errorf("axis %q: %d bins in use, want %d", a.Name, len(got), len(want))
		}
	}
}

// TestHistogramTenths: whole tenths of a magnitude start their bins, as a
// reader expects who has the numbers in decimal.
func TestHistogramTenths(t *testing.T) {
	h := NewHistogram(MagnitudeAxis("M"))
	for k := -300; k <= 300; k++ {
		h.Add([]float64{float64(k) / 10})
	}
	bins := 0
	for c := range h.Cells {
		bins++
		if c.Count != 1 {
			t.Errorf("bin %d holds %d, want 1", c.Keys[0], c.Count)
		}
	}
	if bins != 601 {
		t.Errorf("%d bins, want 601", bins)
	}
}

func TestHistogramOrder(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 3))
	x := floats(r, 20_000, func(r *rand.Rand) float64 { return math.Abs(r.NormFloat64()) })
	y := floats(r, 20_000, func(r *rand.Rand) float64 { return 40 + 5*r.NormFloat64() })
	x[5], y[6], x[7], y[7] = math.NaN(), math.NaN(), -2, 1e9
	want := NewHistogram(CoarseRedshiftAxis(), CoarseMagnitudeAxis("mu"))
	want.AddPairs(x, y)
	for range 10 {
		r.Shuffle(len(x), func(i, j int) { x[i], x[j], y[i], y[j] = x[j], x[i], y[j], y[i] })
		got := NewHistogram(want.Axes()...)
		for from := 0; from < len(x); {
			to := min(len(x), from+1+r.IntN(5000))
			part := NewHistogram(want.Axes()...)
			part.AddPairs(x[from:to], y[from:to])
			text, err := json.Marshal(part)
			if err != nil {
				t.Fatal(err)
			}
			again := new(Histogram)
			if err := json.Unmarshal(text, again); err != nil {
				t.Fatal(err)
			}
			if err := got.Merge(again); err != nil {
				t.Fatal(err)
			}
			from = to
		}
		sameJSON(t, "a plane in other pieces", got, want)
	}
	total := int64(0)
	for c := range want.Cells {
		total += c.Count
	}
	if total != 19_998 {
		t.Errorf("%d pairs counted, want all 20000 but the two with a NaN", total)
	}
}

func TestHistogramRefuses(t *testing.T) {
	if err := NewHistogram(RedshiftAxis()).Merge(NewHistogram(FractionAxis("f"))); err == nil {
		t.Error("histograms over different axes were added")
	}
	for _, text := range []string{
		`{"axes":[],"cells":[]}`,
		`{"axes":[{"name":"x","scale":"linear","per_unit":1,"first":0,"end":9007199254740991}],"cells":[]}`,
		`{"axes":[{"name":"x","scale":"linear","per_unit":1,"first":5,"end":5}],"cells":[]}`,
		`{"axes":[{"name":"x","scale":"log","first":0,"end":5}],"cells":[]}`,
		`{"axes":[{"name":"x","scale":"binary","bits":60,"first":0,"end":5}],"cells":[]}`,
		`{"axes":[{"name":"x","scale":"linear","per_unit":1,"first":0,"end":5}],"cells":[[6,1]]}`,
		`{"axes":[{"name":"x","scale":"linear","per_unit":1,"first":0,"end":5}],"cells":[[-9223372036854775808,1]]}`,
		`{"axes":[{"name":"x","scale":"linear","per_unit":1,"first":0,"end":5}],"cells":[[1,-1]]}`,
		`{"axes":[{"name":"x","scale":"linear","per_unit":1,"first":0,"end":5}],"cells":[[1]]}`,
	} {
		if err := json.Unmarshal([]byte(text), new(Histogram)); err == nil {
			t.Errorf("%s was read as a histogram", text)
		}
	}
}

func TestExtent(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 9))
	v := floats(r, 5000, anyFloat)
	want := new(Extent)
	want.Add(v)
	low, high, count := math.Inf(1), math.Inf(-1), int64(0)
	for _, x := range v {
		if !math.IsNaN(x) && !math.IsInf(x, 0) {
			low, high, count = math.Min(low, x), math.Max(high, x), count+1
		}
	}
	if l, h := want.Range(); l != low || h != high || want.Count() != count {
		t.Errorf("%d numbers from %g to %g, want %d from %g to %g", want.Count(), l, h, count, low, high)
	}
	for range 10 {
		r.Shuffle(len(v), func(i, j int) { v[i], v[j] = v[j], v[i] })
		got, cut := new(Extent), r.IntN(len(v))
		part := new(Extent)
		part.Add(v[cut:])
		got.Merge(part)
		part = new(Extent)
		part.Add(v[:cut])
		got.Merge(part)
		sameJSON(t, "an extent in other pieces", got, want)
	}
	zeros := new(Extent)
	zeros.Add([]float64{math.Copysign(0, -1), 0})
	if l, h := zeros.Range(); math.Signbit(l) || math.Signbit(h) {
		t.Error("a zero kept its sign, and with it the order of the numbers")
	}
	if text, _ := json.Marshal(new(Extent)); string(text) != `{"count":0}` {
		t.Errorf("an empty extent is %s", text)
	}
}

func TestAddAllocatesNothing(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 7))
	v := floats(r, 4096, anyFloat)
	s, e, h, p := new(Sum), new(Extent), NewHistogram(RedshiftAxis()), NewHistogram(CoarseRedshiftAxis(), CoarseMagnitudeAxis("mu"))
	if n := testing.AllocsPerRun(20, func() { s.Add(v); e.Add(v); h.Add(v); p.AddPairs(v, v) }); n != 0 {
		t.Errorf("%g allocations, want none", n)
	}
}

func BenchmarkHistogramAdd(b *testing.B) {
	r := rand.New(rand.NewPCG(5, 6))
	z := floats(r, 8192, func(r *rand.Rand) float64 { return r.Float64() * 2 })
	m := floats(r, 8192, func(r *rand.Rand) float64 { return 20 + 3*r.NormFloat64() })
	redshift, magnitude := NewHistogram(RedshiftAxis()), NewHistogram(MagnitudeAxis("m"))
	plane, extent := NewHistogram(CoarseRedshiftAxis(), CoarseMagnitudeAxis("mu")), new(Extent)
	for _, c := range []struct {
		name string
		add  func()
	}{
		{"binary", func() { redshift.Add(z) }},
		{"linear", func() { magnitude.Add(m) }},
		{"plane", func() { plane.AddPairs(z, m) }},
		{"extent", func() { extent.Add(m) }},
	} {
		b.Run(c.name, func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				c.add()
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*len(z)), "ns/number")
		})
	}
}
