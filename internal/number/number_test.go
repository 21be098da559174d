package number

import (
	"math"
	"strings"
	"testing"
)

func TestParse(t *testing.T) {
	for _, c := range []struct {
		text string
		want float64
		ok   bool
	}{
		{"1", 1, true}, {"-1.5e3", -1500, true}, {"1.5D-1", 0.15, true}, {"2d2", 200, true}, {".5", 0.5, true}, {"5.", 5, true},
		{"1e-400", 0, true}, {"1e400", 0, false}, {"Inf", 0, false}, {"nan", 0, false}, {"0x10", 0, false},
		{"1_0", 0, false}, {"", 0, false}, {" 1", 0, false}, {"1 2", 0, false}, {"1e", 0, false}, {"--1", 0, false},
		{strings.Repeat("0", 63) + "7", 7, true}, {strings.Repeat("0", 64) + "7", 0, false},
	} {
		got, ok := Parse([]byte(c.text))
		if ok != c.ok || ok && got != c.want {
			t.Errorf("Parse(%q) = %v, %v, want %v, %v", c.text, got, ok, c.want, c.ok)
		}
	}
	text := []byte("126.771125D0")
	if n := testing.AllocsPerRun(100, func() { Parse(text) }); n != 0 {
		t.Errorf("%v allocations, want 0", n)
	}
}

func FuzzParse(f *testing.F) {
	f.Add([]byte("1.5D-1"))
	f.Fuzz(func(t *testing.T, text []byte) {
		if v, ok := Parse(text); ok && (v != v || math.IsInf(v, 0)) {
			t.Errorf("Parse(%q) = %v", text, v)
		}
	})
}
