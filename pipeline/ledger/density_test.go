package ledger

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"testing"
)

// The sums of a density do not depend on who added what, and survive JSON.
func TestDensityOrder(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	n := 3000
	x, w := make([]float64, n), make([]float64, n)
	for i := range x {
		x[i], w[i] = -25+10*r.Float64(), math.Ldexp(r.Float64(), -20-r.IntN(20))
	}
	x[7], w[8] = math.NaN(), math.NaN()
	x[9], x[10] = -100, 100
	axis := DensityMagnitudeAxis("M")
	whole := NewDensity(axis)
	whole.Add(x, w)
	parts := NewDensity(axis)
	for lo := n; lo > 0; lo -= 500 {
		p := NewDensity(axis)
		p.Add(x[lo-500:lo], w[lo-500:lo])
		text, err := json.Marshal(p)
		if err != nil {
			t.Fatal(err)
		}
		again := new(Density)
		if err := json.Unmarshal(text, again); err != nil {
			t.Fatal(err)
		}
		if err := parts.Merge(again); err != nil {
			t.Fatal(err)
		}
	}
	a, _ := json.Marshal(whole)
	b, _ := json.Marshal(parts)
	if string(a) != string(b) {
		t.Error("a density in one piece and one of six pieces differ")
	}
	count, sum, squares := int64(0), 0.0, 0.0
	for c := range parts.Cells {
		count, sum, squares = count+c.Count, sum+c.Weights, squares+c.Squares
	}
	wantSum, wantSquares := 0.0, 0.0
	for i := range w {
		if w[i] == w[i] && x[i] == x[i] {
			wantSum, wantSquares = wantSum+w[i], wantSquares+w[i]*w[i]
		}
	}
	if count != int64(n-2) || math.Abs(sum/wantSum-1) > 1e-12 || math.Abs(squares/wantSquares-1) > 1e-12 {
		t.Errorf("%d weights of %g, squares %g; want %d of %g, squares %g", count, sum, squares, n-2, wantSum, wantSquares)
	}
}

func TestDensityRefuses(t *testing.T) {
	for name, text := range map[string]string{
		"a cell off the axis":     `{"axis":{"name":"M","scale":"linear","per_unit":2,"first":0,"end":4},"cells":[{"key":9,"weights":{"count":0,"exact":"0x0p+0"},"squares":{"count":0,"exact":"0x0p+0"}}]}`,
		"a cell without sums":     `{"axis":{"name":"M","scale":"linear","per_unit":2,"first":0,"end":4},"cells":[{"key":1}]}`,
		"more bins than it takes": `{"axis":{"name":"M","scale":"linear","per_unit":2,"first":0,"end":4000},"cells":[]}`,
		"no axis":                 `{"cells":[]}`,
	} {
		if json.Unmarshal([]byte(text), new(Density)) == nil {
			t.Errorf("%s was taken", name)
		}
	}
	if NewDensity(Linear("a", 1, 0, 2)).Merge(NewDensity(Linear("b", 1, 0, 2))) == nil {
		t.Error("densities over different axes were added")
	}
}
