package photo

import (
	"math"

	"catenrich/internal/fault"
)

// A Table is a K-correction given at a list of redshifts and interpolated
// linearly between them. It is immutable.
type Table struct {
	z, k, slope []float64 // slope[i] is between z[i] and z[i+1]
	guide       []int32   // the interval in which each of equal steps begins
	scale       float64   // steps a unit redshift
}

// NewTable returns the table of k at z. There are at least two z, they rise and
// are above -1, and all values are finite.
func NewTable(z, k []float64) (*Table, error) {
	if len(z) != len(k) {
		panic("photo: NewTable with slices of unequal length")
	}
	if len(z) < 2 {
		return nil, fault.Config.Errorf("a K table of %d rows, want at least 2", len(z))
	}
	t := &Table{z: z, k: k}
	for i := range z {
		if i > 0 && !(z[i] > z[i-1]) || !(z[i] > -1) || z[i] > math.MaxFloat64 || k[i]-k[i] != 0 {
			return nil, fault.Config.Errorf("K table, row %d: z = %v, K = %v: redshifts must rise and be above -1, and both be finite", i+1, z[i], k[i])
		}
	}
	t.slope = slopes(z, k)
	t.makeGuide()
	return t, nil
}

// makeGuide records, for four equal steps a row, the interval in which each
// begins, so that a lookup starts next to where it ends.
func (t *Table) makeGuide() {
	first, last := t.z[0], t.z[len(t.z)-1]
	t.guide = make([]int32, min(4*len(t.z), 1<<20))
	t.scale = float64(len(t.guide)) / (last - first)
	i := 0
	for g := range t.guide {
		at := first + float64(g)/t.scale
		for i+2 < len(t.z) && t.z[i+1] <= at {
			i++
		}
		t.guide[g] = int32(i)
	}
}

// interval returns i with z[i] ≤ z < z[i+1], the last interval at the end of
// the table, or -1 outside it.
func (t *Table) interval(z float64) int {
	n := len(t.z)
	if !(z >= t.z[0] && z <= t.z[n-1]) {
		return -1
	}
	i := int(t.guide[min(int((z-t.z[0])*t.scale), len(t.guide)-1)])
	for i > 0 && t.z[i] > z {
		i--
	}
	for i+2 < n && t.z[i+1] <= z {
		i++
	}
	return i
}

// Value is K at z, NaN outside the table.
func (t *Table) Value(z float64) float64 {
	i := t.interval(z)
	if i < 0 {
		return math.NaN()
	}
	if z == t.z[i+1] {
		return t.k[i+1]
	}
	return t.k[i] + float64((z-t.z[i])*t.slope[i])
}

// Slope is dK/dz of the interpolant; at a row of the table that of the interval
// above it.
func (t *Table) Slope(z float64) float64 {
	i := t.interval(z)
	if i < 0 {
		return math.NaN()
	}
	return t.slope[i]
}

// Line is Value and Slope, and how far z may move before it leaves the interval.
func (t *Table) Line(z float64) (value, slope, room float64) {
	i := t.interval(z)
	if i < 0 {
		return math.NaN(), math.NaN(), 0
	}
	value = t.k[i] + float64((z-t.z[i])*t.slope[i])
	if z == t.z[i+1] {
		value = t.k[i+1]
	}
	return value, t.slope[i], min(z-t.z[i], t.z[i+1]-z)
}

// Range is that of the table.
func (t *Table) Range() (lo, hi float64) { return t.z[0], t.z[len(t.z)-1] }

// Scale is unknown unless q is 1.
func (t *Table) Scale(q float64) (float64, bool) { return 0, q == 1 }

// ParseTable reads a K table from the text of a file: columns z and K, or, if
// templated, template, z and K, the rows of each template in order of z.
// Columns are separated by blanks, commas or semicolons; lines that begin with #
// are comments. Errors name file, line and remedy.
func ParseTable(name string, data []byte, templated bool) (*Set, error) {
	f := &sideFile{name: name, data: data}
	columns := 2
	if templated {
		columns = 3
	}
	set := &Set{}
	if templated {
		set.index = make(map[string]int32)
	}
	var z, k [][]float64 // by template
	for {
		ok, err := f.next(columns)
		if err != nil {
			return nil, err
		}
		if !ok {
			break
		}
		t := 0
		if templated {
			t = set.template(string(f.fields[0]))
		}
		if t == len(z) {
			z, k = append(z, nil), append(k, nil)
		}
		if z[t], k[t], err = f.tableRow(z[t], k[t], columns); err != nil {
			return nil, err
		}
	}
	if len(z) == 0 {
		return nil, fault.Config.Errorf("%s: no rows: a K table has columns %s", name, [2]string{"z and K", "template, z and K"}[columns-2])
	}
	for t := range z {
		if len(z[t]) < 2 {
			return nil, fault.Config.Errorf("%s: only one redshift%s: a table is interpolated, so it needs two at least", name, set.called(t))
		}
		table, err := NewTable(z[t], k[t])
		if err != nil {
			return nil, err
		}
		set.Each = append(set.Each, table)
	}
	return set, nil
}

// template returns the number of a template, a new one for a new name.
func (s *Set) template(name string) int {
	t, ok := s.index[name]
	if !ok {
		t = int32(len(s.Names))
		s.index[name], s.Names = t, append(s.Names, name)
	}
	return int(t)
}

func (s *Set) called(t int) string {
	if s.Names == nil {
		return ""
	}
	return " for template \"" + string(clip([]byte(s.Names[t]))) + "\""
}

// tableRow appends the current line to a template's rows.
func (f *sideFile) tableRow(z, k []float64, columns int) (zs, ks []float64, err error) {
	zi, err := f.number(columns-2, "redshift")
	if err != nil {
		return nil, nil, err
	}
	ki, err := f.number(columns-1, "K-correction")
	if err != nil {
		return nil, nil, err
	}
	switch n := len(z); {
	case !(zi > -1):
		err = fault.Config.Errorf("%s:%d: redshift %v is not above -1: remove the row", f.name, f.line, zi)
	case n > 0 && zi == z[n-1]:
		err = fault.Config.Errorf("%s:%d: redshift %v stands twice: keep one of the two rows", f.name, f.line, zi)
	case n > 0 && zi < z[n-1]:
		err = fault.Config.Errorf("%s:%d: redshift %v comes after %v: sort the table by redshift", f.name, f.line, zi, z[n-1])
	}
	return append(z, zi), append(k, ki), err
}
