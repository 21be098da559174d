package report

import (
	"bytes"
	"crypto/sha256"
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"regexp"
	"strings"
	"testing"

	"catenrich/internal/publish"
	"catenrich/internal/status"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/job"
	"catenrich/pipeline/ledger"
)

// night is an invented output: rows redshifts of which a share is missing.
type night struct {
	unit          string
	rows, missing int
	rejects       int64
	stretch       float64 // of every second redshift
	from          uint64  // seed
	h0            float64
	band          string
	vmax          func(r *rand.Rand) float64 // V/Vmax; nil is even
}

// manifest makes what a run would have left of such an output.
func (n night) manifest(t testing.TB) *ledger.Manifest {
	t.Helper()
	band := n.band
	if band == "" {
		band = "r"
	}
	faint := 19.5
	s := job.Settings{
		OutputVersion: 1, Catalogue: map[job.Role]string{}, Missing: map[job.Role]job.Numbers{}, LengthUnit: "Mpc",
		Cosmologies: []job.ModelSettings{{H0: max(n.h0, 70), OmegaM: 0.3, Flat: true, W0: -1}},
		Bands:       []job.BandSettings{{Name: band, K: job.KSettings{Kind: "power_law", Alpha: -1}}},
		Selections: []job.SelectionSettings{{
			Name: "main", Area: 100, Corrected: true, Redshift: job.Numbers{0.01, 0.5}, Limits: []job.LimitSettings{{Band: band, Faint: &faint}},
		}},
	}
	canonical, err := s.Canonical()
	if err != nil {
		t.Fatal(err)
	}
	m := &ledger.Manifest{ConfigHash: sha256.Sum256(canonical), Settings: canonical, OutputVersion: 1, Unit: n.unit, Tally: *n.tally(band)}
	m.Tally.Rejects = n.rejects
	m.Output.Rows, m.Input.Rows = int64(n.rows), int64(n.rows)+n.rejects
	m.Output.SHA256 = sha256.Sum256([]byte(n.unit))
	text, err := ledger.Encode(m)
	if err != nil {
		t.Fatal(err)
	}
	if m, err = ledger.Parse(text); err != nil {
		t.Fatal(err)
	}
	return m
}

func (n night) tally(band string) *ledger.Tally {
	r := rand.New(rand.NewPCG(n.from, 7))
	z, mag, vmax, weight := make([]float64, n.rows), make([]float64, n.rows), make([]float64, n.rows), make([]float64, n.rows)
	bits := make([]int32, n.rows)
	for i := range z {
		z[i] = 0.02 + 0.5*r.Float64()*r.Float64()
		mag[i], vmax[i], weight[i] = -23+4*r.Float64(), r.Float64(), 1e-6*(1+r.Float64())
		if n.vmax != nil {
			vmax[i] = n.vmax(r)
		}
		if i%2 == 0 && n.stretch > 0 {
			z[i] *= n.stretch
		}
		if i < n.missing {
			z[i], mag[i], vmax[i], weight[i], bits[i] = math.NaN(), math.NaN(), math.NaN(), math.NaN(), status.Missing
		}
	}
	t := &ledger.Tally{
		Extents:    map[string]*ledger.Extent{columns.RedshiftStatistic: {}},
		Sums:       map[string]*ledger.Sum{columns.RedshiftStatistic: {}},
		Histograms: map[string]*ledger.Histogram{},
		Densities:  map[string]*ledger.Density{},
	}
	t.AddRows(bits)
	t.Extents[columns.RedshiftStatistic].Add(z)
	t.Sums[columns.RedshiftStatistic].Add(z)
	histogram := func(name string, v []float64, axes ...ledger.Axis) {
		h := ledger.NewHistogram(axes...)
		if len(axes) == 2 {
			h.AddPairs(z, v)
		} else {
			h.Add(v)
		}
		t.Histograms[name] = h
	}
	absolute := "absolute_magnitude_" + band
	histogram(columns.RedshiftStatistic, z, ledger.RedshiftAxis())
	histogram(columns.RedshiftOctaves, z, ledger.RedshiftOctaveAxis())
	histogram("v_over_v_max_main", vmax, ledger.FractionAxis("v_over_v_max_main"))
	histogram(absolute+"_error", weight, ledger.ErrorAxis(absolute+"_error"))
	histogram(columns.PairName(absolute, columns.RedshiftStatistic), mag, ledger.PlaneRedshiftAxis(), ledger.PlaneMagnitudeAxis(absolute))
	d := ledger.NewDensity(ledger.DensityMagnitudeAxis(absolute))
	d.Add(mag, weight)
	t.Densities[columns.PairName("vmax_weight_main", absolute)] = d
	for _, name := range []string{absolute, absolute + "_error", "v_over_v_max_main", "vmax_weight_main"} {
		c := &ledger.Column{Name: name, Values: int64(n.rows - n.missing), Nulls: int64(n.missing)}
		c.Reasons[0] = int64(n.missing)
		if name == "v_over_v_max_main" {
			c.Sum = new(ledger.Sum)
			c.Sum.Add(vmax)
		}
		t.Columns = append(t.Columns, c)
	}
	return t
}

// release adds up invented outputs.
func release(t testing.TB, nights ...night) *Release {
	t.Helper()
	var b Builder
	for _, n := range nights {
		if err := b.Add(n.manifest(t)); err != nil {
			t.Fatal(err)
		}
	}
	r, err := b.Release()
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func pageOf(t testing.TB, r, before *Release) string {
	t.Helper()
	var b bytes.Buffer
	if err := Write(&b, r, before); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// TestOrder: manifests in any order give the same bytes.
func TestOrder(t *testing.T) {
	var nights []night
	for i := range 6 {
		nights = append(nights, night{unit: fmt.Sprintf("field-%d.csv", i), rows: 300 * (i + 1), missing: 10 * i, rejects: int64(i), from: uint64(i)})
	}
	want := pageOf(t, release(t, nights...), nil)
	for seed := range uint64(5) {
		rand.New(rand.NewPCG(seed, 1)).Shuffle(len(nights), func(i, j int) { nights[i], nights[j] = nights[j], nights[i] })
		if pageOf(t, release(t, nights...), nil) != want {
			t.Fatal("the page depends on the order of the manifests")
		}
	}
	for _, part := range []string{"Luminosity function in r: main", "Absolute magnitude in r against redshift", "V/Vmax: v_over_v_max_main", "6" + space + "files of one job", "Absolute errors"} {
		if !strings.Contains(want, part) {
			t.Errorf("the page lacks %q", part)
		}
	}
	for _, banned := range []string{"<script", "http:", "https:", "<link rel=\"stylesheet", "NaN", "Inf", "%!"} {
		if strings.Contains(want, banned) {
			t.Errorf("the page holds %q", banned)
		}
	}
}

// TestHostileNames: what a manifest calls its files and columns is text.
func TestHostileNames(t *testing.T) {
	const evil = `"><script>alert('x')</script><svg onload=y>&amp;{{.Hash}}`
	r := release(t, night{unit: evil + ".csv", rows: 200, missing: 5, rejects: 1, band: evil}, night{unit: strings.Repeat("long", 300), rows: 20, band: evil})
	r.Missing = append(r.Missing, Missing{evil, evil})
	page := pageOf(t, r, release(t, night{unit: evil, rows: 300, band: evil}))
	for _, tag := range regexp.MustCompile(`<(script|svg onload|svg[^>]* on)[^>]*>`).FindAllString(page, -1) {
		t.Errorf("a name became markup: %s", tag)
	}
	if strings.Contains(page, `onload=y>`) || !strings.Contains(page, "&lt;script&gt;") {
		t.Error("names are not escaped")
	}
}

// TestVerdict is the table of what is judged how.
func TestVerdict(t *testing.T) {
	good := night{unit: "a.csv", rows: 20000, missing: 600, from: 1}
	with := func(change func(n *night)) night {
		n := good
		change(&n)
		return n
	}
	crowded := func(r *rand.Rand) float64 { return math.Sqrt(r.Float64()) }
	for _, c := range []struct {
		name        string
		now, before *Release
		want        level
		says        string
	}{
		{"all well", release(t, good), nil, holds, ""},
		{"the same again", release(t, good), release(t, good), holds, ""},
		{"rejects", release(t, with(func(n *night) { n.rejects = 3 })), nil, look, "3\u00a0records cannot be split into fields"},
		{"a quarter without a redshift", release(t, with(func(n *night) { n.missing = 5000 })), nil, look, "have no redshift (25.0"},
		{"most without a redshift", release(t, with(func(n *night) { n.missing = 15000 })), nil, stop, "have no redshift (75.0"},
		{"no rows", release(t, with(func(n *night) { n.rows, n.missing = 0, 0 })), nil, stop, "0\u00a0rows in"},
		{"V/Vmax crowded", release(t, with(func(n *night) { n.vmax = crowded })), nil, look, "objects crowd near the limit"},
		{"V/Vmax thin", release(t, with(func(n *night) { n.vmax = func(r *rand.Rand) float64 { return 1 - crowded(r) } })), nil, look, "objects are missing near the limit"},
		{"rows lost", release(t, with(func(n *night) { n.rows = 19000 })), release(t, good), stop, "1\u202f000\u00a0rows fewer than last time"},
		{"a few rows lost", release(t, with(func(n *night) { n.rows = 19990 })), release(t, good), look, "10\u00a0rows fewer"},
		{"a tenth more missing", release(t, with(func(n *night) { n.missing = 2600 })), release(t, good), stop, "of the rows have no redshift"},
		{"half shifted by 1 %", release(t, with(func(n *night) { n.stretch = 1.01 })), release(t, good), look, "changed redshift"},
		{"another population", release(t, with(func(n *night) { n.stretch = 3 })), release(t, good), stop, "n(z)"},
		{"another model", release(t, with(func(n *night) { n.h0 = 73 })), release(t, good), look, "what changed: cosmologies"},
		{"a file gone", release(t, good), release(t, good, with(func(n *night) { n.unit = "b.csv" })), stop, "the first: b.csv"},
		{"a file of another job", release(t, good, with(func(n *night) { n.unit = "b.csv" }), with(func(n *night) { n.h0 = 73; n.unit = "c.csv" })), nil, stop, "c.csv: was made by another job"},
		{"nothing", release(t), nil, stop, "no file at all"},
	} {
		t.Run(c.name, func(t *testing.T) {
			v := judge(c.now, c.before)
			said := ""
			for _, reason := range v.Reasons() {
				said += reason.Finding + "\n"
			}
			if v.Level != c.want || !strings.Contains(said, c.says) || (c.want == holds) != (said == "") {
				t.Errorf("the verdict is %q, want %q, because of %q; it says\n%s", v.Level.Word(), c.want.Word(), c.says, said)
			}
			if page := pageOf(t, c.now, c.before); !strings.Contains(page, v.Headline()) || !strings.Contains(page, "<h1") {
				t.Error("the page does not have the headline")
			}
		})
	}
}

// TestGrowth: a survey that grows, and one of two nights of the same sky, are
// no alarm.
func TestGrowth(t *testing.T) {
	before := release(t, night{unit: "a.csv", rows: 20000, from: 1})
	now := release(t, night{unit: "a.csv", rows: 20000, from: 1}, night{unit: "b.csv", rows: 1500, from: 2})
	if v := judge(now, before); v.Level != holds {
		t.Errorf("a survey that grew by 1500 rows of the same kind: %+v", v.Reasons())
	}
}

// TestKolmogorov: the limiting distribution against the table of Smirnov 1948
// (Ann. Math. Stat. 19, 279), whose critical values every textbook repeats.
func TestKolmogorov(t *testing.T) {
	for _, c := range []struct{ x, want, tol float64 }{
		{1.2238, 0.10, 1e-4}, {1.3581, 0.05, 1e-4}, {1.6276, 0.01, 1e-4}, {1.9495, 0.001, 1e-5},
		{0.82757, 0.5, 1e-4}, // the median, from memory
		{0.1, 1, 1e-12}, {20, 0, 1e-12},
	} {
		if got := kolmogorov(c.x, 1); math.Abs(got-c.want) > c.tol {
			t.Errorf("Q(%g) = %g, want %g", c.x, got, c.want)
		}
	}
}

// TestNested: the law for samples without replacement, against a simulation
// of releases from which rows were removed at random.
func TestNested(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	const whole, part, trials = 3000, 2400, 400
	values := make([]float64, whole)
	for i := range values {
		values[i] = 0.01 + r.Float64()
	}
	rare := 0
	for range trials {
		r.Shuffle(whole, func(i, j int) { values[i], values[j] = values[j], values[i] })
		before, now := &Release{}, &Release{}
		for rel, n := range map[*Release]int{before: whole, now: part} {
			h := ledger.NewHistogram(ledger.RedshiftOctaveAxis())
			h.Add(values[:n])
			rel.Tally.Histograms = map[string]*ledger.Histogram{columns.RedshiftOctaves: h}
		}
		s, ok := shiftOf(before, now)
		if !ok || s.Moved != 0 {
			t.Fatalf("%+v: rows were only removed", s)
		}
		if s.Nested < 0.1 {
			rare++
		}
	}
	// 40 are expected, ± 6; binning, which makes the test cautious, leaves fewer.
	if rare < 18 || rare > 60 {
		t.Errorf("%d of %d random removals have a probability below 0.1", rare, trials)
	}
}

// TestLuminosityFunction: 1/Vmax of a sample made from a known density.
func TestLuminosityFunction(t *testing.T) {
	d := ledger.NewDensity(ledger.DensityMagnitudeAxis("M"))
	// 400 objects of Vmax 1e6 Mpc3 in one half magnitude: phi = 400/1e6/0.5.
	mags, weights := make([]float64, 400), make([]float64, 400)
	for i := range mags {
		mags[i], weights[i] = -20.3, 1e-6
	}
	d.Add(mags, weights)
	list, width := points(d)
	if len(list) != 1 || width != 0.5 || list[0].mag != -20.25 || math.Abs(list[0].phi/8e-4-1) > 1e-12 || math.Abs(list[0].err/4e-5-1) > 1e-12 || list[0].n != 400 {
		t.Errorf("%+v, want 400 rows at -20.25 with 8e-4 ± 4e-5", list)
	}
}

func TestSeal(t *testing.T) {
	page := []byte(pageOf(t, release(t, night{unit: "a", rows: 10}), nil))
	if !Ours(page) {
		t.Error("a page is not known as ours")
	}
	for name, text := range map[string][]byte{
		"changed": bytes.Replace(page, []byte("Fit"), []byte("fit"), 1), "cut": page[:len(page)-1], "empty": nil, "another": []byte("<html></html>"),
		"appended": append(bytes.Clone(page), '\n'),
	} {
		if Ours(text) {
			t.Errorf("%s: taken for ours", name)
		}
	}
}

func TestNumbers(t *testing.T) {
	for _, c := range []struct{ got, want string }{
		{count(1234567), "1\u202f234\u202f567"}, {count(-12), "−12"}, {count(0), "0"}, {change(5), "+5"},
		{share(0, 5), "0\u00a0%"}, {share(5, 5), "100\u00a0%"}, {share(1, 3000), "0.03\u00a0%"}, {share(2999, 3000), ">\u00a099.9\u00a0%"}, {share(1, 1e9), "<\u00a00.001\u00a0%"},
		{number(13.7867, 4), "13.79"}, {number(4430.87, 5), "4\u202f430.9"}, {number(0.000012345, 3), "1.23×10⁻⁵"}, {number(2.5e7, 2), "2.5×10⁷"}, {number(0.0123, 2), "0.012"},
		{number(math.Inf(1), 3), "infinite"}, {number(math.NaN(), 3), "none"}, {fixed(-0.004, 2), "0.00"}, {fixed(-1.5, 1), "−1.5"}, {signed(0.25, 2), "+0.25"},
		{power(2), "100"}, {power(-2), "0.01"}, {power(-6), "10⁻⁶"}, {compact(12345), "12.3\u202fk"}, {compact(2e6), "2\u202fM"}, {plain(-0.5), "−0.5"},
	} {
		if c.got != c.want {
			t.Errorf("%q, want %q", c.got, c.want)
		}
	}
}

// TestTicks: round numbers, within the scale, not too many.
func TestTicks(t *testing.T) {
	for _, s := range []scale{{low: 0, high: 1}, {low: 0, high: 3541}, {low: 33.2, high: 49.7}, {low: -24, high: -13.5}, {low: 1e-5, high: 12, log: true}, {low: 0.02, high: 0.5, log: true}, {low: 1e-9, high: 1, log: true}} {
		list := s.ticks(5)
		if len(list) < 2 || len(list) > 9 {
			t.Errorf("%+v has %d ticks: %v", s, len(list), list)
		}
		for _, k := range list {
			if k.at < s.low*(1-math.Copysign(1e-9, s.low)) || k.at > s.high+1e-9*math.Abs(s.high) {
				t.Errorf("%+v has a tick at %g", s, k.at)
			}
		}
	}
}

// TestOldManifests: those without the later statistics still give a page.
func TestOldManifests(t *testing.T) {
	m := night{unit: "a.csv", rows: 100}.manifest(t)
	m.Tally.Histograms, m.Tally.Sums, m.Tally.Densities = nil, nil, nil
	var b Builder
	if err := b.Add(m); err != nil {
		t.Fatal(err)
	}
	r, err := b.Release()
	if err != nil {
		t.Fatal(err)
	}
	if page := pageOf(t, r, r); !strings.Contains(page, "No row has a positive redshift that the manifests count") {
		t.Error("the page does not say that there is nothing to draw")
	}
}

// TestOddStatistics: statistics over other axes than ours are not drawn, and
// extreme ones do no harm.
func TestOddStatistics(t *testing.T) {
	build := func(change func(m *ledger.Manifest)) string {
		m := night{unit: "a.csv", rows: 100}.manifest(t)
		change(m)
		var b Builder
		if err := b.Add(m); err != nil {
			t.Fatal(err)
		}
		r, err := b.Release()
		if err != nil {
			t.Fatal(err)
		}
		return pageOf(t, r, release(t, night{unit: "a.csv", rows: 90}))
	}
	for _, axes := range [][]ledger.Axis{{ledger.Linear("x", 1, -5, 5)}, {ledger.Linear("x", 1, -5, 5), ledger.Linear("y", 1, -5, 5)}, {ledger.Binary("x", 3, 0, -5, 5)}} {
		page := build(func(m *ledger.Manifest) {
			for name := range m.Tally.Histograms {
				m.Tally.Histograms[name] = ledger.NewHistogram(axes...)
			}
		})
		if strings.Contains(page, "NaN") {
			t.Errorf("histograms over %v give NaN", axes)
		}
	}
	for _, z := range []float64{1e-4, 1e4, 0.5, -0.5, 1e300} {
		for _, w := range []float64{1e-300, 1e300, math.MaxFloat64, 0} {
			page := build(func(m *ledger.Manifest) {
				h := ledger.NewHistogram(ledger.RedshiftOctaveAxis())
				h.Add([]float64{z})
				m.Tally.Histograms[columns.RedshiftOctaves] = h
				for _, d := range m.Tally.Densities {
					d.Add([]float64{-20, -20, -30}, []float64{w, w, 1})
				}
			})
			if strings.Contains(page, "NaN") || strings.Contains(page, "Inf") {
				t.Errorf("one redshift of %g and weights of %g give NaN", z, w)
			}
		}
	}
}

// TestBadSettings: settings that no model can be made of are refused.
func TestBadSettings(t *testing.T) {
	m := night{unit: "a.csv", rows: 100}.manifest(t)
	for _, text := range []string{`{}`, `{"cosmologies":[{"h0":-1}]}`, `{"cosmologies":3}`, `{"selections":[{"name":"x"}]}`} {
		m.Settings = json.RawMessage(text)
		m.ConfigHash = publish.Digest(sha256.Sum256(m.Settings))
		var b Builder
		if err := b.Add(m); err != nil {
			t.Fatal(err)
		}
		if _, err := b.Release(); err == nil {
			t.Errorf("%s was taken", text)
		}
	}
}
