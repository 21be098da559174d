// Package selection answers what a flux-limited survey asks of each object:
// between which redshifts would it still have been selected, and how much
// volume is that?
//
// Start at [New], which takes a model, a band's K-corrections and the limits,
// and at [Selection.Roots], which fills z_min and z_max. [Intersect] joins
// several bands, [Volumes] goes on to V_max, V/V_max and the weight
// (Schmidt 1968, ApJ 151, 393; Felten 1976, ApJ 207, 700). [Cut] is a
// volume-limited sample.
//
// An object keeps its absolute magnitude M, its extinction A, and the ratios
// (1+z_obs)/(1+z_cos) and (1+z_frame)/(1+z_cos) while z = z_cos moves; what
// changes is
//
//	w(z) = mu(z) + K(z_obs) + e(z)
//
// and a limit on the magnitude is a limit on w (curve.go). Where w is smooth and
// the two redshifts are one, roots are read off a table of the inverse of w, made
// from the model's own cells and proved against them, cell by cell, when it is
// made (inverse.go); elsewhere the table is where Newton's rule starts
// (newton.go).
package selection

import (
	"catenrich/cosmo"
	"catenrich/cosmo/photo"
	"catenrich/internal/fault"
)

// A Model is what is asked of a cosmology; *cosmo.Model is one.
type Model interface {
	At(q cosmo.Quantity, z float64) float64
	HubbleDistance() float64 // Mpc
	Antipode() float64       // D_C/D_H, infinite unless the model is closed
	Fill(b *cosmo.Base, q cosmo.Quantity, z []float64)
}

// Limits say which objects a survey holds. Missing limits are infinite.
type Limits struct {
	Bright, Faint float64 // mag, Bright ≤ m ≤ Faint; -Inf, +Inf: none
	Zmin, Zmax    float64 // of z_cos
}

// Validate refuses limits that select nothing or cannot be had. name is the
// selection's, for the message.
func (l Limits) Validate(name string) error {
	switch {
	case l.Bright != l.Bright || l.Faint != l.Faint:
		return fault.Config.Errorf("selection %q: faint or bright is not a number", name)
	case l.Faint < l.Bright:
		return fault.Config.Errorf("selection %q: faint is %v and bright is %v: the faint limit is the larger number", name, l.Faint, l.Bright)
	case !(l.Zmin >= 0 && l.Zmax > l.Zmin && l.Zmax <= cosmo.MaxRedshift):
		return fault.Config.Errorf("selection %q: redshift is [%v, %v], want two rising numbers from 0 to %v", name, l.Zmin, l.Zmax, cosmo.MaxRedshift)
	}
	return nil
}

// WholeSky is the area of the sphere in square degrees, 4π (180/π)².
const WholeSky = 41252.96124941927

// ValidateArea refuses an area, in square degrees, that no survey has.
func ValidateArea(name string, area float64) error {
	if !(area > 0 && area <= 41253) {
		return fault.Config.Errorf("selection %q: area is %v, want square degrees, above 0 and at most 41253, the whole sky", name, area)
	}
	return nil
}

// A Selection is a set of limits in one band and model. It is immutable, so any
// number of goroutines may share one.
type Selection struct {
	m      Model
	limits Limits
	curves []*curve // one for each template
}

// New prepares a selection: it tabulates w(z) for each K-correction of the set,
// which takes some milliseconds each. The limits on magnitudes may be replaced
// row by row, see [Rows]. A K-correction that is a catalogue column has no z
// dependence and so no place here.
func New(m Model, k *photo.Set, e photo.Evolution, l Limits) *Selection {
	s := &Selection{m: m, limits: l}
	for _, c := range k.Each {
		s.curves = append(s.curves, newCurve(m, c, e, l.Zmin, l.Zmax))
	}
	return s
}
