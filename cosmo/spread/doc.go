// Package spread gives derived quantities their uncertainty: linear standard
// errors, and intervals from a catalogue's redshift quantiles.
//
// Linear errors rest on one observation. At fixed position and peculiar
// velocity 1+z_in, 1+z_frame, 1+z_obs and 1+z_cos are proportional to one
// another (package frame), so everything is differentiated by ln(1+z). Each
// quantity X has a [Partial]: how it moves with z_cos alone, and how with the
// other two. The measured redshift moves all of them, a peculiar velocity that
// nobody measured moves z_cos alone:
//
//	σ_X² = [(Cos + Rest) σ_z/(1+z_in)]² + [Cos σ_v/c]²
//
// Partials of the columns that come from the redshift alone are in partial.go,
// those of magnitudes and luminosities, which add K and evolution with their
// signs before anything is squared, in photometry.go; [Sigmas.Fill] does the sum.
// A linear error vanishes where its quantity turns (D_A near z = 1.6); an
// [Interval] does not.
//
// Functions work on slices of equal length, one element a row, and allocate
// nothing; NaN in gives NaN out.
package spread

import (
	"math"

	"catenrich/cosmo"
)

// Sigmas are the errors of a batch of redshifts.
type Sigmas struct {
	Z  []float64 // σ_z of the input redshift
	In []float64 // z_in, in the frame that σ_z is in

	// Floor is σ_v, the scatter of peculiar velocities, km/s; 0: none. Velocity,
	// if not nil, is an error of each row's own peculiar velocity, km/s.
	Floor    float64
	Velocity []float64
}

// Measured returns σ of ln(1+z), all redshifts together, of row i.
func (s *Sigmas) measured(i int) float64 { return s.Z[i] / (1 + s.In[i]) }

// peculiar returns the variance of ln(1+z_cos) alone of row i.
func (s *Sigmas) peculiar(i int) float64 {
	v := s.Floor / cosmo.SpeedOfLight
	variance := float64(v * v)
	if s.Velocity != nil {
		u := s.Velocity[i] / cosmo.SpeedOfLight
		variance += float64(u * u)
	}
	return variance
}

// Fill fills sx with the standard errors of the quantity whose partials are p,
// from the redshift and peculiar velocities only.
func (s *Sigmas) Fill(sx []float64, p *Partial) {
	for i := range sx {
		sx[i] = math.Sqrt(s.variance(p, i))
	}
}

func (s *Sigmas) variance(p *Partial, i int) float64 {
	a := (p.Cos[i] + p.Rest[i]) * s.measured(i)
	return float64(a*a) + float64(p.Cos[i]*p.Cos[i]*s.peculiar(i))
}

// FillWith is Fill with further, independent variances: extra adds the
// variance of row i in the square of the quantity's unit.
func (s *Sigmas) FillWith(sx []float64, p *Partial, extra []float64) {
	extra = extra[:len(sx)]
	for i := range sx {
		sx[i] = math.Sqrt(s.variance(p, i) + extra[i])
	}
}
