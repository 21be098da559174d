package prove

import (
	"math"
	"strconv"
	"testing"

	"catenrich/internal/table"
)

// numberCells, flagCells and wholeCells make a stored and a computed column of one row.
func numberCells(stored, computed float64) (s, c table.Column) {
	s.Resize(table.Float, 1)
	c.Resize(table.Float, 1)
	s.State = make([]table.State, 1)
	s.SetFloat(0, stored)
	c.Float[0] = computed
	return s, c
}

func flagCells(stored string, computed uint8) (s, c table.Column) {
	s.Resize(table.Bytes, 1)
	c.Resize(table.Flag, 1)
	s.State, s.Bytes[0], c.Flag[0] = make([]table.State, 1), []byte(stored), computed
	return s, c
}

func wholeCells(stored float64, computed int32) (s, c table.Column) {
	s, _ = numberCells(stored, 0)
	c.Resize(table.Int, 1)
	c.Int[0] = computed
	return s, c
}

func TestSame(t *testing.T) {
	pair := func(s, c table.Column) [2]table.Column { return [2]table.Column{s, c} }
	nan, inf := math.NaN(), math.Inf(1)
	for name, c := range map[string]struct {
		cells [2]table.Column
		size  float64
		round rounding
		want  bool
	}{
		"equal":                         {pair(numberCells(2, 2)), 2, rounding{}, true},
		"within 1e-9":                   {pair(numberCells(2+1.9e-9, 2)), 2, rounding{}, true},
		"beyond 1e-9":                   {pair(numberCells(2+2.1e-9, 2)), 2, rounding{}, false},
		"around zero, of its size":      {pair(numberCells(1e-10, -1e-10)), 1, rounding{}, true},
		"both null":                     {pair(numberCells(nan, nan)), nan, rounding{}, true},
		"null for a value":              {pair(numberCells(nan, 2)), 2, rounding{}, false},
		"a value for null":              {pair(numberCells(2, nan)), nan, rounding{}, false},
		"text for a value":              {pair(numberCells(inf, 2)), 2, rounding{}, false},
		"beyond float32":                {pair(numberCells(inf, 1e39)), 1e39, rounding{narrow: true}, true},
		"beyond float32, but wide":      {pair(numberCells(inf, 1e39)), 1e39, rounding{}, false},
		"a float32":                     {pair(numberCells(float64(float32(0.1)), 0.1)), 0.1, rounding{narrow: true}, true},
		"a float32 where none is asked": {pair(numberCells(float64(float32(0.1)), 0.1)), 0.1, rounding{}, false},
		"three digits":                  {pair(numberCells(123, 123.4999)), 123, rounding{digits: 3}, true},
		"three digits, one off":         {pair(numberCells(122, 123.4999)), 123, rounding{digits: 3}, false},
		"the same flag":                 {pair(flagCells("true", table.True)), 1, rounding{}, true},
		"another flag":                  {pair(flagCells("false", table.True)), 1e-8, rounding{}, false},
		"another flag at the threshold": {pair(flagCells("false", table.True)), 1e-10, rounding{}, true},
		"null is no flag":               {pair(flagCells("nan", table.True)), 1e-10, rounding{}, false},
		"no flag at all":                {pair(flagCells("yes", table.True)), 1e-10, rounding{}, false},
		"the same status":               {pair(wholeCells(48, 48)), 0, rounding{}, true},
		"another status":                {pair(wholeCells(48, 16)), 0, rounding{}, false},
		"half a status":                 {pair(wholeCells(48.5, 48)), 0, rounding{}, false},
	} {
		j := &judge{round: c.round}
		if got := j.same(&c.cells[1], &c.cells[0], []float64{c.size}, 0); got != c.want {
			t.Errorf("%s: %v, want %v", name, got, c.want)
		}
	}
}

// TestRounding holds that what rounding does to a number is allowed for, and
// little more.
func TestRounding(t *testing.T) {
	for _, v := range []float64{1, 9.9995, 1e-12, -123456.789, 0.1, 3.4e37, 1e300} {
		for digits := 1; digits <= 17; digits++ {
			text, err := strconv.ParseFloat(strconv.FormatFloat(v, 'e', digits-1, 64), 64)
			if err != nil {
				t.Fatal(err)
			}
			room := rounding{digits: digits}.of(v)
			if miss := math.Abs(text - v); miss > room || room > math.Abs(v)*math.Pow(10, 1-float64(digits)) {
				t.Errorf("%v in %d digits is off by %v, room is %v", v, digits, miss, room)
			}
		}
	}
	if room := (rounding{}).of(5); room != 0 {
		t.Errorf("without rounding the room is %v", room)
	}
}

func TestFirstMismatches(t *testing.T) {
	j := new(judge)
	for row := int64(30); row > 0; row-- {
		j.add([]Mismatch{{Row: row, at: 2}, {Row: row, at: 1}})
	}
	if j.wrong != 60 || len(j.first) != maxMismatches || j.first[0].Row != 1 || j.first[0].at != 1 || j.first[1].at != 2 || j.first[9].Row != 5 {
		t.Errorf("%d wrong, the first %v", j.wrong, j.first)
	}
}
