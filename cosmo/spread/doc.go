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

// Sigmas are the errors of a batch of redshifts. The zero value is ready for
// [Sigmas.Set].
type Sigmas struct {
	measured []float64 // σ of ln(1+z), all redshifts together
	floor    float64   // variance of ln(1+z_cos) alone
	peculiar []float64 // the same row by row, in place of floor; nil: none
	total    []float64 // σ of ln(1+z_cos): the root of the sum of both variances
	memory   [3][]float64
}

// Set takes the errors z of the redshifts in, in the frame that they were
// measured in; the scatter floor of peculiar velocities, km/s, 0 for none; and
// the error of each row's own peculiar velocity, km/s, nil for none. It keeps
// no slice.
func (s *Sigmas) Set(z, in []float64, floor float64, velocity []float64) {
	for i := range s.memory {
		if cap(s.memory[i]) < len(z) {
			s.memory[i] = make([]float64, len(z))
		}
	}
	v := floor / cosmo.SpeedOfLight
	s.floor = float64(v * v)
	s.measured, s.total, s.peculiar = s.memory[0][:len(z)], s.memory[1][:len(z)], nil
	if velocity != nil {
		s.peculiar = s.memory[2][:len(z)]
		for i, v := range velocity {
			u := v / cosmo.SpeedOfLight
			s.peculiar[i] = s.floor + float64(u*u)
		}
	}
	for i := range z {
		m := z[i] / (1 + in[i])
		s.measured[i] = m
		s.total[i] = math.Sqrt(float64(m*m) + s.alone(i))
	}
}

// Total returns σ of ln(1+z_cos) of each row.
func (s *Sigmas) Total() []float64 { return s.total }

// alone returns the variance of ln(1+z_cos) alone of row i.
func (s *Sigmas) alone(i int) float64 {
	if s.peculiar != nil {
		return s.peculiar[i]
	}
	return s.floor
}

// Fill fills sx with the standard errors of the quantity whose partials are p,
// from the redshift and peculiar velocities only.
func (s *Sigmas) Fill(sx []float64, p *Partial) {
	cos := p.Cos[:len(sx)]
	if p.Alone {
		total := s.total[:len(sx)]
		for i := range sx {
			sx[i] = math.Abs(cos[i] * total[i])
		}
		return
	}
	for i := range sx {
		sx[i] = math.Sqrt(s.variance(p, i))
	}
}

func (s *Sigmas) variance(p *Partial, i int) float64 {
	cos := p.Cos[i]
	both := cos
	if !p.Alone {
		both += p.Rest[i]
	}
	a := both * s.measured[i]
	return float64(a*a) + float64(cos*cos*s.alone(i))
}

// FillWith is Fill with further, independent variances: extra adds the
// variance of row i in the square of the quantity's unit.
func (s *Sigmas) FillWith(sx []float64, p *Partial, extra []float64) {
	extra = extra[:len(sx)]
	for i := range sx {
		sx[i] = math.Sqrt(s.variance(p, i) + extra[i])
	}
}
