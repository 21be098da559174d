package ledger

import (
	"fmt"
	"math"
)

// An Axis divides the numbers into bins whose edges are fixed by rule, not by
// data, so that any two histograms over it can be added. Bins have integer
// keys, from First to End-1:
//
//   - Scale "linear": bin k is [k/PerUnit, (k+1)/PerUnit), each edge rounded to
//     the nearest float64, so that a number written in decimal as an edge
//     starts its bin.
//   - Scale "binary", for positive numbers over many orders of magnitude: with
//     x = v + Plus rounded to a float64, x = 2^e (1+f) and 0 <= f < 1, the key
//     is e 2^Bits + floor(f 2^Bits). It is x's exponent and leading mantissa
//     bits; no logarithm is taken.
//
// What lies below is counted under the key First-1, what lies above under End,
// but a number equal to the upper edge of the last bin is counted in it.
type Axis struct {
	Name    string  `json:"name"` // what is counted, and its unit
	Scale   string  `json:"scale"`
	PerUnit int64   `json:"per_unit,omitempty"`
	Bits    uint    `json:"bits,omitempty"`
	Plus    float64 `json:"plus,omitempty"`
	First   int64   `json:"first"`
	End     int64   `json:"end"`
}

// Linear returns an axis of perUnit bins a unit from low to high.
func Linear(name string, perUnit, low, high int64) Axis {
	return Axis{Name: name, Scale: "linear", PerUnit: perUnit, First: low * perUnit, End: high * perUnit}
}

// Binary returns an axis of 2^bits bins an octave for plus + v, from 2^low to
// 2^high.
func Binary(name string, plus float64, bits uint, low, high int64) Axis {
	return Axis{Name: name, Scale: "binary", Plus: plus, Bits: bits, First: low << bits, End: high << bits}
}

// RedshiftAxis counts redshifts by 1+z from 1/128 to 16384, which holds every
// redshift that the model accepts, in 64 bins an octave.
func RedshiftAxis() Axis { return Binary("1+z", 1, 6, -7, 14) }

// MagnitudeAxis counts magnitudes by tenths, from -60 to 60.
func MagnitudeAxis(name string) Axis { return Linear(name, 10, -60, 60) }

// FractionAxis counts numbers from 0 to 1 by hundredths.
func FractionAxis(name string) Axis { return Linear(name, 100, 0, 1) }

// CoarseRedshiftAxis is one side of a plane: 8 bins an octave of 1+z.
func CoarseRedshiftAxis() Axis { return Binary("1+z", 1, 3, -7, 14) }

// CoarseMagnitudeAxis is the other side: half magnitudes, from -60 to 60.
func CoarseMagnitudeAxis(name string) Axis { return Linear(name, 2, -60, 60) }

// RedshiftOctaveAxis counts positive redshifts by their own octaves, 32 bins in
// each: it resolves the nearest catalogue as well as the farthest.
func RedshiftOctaveAxis() Axis { return Binary("z", 0, 5, -14, 14) }

// PlaneRedshiftAxis and PlaneMagnitudeAxis are the sides of the plane of
// absolute magnitude against redshift: 8 bins an octave of z, half magnitudes.
func PlaneRedshiftAxis() Axis { return Binary("z", 0, 3, -12, 4) }

// PlaneMagnitudeAxis is described at [PlaneRedshiftAxis].
func PlaneMagnitudeAxis(name string) Axis { return Linear(name, 2, -40, 0) }

// DensityMagnitudeAxis is what a luminosity function is over: half magnitudes.
func DensityMagnitudeAxis(name string) Axis { return Linear(name, 2, -40, 0) }

// ErrorAxis counts errors, relative or not, by 4 bins an octave.
func ErrorAxis(name string) Axis { return Binary(name, 0, 2, -40, 20) }

// maxBins bounds what a histogram read from a file may allocate.
const maxBins = 1 << 18

// bins is the number of bins, without the two for what lies outside.
func (a *Axis) bins() int64 { return a.End - a.First }

// validate refuses an axis that no rule describes.
func (a *Axis) validate() error {
	const far = 1 << 40
	ok := a.First < a.End && a.First > -far && a.End < far && a.bins() <= maxBins
	switch a.Scale {
	case "linear":
		ok = ok && a.PerUnit > 0 && a.PerUnit < far && a.Bits == 0 && a.Plus == 0
	case "binary":
		ok = ok && a.PerUnit == 0 && a.Bits <= 20 && math.Abs(a.Plus) <= math.MaxFloat64 &&
			a.First>>a.Bits >= -1022 && (a.End-1)>>a.Bits <= 1023
	default:
		ok = false
	}
	if !ok {
		return fmt.Errorf("a histogram axis %q that cannot be: %+v", a.Name, *a)
	}
	return nil
}

// Edge returns the lower edge of bin key, in terms of v.
func (a *Axis) Edge(key int64) float64 {
	if a.Scale == "linear" {
		return float64(key) / float64(a.PerUnit)
	}
	return a.edgeOfX(key) - a.Plus
}

// edgeOfX returns the lower edge of bin key of a binary axis, in terms of x.
func (a *Axis) edgeOfX(key int64) float64 {
	octave := key >> a.Bits
	part := float64(key-octave<<a.Bits) / float64(int64(1)<<a.Bits)
	return math.Ldexp(1+part, int(octave))
}

// edges lists the edges of a linear axis, the upper one of the last bin too.
func (a *Axis) edges() []float64 {
	if a.Scale != "linear" {
		return nil
	}
	edges := make([]float64, a.bins()+1)
	for i := range edges {
		edges[i] = a.Edge(a.First + int64(i))
	}
	return edges
}

// places writes where each number of v is counted: 0 is below, bins()+1 above,
// -1 nowhere because it is NaN. edges is what the method of that name returned.
func (a *Axis) places(v, edges []float64, at []int32) {
	if a.Scale == "linear" {
		a.placesLinear(v, edges, at)
	} else {
		a.placesBinary(v, at)
	}
}

func (a *Axis) placesLinear(v, edges []float64, at []int32) {
	at = at[:len(v)]
	perUnit, first, end := float64(a.PerUnit), edges[0], edges[len(edges)-1]
	for i, x := range v {
		if !(x >= first && x < end) {
			at[i] = a.outside(x, first, end)
			continue
		}
		// The product may round across an edge, and the conversion rounds
		// toward zero: together they miss by one at most.
		k := max(int64(x*perUnit)-a.First, 0)
		if x < edges[k] {
			k--
		} else if x >= edges[k+1] {
			k++
		}
		at[i] = int32(k) + 1
	}
}

func (a *Axis) placesBinary(v []float64, at []int32) {
	at = at[:len(v)]
	first, end := a.edgeOfX(a.First), a.edgeOfX(a.End)
	shift := fractionBits - a.Bits
	offset := 1 - a.First - 1023<<a.Bits
	for i, x := range v {
		t := x + a.Plus
		if t >= first && t < end {
			at[i] = int32(int64(math.Float64bits(t)>>shift) + offset)
			continue
		}
		at[i] = a.outside(t, first, end)
	}
}

// outside places a number that is in no bin's half-open interval.
func (a *Axis) outside(t, first, end float64) int32 {
	switch {
	case t < first:
		return 0
	case t == end:
		return int32(a.bins())
	case t > end:
		return int32(a.bins()) + 1
	}
	return -1 // NaN
}
