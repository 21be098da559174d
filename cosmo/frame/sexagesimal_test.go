package frame

import (
	"math"
	"testing"
)

func TestSexagesimal(t *testing.T) {
	for _, c := range []struct {
		text    string
		ra, dec float64 // NaN: refused
	}{
		{"08:27:05.07", 126.771125, 8 + 27/60. + 5.07/3600},
		{"8 27 05", 126.770833333333333, 8 + 27/60. + 5/3600.},
		{" 08:27:05 ", 126.770833333333333, 8 + 27/60. + 5/3600.},
		{"-00:12:00", math.NaN(), -0.2},
		{"+15:58:32.9", 239.637083333333333, 15 + 58/60. + 32.9/3600},
		{"12 30", 187.5, 12.5},
		{"12 30.5", 187.625, 12 + 30.5/60},
		{"08h27m05.07s", 126.771125, math.NaN()},
		{"08h 27m 05.07s", 126.771125, math.NaN()},
		{"+15d58m32.9s", math.NaN(), 15 + 58/60. + 32.9/3600},
		{"23:59:59.999", 359.999995833333333, 23.999999722222222},
		{"126.771125", 126.771125, math.NaN()},
		{"1.5D1", 15, 15},
		{"-12.5", math.NaN(), -12.5},
		{"360", 360, math.NaN()},
		{"90:00:00", math.NaN(), 90},
		{"90:00:00.1", math.NaN(), math.NaN()},
		{"24:00:00", math.NaN(), 24},
		{"12:60:00", math.NaN(), math.NaN()},
		{"12:00:60", math.NaN(), math.NaN()},
		{"12:00 00", math.NaN(), math.NaN()},
		{"12:00:00:00", math.NaN(), math.NaN()},
		{"12.5:00:00", math.NaN(), math.NaN()},
		{"12:", math.NaN(), math.NaN()},
		{"::", math.NaN(), math.NaN()},
		{"12:-1:00", math.NaN(), math.NaN()},
		{"", math.NaN(), math.NaN()},
		{"NaN", math.NaN(), math.NaN()},
		{"Inf", math.NaN(), math.NaN()},
		{"0x10", math.NaN(), math.NaN()},
		{"1_0", math.NaN(), math.NaN()},
	} {
		check := func(what string, got float64, ok bool, want float64) {
			if ok != (want == want) || ok && math.Abs(got-want) > 2e-14*math.Abs(want) {
				t.Errorf("%s(%q) = %.17g, %v, want %.17g", what, c.text, got, ok, want)
			}
		}
		ra, ok := RightAscension([]byte(c.text))
		check("RightAscension", ra, ok, c.ra)
		dec, ok := Declination([]byte(c.text))
		check("Declination", dec, ok, c.dec)
	}
}

func TestSexagesimalDoesNotAllocate(t *testing.T) {
	raText, decText := [][]byte{[]byte("08:27:05.07"), nil, []byte("12.5")}, [][]byte{[]byte("-00:12:00"), nil, []byte("x")}
	ra, dec := make([]float64, 3), make([]float64, 3)
	if n := testing.AllocsPerRun(100, func() { Sexagesimal(ra, dec, raText, decText) }); n != 0 {
		t.Errorf("%v allocations a call, want 0", n)
	}
	if ra[1] == ra[1] || dec[2] == dec[2] || ra[2] != 12.5 {
		t.Errorf("ra %v, dec %v", ra, dec)
	}
}

func FuzzSexagesimal(f *testing.F) {
	for _, s := range []string{"08:27:05.07", "8 27 05", "-00:12:00", "12.5", "1d2", "08h27m05.07s", "12:", "+"} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, text []byte) {
		if ra, ok := RightAscension(text); ok && !(ra >= 0 && ra <= 360) {
			t.Errorf("RightAscension(%q) = %v", text, ra)
		}
		if dec, ok := Declination(text); ok && !(dec >= -90 && dec <= 90) {
			t.Errorf("Declination(%q) = %v", text, dec)
		}
	})
}
