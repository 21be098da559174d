package photo

import (
	"math"

	"catenrich/internal/exact"
	"catenrich/internal/status"
)

// A Correction is a K-correction as a function of the redshift at which the
// band was observed (z_obs), in magnitudes. Outside its range, which it is
// never extrapolated beyond, and for NaN, it is NaN.
type Correction interface {
	Value(z float64) float64 // K, mag
	Slope(z float64) float64 // dK/dz, mag
	Range() (lo, hi float64) // both ends belong to it

	// Scale returns K(q(1+z)-1) - K(z), and true, if that is the same at every
	// z. q is the ratio (1+z_obs)/(1+z_cos) that an object keeps while it is
	// moved, in thought, to another distance.
	Scale(q float64) (shift float64, ok bool)
}

// None is the absence of a K-correction.
type None struct{}

// Value is 0 for every redshift above -1.
func (None) Value(z float64) float64 {
	if !(z > -1) {
		return math.NaN()
	}
	return 0
}

// Slope is 0 like the value.
func (k None) Slope(z float64) float64 { return k.Value(z) }

// Range is every redshift above -1.
func (None) Range() (lo, hi float64) { return aboveMinusOne, math.MaxFloat64 }

// Scale is 0 for every q.
func (None) Scale(float64) (float64, bool) { return 0, true }

// aboveMinusOne is the least float64 above -1.
const aboveMinusOne = -1 + 0x1p-53

// A PowerLaw is the K-correction of f_nu ~ nu^Alpha to the band shifted to
// redshift Rest (0: the band as it is):
//
//	K = -2.5 (1+α) log10(1+z) + 2.5 α log10(1+z_r)
//
// (Hogg et al. 2002, arXiv:astro-ph/0210394, eq. 13 with L_nu ~ nu^α; the
// equation number is from memory.)
type PowerLaw struct{ Alpha, Rest float64 }

// Value is K at z > -1.
func (k PowerLaw) Value(z float64) float64 {
	if !(z > -1) {
		return math.NaN()
	}
	v := float64(-pogson * (1 + k.Alpha) * exact.Log1p(z))
	if k.Rest != 0 {
		v += float64(pogson * k.Alpha * exact.Log1p(k.Rest))
	}
	return v
}

// Slope is dK/dz at z > -1.
func (k PowerLaw) Slope(z float64) float64 {
	if !(z > -1) {
		return math.NaN()
	}
	return -pogson * (1 + k.Alpha) / (1 + z)
}

// Range is every redshift above -1.
func (PowerLaw) Range() (lo, hi float64) { return aboveMinusOne, math.MaxFloat64 }

// Scale is -2.5 (1+α) log10 q, whatever z.
func (k PowerLaw) Scale(q float64) (float64, bool) {
	return float64(-2.5 * (1 + k.Alpha) * exact.Log10(q)), true
}

// Unknown stands for a K-correction that cannot be computed, because what it is
// made from is not at hand: NaN everywhere, and known nowhere.
type Unknown struct{}

// Value is NaN.
func (Unknown) Value(float64) float64 { return math.NaN() }

// Slope is NaN.
func (Unknown) Slope(float64) float64 { return math.NaN() }

// Range is empty.
func (Unknown) Range() (lo, hi float64) { return math.Inf(1), math.Inf(-1) }

// Scale is not known.
func (Unknown) Scale(float64) (float64, bool) { return math.NaN(), false }

// A Set is the K-corrections of a band, one for each template. A band without
// templates has one.
type Set struct {
	Each  []Correction
	Names []string // of the templates; nil without
	index map[string]int32
}

// Lost reports whether the set is of a correction that is [Unknown]. A nil set
// is none.
func (s *Set) Lost() bool {
	if s == nil {
		return false
	}
	_, lost := s.Each[0].(Unknown)
	return lost
}

// Single returns the set of a band without templates.
func Single(k Correction) *Set { return &Set{Each: []Correction{k}} }

// Templates fills t with the index of each row's template in the set, -1 where
// there is no such template, which is status.Input.
func (s *Set) Templates(t []int32, names [][]byte, st []int32) {
	names, st = names[:len(t)], st[:len(t)]
	for i := range t {
		j, ok := s.index[string(trimBlanks(names[i]))]
		if !ok {
			st[i] |= status.Input
			j = -1
		}
		t[i] = j
	}
}

// Fill fills k with the K-correction and slope with dK/dz at the redshifts z at
// which the rows were observed; slope may be nil. template is what
// [Set.Templates] filled, nil if the band has none. A z outside the correction's
// range gives NaN and status.Coverage, a NaN stays NaN.
func (s *Set) Fill(k, slope, z []float64, template []int32, st []int32) {
	z, st = z[:len(k)], st[:len(k)]
	if c, ok := s.Each[0].(*Synthetic); ok && template == nil {
		c.fill(k, slope, z, st)
		return
	}
	for i, v := range z {
		c := s.of(template, i)
		if c == nil || v != v {
			k[i] = math.NaN()
			if slope != nil {
				slope[i] = math.NaN()
			}
			continue
		}
		k[i] = c.Value(v)
		if slope != nil {
			slope[i] = c.Slope(v)
		}
		if k[i] != k[i] {
			st[i] |= status.Coverage
		}
	}
}

// of returns the correction of row i, or nil if its template is unknown.
func (s *Set) of(template []int32, i int) Correction {
	if template == nil {
		return s.Each[0]
	}
	if j := template[i]; j >= 0 {
		return s.Each[j]
	}
	return nil
}

func trimBlanks(b []byte) []byte {
	for len(b) > 0 && (b[0] == ' ' || b[0] == '\t') {
		b = b[1:]
	}
	for len(b) > 0 && (b[len(b)-1] == ' ' || b[len(b)-1] == '\t') {
		b = b[:len(b)-1]
	}
	return b
}
