package selection

import (
	"math"

	"catenrich/cosmo"
	"catenrich/internal/status"
)

// Intersect narrows zmin and zmax to where another band selects the object as
// well. A NaN in either makes both NaN: a sample of several bands needs all.
func Intersect(zmin, zmax, otherMin, otherMax []float64) {
	zmax, otherMin, otherMax = zmax[:len(zmin)], otherMin[:len(zmin)], otherMax[:len(zmin)]
	for i := range zmin {
		zmin[i] = max(zmin[i], otherMin[i]) // NaN if either is
		zmax[i] = min(zmax[i], otherMax[i])
	}
}

// A Survey is what volumes need beside redshifts.
type Survey struct {
	Area float64   // deg2
	Per  []float64 // deg2 of each row's field, in place of Area; may be nil

	// Completeness is C of each row, 0 < C ≤ 1; nil: 1.
	Completeness []float64
}

// Shells fills low with V_C(z_min) and all with V_C(z_max) - V_C(z_min), the
// comoving volumes of the whole sky in the model, in cubed Hubble distances. An
// interval without volume gives NaN and status.Selection.
func Shells(low, all []float64, m Model, zmin, zmax []float64, w *Work, st []int32) {
	all, st = all[:len(low)], st[:len(low)]
	m.Fill(&w.base, cosmo.Volume, zmin)
	copy(low, w.base.Volume)
	m.Fill(&w.base, cosmo.Volume, zmax)
	for i, v := range w.base.Volume[:len(low)] {
		all[i] = v - low[i]
		if all[i] <= 0 {
			st[i] |= status.Selection
			all[i] = math.NaN()
		}
	}
}

// Volumes are the columns of a selection; a nil slice is not filled.
type Volumes struct {
	Vmax     []float64 // Mpc3
	OverVmax []float64 // V/V_max, from 0 at zmin to 1 at zmax
	Weight   []float64 // 1/(C V_max), Mpc^-3
}

// Fill computes
//
//	V_max  = (area/41252.961) [V_C(z_max) - V_C(z_min)]
//	V/Vmax = [V_C(z) - V_C(z_min)] / [V_C(z_max) - V_C(z_min)]
//	weight = 1/(C V_max)
//
// (Schmidt 1968; Felten 1976) from what [Shells] has filled and own, V_C at the
// row's own z_cos. hubble is the Hubble distance in Mpc. An area or a
// completeness that is missing, not positive, or above the whole sky or 1 gives
// NaN and status.Input.
func (s *Survey) Fill(v *Volumes, hubble float64, own, low, all []float64, st []int32) {
	if v.OverVmax != nil {
		for i := range v.OverVmax {
			v.OverVmax[i] = (own[i] - low[i]) / all[i]
		}
	}
	if v.Vmax == nil && v.Weight == nil {
		return
	}
	unit := cube(hubble)
	for i := range all {
		area := s.Area
		if s.Per != nil {
			area = s.Per[i]
		}
		if !(area > 0 && area <= 41253) {
			st[i] |= status.Input
			area = math.NaN()
		}
		vmax := area / WholeSky * unit * all[i]
		if v.Vmax != nil {
			v.Vmax[i] = vmax
		}
		if v.Weight != nil {
			v.Weight[i] = 1 / (s.completeness(i, st) * vmax)
		}
	}
}

func cube(x float64) float64 { return x * x * x }

func (s *Survey) completeness(i int, st []int32) float64 {
	if s.Completeness == nil {
		return 1
	}
	c := s.Completeness[i]
	if !(c > 0 && c <= 1) {
		st[i] |= status.Input
		return math.NaN()
	}
	return c
}

// The values of a flag, as internal/table has them.
const (
	Out uint8 = iota
	In
	Unknown
)

// A Cut is a volume-limited sample: every object brighter than Faintest, on the
// scale of the absolute magnitudes it is applied to, between two redshifts
// within which a survey sees all of these.
type Cut struct {
	Brightest, Faintest float64 // absolute magnitudes; -Inf, +Inf: none
	Zmin, Zmax          float64 // of z_cos
}

// Flags fills in with In where Brightest ≤ M ≤ Faintest and Zmin ≤ z ≤ Zmax,
// Out elsewhere, and Unknown where either is NaN, the reason having been set by
// who made it.
func (c Cut) Flags(in []uint8, z, mag []float64) {
	z, mag = z[:len(in)], mag[:len(in)]
	for i := range in {
		v, m := z[i], mag[i]
		switch {
		case v != v || m != m:
			in[i] = Unknown
		case v >= c.Zmin && v <= c.Zmax && m >= c.Brightest && m <= c.Faintest:
			in[i] = In
		default:
			in[i] = Out
		}
	}
}
