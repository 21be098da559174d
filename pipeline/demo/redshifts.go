package demo

import "math"

// What zflag says of z_best.
const (
	flagNone     = 0 // the spectrum failed; z_best is photometric
	flagGuess    = 1
	flagDoubtful = 2
	flagGood     = 3 // a good spectrum, or a photometric redshift with one clear peak
	flagSecure   = 4 // several lines
)

// measureRedshift fills all columns that have to do with redshift.
func (s *survey) measureRedshift(t *truth, r *record) {
	r[colZSpec], r[colZSpecErr], r[colZPhot] = missing, missing, missing
	complete := 1.0
	if !t.deepField() {
		complete = t.field.completeness(t.ra)
	}
	r[colCompleteness] = number(complete)
	photErr := s.photometric(t, r)
	switch {
	case t.kind == star || t.kind == blueshifted:
		s.spectroscopic(t, r, t.zhel, 0.00001)
		// The sign is what makes these rows what they are.
		r[colZSpec].number = -max(math.Abs(r[colZSpec].number), 0.000001)
		r.best(r[colZSpec], r[colZSpecErr], flagSecure)
	case t.kind == quasar:
		s.spectroscopic(t, r, t.zhel, 0.0008)
		r.best(r[colZSpec], r[colZSpecErr], flagSecure)
	case t.kind == candidate:
		r.best(r[colZPhot], number(photErr), flagGood)
	case t.deepField():
		s.deepRedshifts(t, r, photErr)
	default:
		s.mainRedshifts(t, r, photErr, complete)
	}
}

func (t *truth) deepField() bool { return t.field == &deepField }

// photometric draws z_phot and returns its error. Stars have none.
func (s *survey) photometric(t *truth, r *record) float64 {
	if t.template == starSED {
		return 0
	}
	width := 0.02
	if t.deepField() {
		width = 0.03
	}
	if t.kind == candidate {
		width = 0.025
	}
	sigma := round(width*(1+t.zhel), 4)
	z := round(t.zhel+float64(sigma*s.dice.gauss()), 4)
	r[colZPhot] = number(max(z, 0.001)) // the fit knows no negative redshifts
	return sigma
}

// spectroscopic draws z_spec around z with an error of about err (1+z).
func (s *survey) spectroscopic(t *truth, r *record, z, err float64) {
	sigma := round(err*(1+t.zhel)*s.dice.between(0.6, 1.6), 6)
	r[colZSpec], r[colZSpecErr] = number(round(z+float64(sigma*s.dice.gauss()), 6)), number(sigma)
}

// spectrum is the usual error of z_spec at z = 0.
const spectrum = 0.00012

// mainRedshifts lets spectra succeed with the field's completeness.
func (s *survey) mainRedshifts(t *truth, r *record, photErr, complete float64) {
	d := s.dice
	switch {
	case d.chance(complete):
		s.spectroscopic(t, r, t.zhel, spectrum)
		r.best(r[colZSpec], r[colZSpecErr], s.goodFlag())
	case d.chance(0.5):
		r.best(r[colZPhot], number(photErr), flagNone)
	case d.chance(0.5):
		s.spectroscopic(t, r, t.zhel, spectrum)
		r.best(r[colZSpec], r[colZSpecErr], flagDoubtful)
	default:
		s.spectroscopic(t, r, d.between(0.01, 0.9), spectrum)
		r.best(r[colZSpec], r[colZSpecErr], flagGuess)
	}
}

// deepRedshifts are photometric but for a few, and now and then wrong.
func (s *survey) deepRedshifts(t *truth, r *record, photErr float64) {
	d := s.dice
	switch {
	case d.chance(0.08):
		s.spectroscopic(t, r, t.zhel, spectrum)
		r.best(r[colZSpec], r[colZSpecErr], s.goodFlag())
	case d.chance(0.93):
		r.best(r[colZPhot], number(photErr), flagGood)
	default:
		r[colZPhot] = number(round(d.between(0.2, 4), 4))
		r.best(r[colZPhot], number(photErr), flagDoubtful)
	}
}

func (s *survey) goodFlag() float64 {
	if s.dice.chance(0.2) {
		return flagGood
	}
	return flagSecure
}

// best makes z the redshift to use. Its errors are Gaussian, so z_lower and
// z_upper, the quantiles 0.159 and 0.841, are one standard deviation away.
func (r *record) best(z, err value, flag float64) {
	r[colZBest], r[colZErr], r[colZFlag] = z, err, number(flag)
	r[colZLower] = number(round(z.number-err.number, 6))
	r[colZUpper] = number(round(z.number+err.number, 6))
}
