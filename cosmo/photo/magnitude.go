package photo

import (
	"math"

	"catenrich/internal/exact"
	"catenrich/internal/fault"
	"catenrich/internal/status"
)

// A Measure says what a catalogue's photometric column holds.
type Measure uint8

// Magnitude is logarithmic (Pogson 1856), Flux linear, Asinh the magnitude of
// Lupton, Gunn & Szalay (1999, AJ 118, 1406), which is defined for negative
// flux as well.
const (
	Magnitude Measure = iota
	Flux
	Asinh
)

// A Spread says what the column beside it holds.
type Spread uint8

// FluxIvar is an inverse variance of the flux; 0 means missing.
const (
	MagnitudeError Spread = iota
	FluxError
	FluxIvar
)

// A Photometer turns a photometric column into magnitudes.
type Photometer struct {
	Measure   Measure
	Offset    float64 // mag, added to every magnitude: Vega to AB, for example
	ZeroPoint float64 // mag of unit flux; Flux only
	Softening float64 // b, in maggies, positive; Asinh only
}

// ZeroPoint returns the AB magnitude of one unit of flux, AB being defined by
// 3631 Jy (Oke & Gunn 1983, ApJ 266, 713), for the units maggies, nanomaggies,
// microJy and Jy.
func ZeroPoint(unit string) (mag float64, ok bool) {
	switch unit {
	case "maggies":
		return 0, true
	case "nanomaggies":
		return 22.5, true
	case "Jy":
		return 2.5 * exact.Log10(3631), true
	case "microJy":
		return 2.5 * exact.Log10(3631e6), true
	}
	return 0, false
}

// Validate refuses settings that have no meaning. has says whether there is an
// error column, and s what it holds; band is the band's name, for the message.
func (p *Photometer) Validate(band string, has bool, s Spread) error {
	finite := func(x float64) bool { return x-x == 0 }
	switch {
	case !finite(p.Offset):
		return fault.Config.Errorf("band %q: magnitude_offset is %v, want a number of magnitudes", band, p.Offset)
	case p.Measure == Flux && !finite(p.ZeroPoint):
		return fault.Config.Errorf("band %q: zero_point is %v, want the magnitude of unit flux", band, p.ZeroPoint)
	case p.Measure == Asinh && !(p.Softening > 0 && finite(p.Softening)):
		return fault.Config.Errorf("band %q: the softening of an asinh magnitude is %v, want a positive number of maggies", band, p.Softening)
	case has && s != MagnitudeError && p.Measure != Flux:
		return fault.Config.Errorf("band %q has a flux error but a magnitude: give magnitude_error, or the flux", band)
	}
	return nil
}

// Magnitudes fills m with the apparent magnitudes of values:
//
//	magnitude  m = value + offset
//	flux       m = zero_point - 2.5 log10 f + offset
//	asinh      f = 2b sinh(-value ln10/2.5 - ln b), m = -2.5 log10 f + offset
//
// A missing value gives NaN and status.Magnitude, a flux that is not positive
// NaN and status.Flux.
func (p *Photometer) Magnitudes(m, values []float64, st []int32) {
	values, st = values[:len(m)], st[:len(m)]
	if p.Measure == Flux {
		p.fluxMagnitudes(m, values, st)
		return
	}
	lnB := p.logSoftening()
	for i, v := range values {
		if v != v {
			st[i] |= status.Magnitude
			m[i] = v
			continue
		}
		m[i] = v + p.Offset
		if p.Measure == Magnitude {
			continue
		}
		y := -v/pogson - lnB
		switch {
		case y > farFromZero: // both magnitudes agree to the last bit
		case y > 0:
			m[i] = p.Offset - float64(2.5*exact.Log10(2*p.Softening*exact.Sinh(y)))
		default:
			st[i] |= status.Flux
			m[i] = math.NaN()
		}
	}
}

// fluxMagnitudes is Magnitudes for fluxes.
func (p *Photometer) fluxMagnitudes(m, values []float64, st []int32) {
	for i, v := range values {
		switch {
		case v > 0:
		case v != v:
			st[i] |= status.Magnitude
		default:
			st[i] |= status.Flux
			v = math.NaN()
		}
		m[i] = v
	}
	exact.Log10Slice(m, m)
	zero := p.ZeroPoint + p.Offset
	for i, l := range m {
		m[i] = zero - float64(2.5*l)
	}
}

// farFromZero is an argument beyond which 2 sinh(y) is exp(y) and coth(y) is 1
// in float64.
const farFromZero = 20

func (p *Photometer) logSoftening() float64 {
	if p.Measure != Asinh {
		return 0
	}
	return exact.Log(p.Softening)
}

// Errors fills sm with the standard errors of the magnitudes of values, from
// the column s:
//
//	magnitude error  σ; of an asinh magnitude σ coth(y), y as above
//	flux error       (2.5/ln 10) σ_f/f
//	inverse variance the same with σ_f = ivar^(-1/2)
//
// An error that is missing or negative, or an inverse variance that is not
// positive, gives NaN and status.Error; a value or flux that has no magnitude
// gives NaN and the bit that [Photometer.Magnitudes] gives it.
func (p *Photometer) Errors(sm, values, s []float64, kind Spread, st []int32) {
	values, s, st = values[:len(sm)], s[:len(sm)], st[:len(sm)]
	lnB := p.logSoftening()
	for i, e := range s {
		v := values[i]
		if kind == FluxIvar {
			e = 1 / math.Sqrt(e) // NaN below zero, infinite at zero
		}
		switch {
		case v != v:
			st[i] |= status.Magnitude
			e = v
		case !(e >= 0 && e <= math.MaxFloat64):
			st[i] |= status.Error
			e = math.NaN()
		case p.Measure == Asinh:
			e = asinhError(e, -v/pogson-lnB)
		case p.Measure == Flux && !(v > 0):
			e = math.NaN()
		case kind != MagnitudeError:
			e = pogson * e / v
		}
		if e != e && v == v && p.Measure != Magnitude && st[i]&status.Error == 0 {
			st[i] |= status.Flux
		}
		sm[i] = e
	}
}

// asinhError is σ coth(y), NaN where the flux is not positive.
func asinhError(e, y float64) float64 {
	switch {
	case y > farFromZero:
		return e
	case !(y > 0):
		return math.NaN()
	}
	sinh := exact.Sinh(y)
	return e * math.Sqrt(1+1/(sinh*sinh))
}

// Nonnegative marks rows whose standard error is missing or negative with
// status.Error, and makes the cell NaN. It is for the errors of redshifts,
// extinctions and fluxes.
func Nonnegative(s []float64, st []int32) {
	st = st[:len(s)]
	for i, e := range s {
		if !(e >= 0) {
			st[i] |= status.Error
			s[i] = math.NaN()
		}
	}
}
