package photo

import (
	"math"
	"strings"
	"testing"

	"catenrich/internal/fault"
	"catenrich/internal/status"
)

func TestParseSpectrum(t *testing.T) {
	text := "\ufeff# an SED\nwavelength,flux\n\n400, 1\n500,2.5D0\r\n600 , 0\n"
	s, err := ParseSpectrum("e.csv", []byte(text), Nanometre)
	if err != nil {
		t.Fatal(err)
	}
	if len(s.wave) != 3 || s.wave[0] != 4000 || s.wave[2] != 6000 || s.flux[1] != 2.5 || s.flux[2] != 0 {
		t.Errorf("wave %v, flux %v", s.wave, s.flux)
	}
	b, err := ParseBandpass("r.txt", []byte("5000 0\n5100 0\n5200\t0.5\n6000 1\n6100 0\n6200 0\n"), Angstrom, true)
	if err != nil {
		t.Fatal(err)
	}
	if len(b.wave) != 4 || b.wave[0] != 5100 || b.resp[3] != 0 || !b.energy {
		t.Errorf("wave %v, response %v: zeros at the ends should go, but one", b.wave, b.resp)
	}
	hat, err := ParseBandpass("hat", []byte("5000 1\n6000 1"), Angstrom, false)
	if err != nil || len(hat.wave) != 2 {
		t.Errorf("a top-hat: %+v, %v", hat, err)
	}
}

// Each error names file, line and remedy, and is of class Config.
func TestParseRefuses(t *testing.T) {
	sed := func(text string) error { _, err := ParseSpectrum("f", []byte(text), Angstrom); return err }
	band := func(text string) error { _, err := ParseBandpass("f", []byte(text), Angstrom, false); return err }
	ktable := func(text string) error { _, err := ParseTable("f", []byte(text), false); return err }
	keyed := func(text string) error { _, err := ParseTable("f", []byte(text), true); return err }
	for _, c := range []struct {
		name  string
		parse func(string) error
		text  string
		says  []string
	}{
		{"empty", sed, "", []string{"f: 0 rows", "two columns"}},
		{"one row", sed, "5000 1", []string{"f: 1 rows"}},
		{"unsorted bandpass", band, "# r\n5000 1\n4900 1\n", []string{"f:3:", "sort"}},
		{"repeated wavelength", band, "5000 1\n5000 2\n", []string{"f:2:", "twice"}},
		{"negative bandpass", band, "5000 0\n5100 -0.1\n", []string{"f:2:", "negative", "remove"}},
		{"zero bandpass", band, "5000 0\n5100 0\n", []string{"zero throughout"}},
		{"negative SED", sed, "5000 1\n5100 -1\n", []string{"f:2:", "negative"}},
		{"three columns", sed, "5000 1 2\n", []string{"f:1:", "3 columns, want 2"}},
		{"one column", sed, "5000\n", []string{"f:1:", "1 columns, want 2"}},
		{"text", sed, "5000 1\n5100 bright\n", []string{"f:2:", `"bright"`, "#"}},
		{"infinity", sed, "5000 1\n5100 Inf\n", []string{"f:2:", `"Inf"`}},
		{"second heading", sed, "a b\nc d\n", []string{"f:2:", `"c"`}},
		{"wavelength 0", sed, "0 1\n", []string{"f:1:", "unit"}},
		{"enormous flux", sed, "5000 1e250\n", []string{"f:1:", "scale"}},
		{"empty table", ktable, "# nothing\n", []string{"no rows", "z and K"}},
		{"repeated z", ktable, "0 0\n0.1 0.2\n0.1 0.3\n", []string{"f:3:", "twice", "keep one"}},
		{"unsorted table", ktable, "0.1 0\n0 0.2\n", []string{"f:2:", "sort"}},
		{"z = -1", ktable, "-1 0\n0 0.2\n", []string{"f:1:", "above -1"}},
		{"one z", ktable, "0 0\n", []string{"only one redshift"}},
		{"template of one z", keyed, "E,0,0\nE,1,1\nSpiral,0,0\n", []string{"only one redshift", `"Spiral"`}},
		{"template repeated z", keyed, "E 0 0\nS 0 0\nE 0 1\n", []string{"f:3:", "twice"}},
		{"template missing", keyed, "0 0\n1 1\n", []string{"f:1:", "2 columns, want 3"}},
	} {
		err := c.parse(c.text)
		if fault.Of(err) != fault.Config {
			t.Errorf("%s: %v, want a Config error", c.name, err)
			continue
		}
		for _, s := range c.says {
			if !strings.Contains(err.Error(), s) {
				t.Errorf("%s: %q does not say %q", c.name, err, s)
			}
		}
	}
}

func TestTable(t *testing.T) {
	set, err := ParseTable("k.csv", []byte("z,K\n0,0\n0.1,0.2\n0.5,0.3\n"), false)
	if err != nil {
		t.Fatal(err)
	}
	nan := math.NaN()
	z := []float64{0, 0.05, 0.1, 0.3, 0.5, 0.5000001, -0.01, nan}
	k, slope, st := make([]float64, len(z)), make([]float64, len(z)), make([]int32, len(z))
	set.Fill(k, slope, z, nil, st)
	wantK := []float64{0, 0.1, 0.2, 0.25, 0.3, nan, nan, nan}
	wantSlope := []float64{2, 2, 0.25, 0.25, 0.25, nan, nan, nan}
	wantSt := []int32{0, 0, 0, 0, 0, status.Coverage, status.Coverage, 0}
	same := func(a, b float64) bool { return a != a && b != b || math.Abs(a-b) < 1e-14 }
	for i := range z {
		if !same(k[i], wantK[i]) || !same(slope[i], wantSlope[i]) || st[i] != wantSt[i] {
			t.Errorf("z = %v: K %v, slope %v, status %d, want %v, %v, %d", z[i], k[i], slope[i], st[i], wantK[i], wantSlope[i], wantSt[i])
		}
	}
}

func TestTemplates(t *testing.T) {
	set, err := ParseTable("k.csv", []byte("type,z,K\nE,0,0\nSb spiral,0,1\nE,1,2\nSb spiral,1,2\n"), true)
	if err != nil {
		t.Fatal(err)
	}
	names := [][]byte{[]byte("E"), []byte(" Sb spiral "), []byte("Irr"), nil}
	which, st := make([]int32, 4), make([]int32, 4)
	set.Templates(which, names, st)
	k := make([]float64, 4)
	set.Fill(k, nil, []float64{0.5, 0.5, 0.5, 0.5}, which, st)
	if k[0] != 1 || k[1] != 1.5 || k[2] == k[2] || k[3] == k[3] {
		t.Errorf("K = %v", k)
	}
	for i, want := range []int32{0, 0, status.Input, status.Input} {
		if st[i] != want {
			t.Errorf("row %d: status %d, want %d", i, st[i], want)
		}
	}
}

// A table of a power law at many z is the power law, to its own h²/8 K″.
func TestTableAgainstPowerLaw(t *testing.T) {
	law := PowerLaw{Alpha: 1.4, Rest: 0.2}
	var z, k []float64
	for x := 0.0; x < 3; x += 1e-3 {
		z, k = append(z, x), append(k, law.Value(x))
	}
	table, err := NewTable(z, k)
	if err != nil {
		t.Fatal(err)
	}
	for x := 0.0; x < 2.99; x += 0.00037 {
		near(t, "K", table.Value(x), law.Value(x), 1e-6*2.61/8*1.01, "Hogg et al. 2002")
		near(t, "slope", table.Slope(x), law.Slope(x), 2.61e-3/2*1.01, "Hogg et al. 2002")
	}
}

func TestPowerLaw(t *testing.T) {
	// The same band shifted to z, at z: -2.5 log10(1+z) whatever α (analytic).
	for _, alpha := range []float64{-2, -0.5, 1} {
		near(t, "K(0.1) to a band at 0.1", PowerLaw{alpha, 0.1}.Value(0.1), -0.10348, 1e-6+5e-6, "published_checks.csv, as printed")
	}
	near(t, "α = -1", PowerLaw{Alpha: -1}.Value(3), 0, 0, "flat in nu f_nu: no correction")
	k := PowerLaw{Alpha: -0.5, Rest: 0.1}
	shift, ok := k.Scale(1.002)
	near(t, "shift", shift, k.Value(1.002*1.7-1)-k.Value(0.7), 1e-15, "definition")
	if v := k.Value(-1.5); !ok || v == v {
		t.Errorf("K(-1.5) = %v, Scale %v", v, ok)
	}
}

func TestFillDoesNotAllocate(t *testing.T) {
	set, err := ParseTable("k.csv", []byte("E,0,0\nE,1,2\n"), true)
	if err != nil {
		t.Fatal(err)
	}
	names := [][]byte{[]byte("E"), []byte("a longer name than thirty-two bytes, which would be copied to the heap")}
	which, st, k := make([]int32, 2), make([]int32, 2), make([]float64, 2)
	if n := testing.AllocsPerRun(50, func() {
		set.Templates(which, names, st)
		set.Fill(k, nil, []float64{0.5, 0.5}, which, st)
	}); n != 0 {
		t.Errorf("%v allocations a batch, want 0", n)
	}
}

func FuzzSpectrum(f *testing.F) {
	f.Add([]byte("wavelength,flux\n400, 1\n500,2.5D0\r\n600 , 0\n"))
	f.Add([]byte("5000 0\n5100 0\n5200\t0.5\n"))
	f.Add([]byte("4000 1\n9000 1\n"))
	hat := newBandpass("hat", []float64{5000, 6000}, []float64{1, 1}, false)
	flat := newSpectrum("flat", []float64{100, 1e5}, []float64{1, 1})
	f.Fuzz(func(t *testing.T, text []byte) {
		if len(text) > 400 {
			return // more points are more of the same, and slow
		}
		if s, err := ParseSpectrum("f", text, Angstrom); err == nil {
			checkSynthetic(t, Synthesis{SED: s, Band: hat})
		} else if fault.Of(err) != fault.Config || !strings.HasPrefix(err.Error(), "f:") {
			t.Errorf("%v", err)
		}
		if b, err := ParseBandpass("f", text, Angstrom, true); err == nil {
			checkSynthetic(t, Synthesis{SED: flat, Band: b})
		}
	})
}

// checkSynthetic makes a K-correction of what parsed; it is finite in its range
// or refused.
func checkSynthetic(t *testing.T, s Synthesis) {
	k, err := NewSynthetic(s)
	if err != nil {
		if fault.Of(err) != fault.Config {
			t.Errorf("%v", err)
		}
		return
	}
	lo, hi := k.Range()
	for i := range 20 {
		z := lo + (hi-lo)*(0.001+0.998*float64(i)/19)
		if v := k.Value(z); v-v != 0 {
			t.Errorf("K(%v) = %v in [%v, %v]", z, v, lo, hi)
		}
	}
}

func FuzzTable(f *testing.F) {
	f.Add([]byte("z,K\n0,0\n0.1,0.2\n"), false)
	f.Add([]byte("E 0 0\nE 1 2\n"), true)
	f.Fuzz(func(t *testing.T, text []byte, templated bool) {
		set, err := ParseTable("f", text, templated)
		if err != nil {
			if fault.Of(err) != fault.Config || !strings.HasPrefix(err.Error(), "f:") {
				t.Errorf("%v", err)
			}
			return
		}
		for _, k := range set.Each {
			lo, hi := k.Range()
			for _, z := range []float64{lo, 0.5*lo + 0.5*hi, hi} {
				if v := k.Value(z); v != v {
					t.Errorf("K(%v) is NaN in [%v, %v]", z, lo, hi)
				}
			}
		}
	})
}
