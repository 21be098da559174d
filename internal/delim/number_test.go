package delim

import (
	"math"
	"math/rand/v2"
	"strconv"
	"strings"
	"testing"
)

func TestParseFloatCases(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		text string
		want float64
		ok   bool
	}{
		{"0.5", 0.5, true}, {" \t1 ", 1, true}, {"+5", 5, true}, {"-0", math.Copysign(0, -1), true}, {".5", 0.5, true}, {"5.", 5, true},
		{"1e3", 1000, true}, {"1D3", 1000, true}, {"1.5d-3", 0.0015, true}, {"-1.25E+02", -125, true}, {"1e-400", 0, true},
		{"0.1111111111111111111111", 0.1111111111111111111111, true}, {"9007199254740993", 9007199254740992, true},
		{"123456789012345678901234567890", 123456789012345678901234567890, true}, {"1e22", 1e22, true}, {"1e23", 1e23, true},
		{"0.000000000000000000000000000000000001", 1e-36, true}, {"4.9e-324", 5e-324, true}, {"1.7976931348623157d308", math.MaxFloat64, true},
		{"00000000000000000000000000000000000000000000001.5", 1.5, true}, {"18446744073709551617", 18446744073709551617, true},
		{"", nan, true}, {"  ", nan, true}, {"nan", nan, true}, {"NaN", nan, true}, {"-nan", nan, true}, {"NAN", nan, true},
		{"inf", nan, false}, {"-Infinity", nan, false}, {"1e400", nan, false}, {"-1d400", nan, false}, {"0x10", nan, false}, {"1_000", nan, false},
		{"0.4.1", nan, false}, {"1e", nan, false}, {"1e+", nan, false}, {"e5", nan, false}, {".", nan, false}, {"-", nan, false}, {"+-1", nan, false},
		{"1 2", nan, false}, {"1,5", nan, false}, {"nanx", nan, false}, {"1f", nan, false}, {"1\x00", nan, false}, {"\xff", nan, false}, {"--", nan, false}, {"1p3", nan, false},
		{"1e99999999999999999999", nan, false}, {"0e99999999999999999999", 0, true}, {"1e-99999999999999999999", 0, true},
	} {
		v, ok := ParseFloat([]byte(c.text))
		if ok != c.ok || math.Float64bits(v) != math.Float64bits(c.want) && !(v != v && c.want != c.want) {
			t.Errorf("ParseFloat(%q) = %v, %v, want %v, %v", c.text, v, ok, c.want, c.ok)
		}
	}
}

// goParse reads text as [ParseFloat] should, through strconv: the judge.
func goParse(text string) (v float64, ok bool) {
	text = strings.Trim(text, " \t")
	switch strings.ToLower(strings.TrimLeft(text, "+-")) {
	case "nan":
		return math.NaN(), len(text) <= 4
	case "":
		return math.NaN(), text == ""
	}
	if strings.ContainsAny(text, "xX_pPiInN") {
		return math.NaN(), false
	}
	if strings.ContainsAny(text, "dD") && strings.ContainsAny(text, "eE") {
		return math.NaN(), false
	}
	v, err := strconv.ParseFloat(strings.NewReplacer("d", "e", "D", "e").Replace(text), 64)
	if err != nil {
		return math.NaN(), false
	}
	return v, true
}

func checkParse(t *testing.T, text string) {
	t.Helper()
	want, wantOK := goParse(text)
	v, ok := ParseFloat([]byte(text))
	if ok != wantOK || math.Float64bits(v) != math.Float64bits(want) && (v == v || want == want) {
		t.Fatalf("ParseFloat(%q) = %v, %v, want %v, %v", text, v, ok, want, wantOK)
	}
}

func TestParseFloatAgreesWithStrconv(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 3))
	for i := range *many {
		v := distributions[i%len(distributions)].draw(r)
		for _, precision := range []int{-1, 3, 9, 16, 20} {
			checkParse(t, strconv.FormatFloat(v, "eg"[i%2], precision, 64))
		}
		checkParse(t, strconv.FormatFloat(r.NormFloat64()*1e6, 'f', r.IntN(12), 64))
	}
	const alphabet = "0123456789..eEdD+-+-nai "
	for range *many {
		text := make([]byte, 1+r.IntN(8))
		for i := range text {
			text[i] = alphabet[r.IntN(len(alphabet))]
		}
		checkParse(t, string(text))
	}
}

func FuzzParseFloat(f *testing.F) {
	for _, s := range []string{"1.5", "-1D+3", "nan", "1e400", "0x1p3", ".5e-7", "123456789012345678901"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) { checkParse(t, text) })
}

func TestParseFloatDoesNotAllocate(t *testing.T) {
	for _, text := range []string{"0.523456", "0.11141544950235928", "1.5e-300", "nan", "", "x"} {
		b := []byte(text)
		if n := testing.AllocsPerRun(100, func() { ParseFloat(b) }); n > 0 {
			t.Errorf("ParseFloat(%q) allocates %v times", text, n)
		}
	}
}

func BenchmarkParseFloat(b *testing.B) {
	for _, c := range []struct{ name, text string }{{"short", "0.523456"}, {"long", "0.11141544950235928"}} {
		b.Run(c.name, func(b *testing.B) {
			text := []byte(c.text)
			b.SetBytes(int64(len(text)))
			for b.Loop() {
				ParseFloat(text)
			}
		})
		b.Run(c.name+"/strconv", func(b *testing.B) {
			b.SetBytes(int64(len(c.text)))
			for b.Loop() {
				strconv.ParseFloat(c.text, 64)
			}
		})
	}
}
