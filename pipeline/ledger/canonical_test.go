package ledger

import (
	"fmt"
	"math"
	"testing"

	"github.com/gowebpki/jcs"
)

// The vectors of RFC 8785 (JSON Canonicalization Scheme, 2020), from memory:
// the manifest's digests stand on this encoding, so the library is held to it.

// TestNumbersRFC8785 is the table of its appendix B.
func TestNumbersRFC8785(t *testing.T) {
	for bits, want := range map[uint64]string{
		0x0000000000000000: "0",
		0x8000000000000000: "0",
		0x0000000000000001: "5e-324",
		0x8000000000000001: "-5e-324",
		0x7fefffffffffffff: "1.7976931348623157e+308",
		0xffefffffffffffff: "-1.7976931348623157e+308",
		0x4340000000000000: "9007199254740992",
		0xc340000000000000: "-9007199254740992",
		0x4430000000000000: "295147905179352830000",
		0x44b52d02c7e14af5: "9.999999999999997e+22",
		0x44b52d02c7e14af6: "1e+23",
		0x44b52d02c7e14af7: "1.0000000000000001e+23",
		0x444b1ae4d6e2ef4e: "999999999999999700000",
		0x444b1ae4d6e2ef4f: "999999999999999900000",
		0x444b1ae4d6e2ef50: "1e+21",
		0x3eb0c6f7a0b5ed8c: "9.999999999999997e-7",
		0x3eb0c6f7a0b5ed8d: "0.000001",
		0x41b3de4355555553: "333333333.3333332",
		0x41b3de4355555554: "333333333.33333325",
		0x41b3de4355555555: "333333333.3333333",
		0x41b3de4355555556: "333333333.3333334",
		0x41b3de4355555557: "333333333.33333343",
		0xbecbf647612f3696: "-0.0000033333333333333333",
		0x43143ff3c1cb0959: "1424953923781206.2",
	} {
		x := math.Float64frombits(bits)
		for _, text := range []string{fmt.Sprintf("%.17e", x), fmt.Sprintf("%.17g", x)} {
			got, err := jcs.Transform([]byte("[" + text + "]"))
			if err != nil || string(got) != "["+want+"]" {
				t.Errorf("%s becomes %s, %v; want [%s]", text, got, err, want)
			}
		}
		if got := canonicalText(t, x); got != want { // by way of encoding/json
			t.Errorf("%x is encoded %s, want %s", bits, got, want)
		}
	}
	for _, x := range []float64{math.NaN(), math.Inf(1), math.Inf(-1)} {
		if text, err := canonical(x); err == nil {
			t.Errorf("%g is encoded %s", x, text)
		}
	}
}

// TestObjectsRFC8785 has the samples of its sections 3.2.2 and 3.2.3.
func TestObjectsRFC8785(t *testing.T) {
	cases := map[string]string{
		`{
  "numbers": [333333333.33333329, 1E30, 4.50, 2e-3, 0.000000000000000000000000001],
  "string": "\u20ac$\u000F\u000aA'\u0042\u0022\u005c\\\"\/",
  "literals": [null, true, false]
}`: `{"literals":[null,true,false],"numbers":[333333333.3333333,1e+30,4.5,0.002,1e-27],"string":"€$\u000f\nA'B\"\\\\\"/"}`,
		`{
  "\u20ac": "Euro Sign",
  "\r": "Carriage Return",
  "\ufb33": "Hebrew Letter Dalet With Dagesh",
  "1": "One",
  "\ud83d\ude00": "Emoji: Grinning Face",
  "\u0080": "Control",
  "\u00f6": "Latin Small Letter O With Diaeresis"
}`: "{\"\\r\":\"Carriage Return\",\"1\":\"One\",\"\u0080\":\"Control\",\"ö\":\"Latin Small Letter O With Diaeresis\"," +
			"\"€\":\"Euro Sign\",\"\U0001F600\":\"Emoji: Grinning Face\",\"\ufb33\":\"Hebrew Letter Dalet With Dagesh\"}",
	}
	for in, want := range cases {
		if got, err := jcs.Transform([]byte(in)); err != nil || string(got) != want {
			t.Errorf("got  %s (%v)\nwant %s", got, err, want)
		}
	}
	if got, err := jcs.Transform([]byte(`{"a":1,"\u0061":2}`)); err == nil {
		t.Errorf("a repeated key is encoded %s", got)
	}
}
