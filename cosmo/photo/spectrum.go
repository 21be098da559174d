package photo

import (
	"math"

	"catenrich/internal/fault"
)

// A WavelengthUnit is that of a spectrum's or bandpass's file. Wavelengths are
// those in vacuum.
type WavelengthUnit float64

// The units, in Angstrom.
const (
	Angstrom  WavelengthUnit = 1
	Nanometre WavelengthUnit = 10
)

// ParseWavelengthUnit returns the unit called name; ok is false for others.
func ParseWavelengthUnit(name string) (u WavelengthUnit, ok bool) {
	switch name {
	case "Angstrom":
		return Angstrom, true
	case "nm":
		return Nanometre, true
	}
	return 0, false
}

// A Spectrum is an SED: flux per unit wavelength (f_lambda, any unit), linear
// between its points. Wavelengths are in Angstrom, rising.
type Spectrum struct {
	Name              string // for messages
	wave, flux, slope []float64
}

func newSpectrum(name string, wave, flux []float64) *Spectrum {
	return &Spectrum{Name: name, wave: wave, flux: flux, slope: slopes(wave, flux)}
}

// slopes returns those of the straight lines between points.
func slopes(x, y []float64) []float64 {
	s := make([]float64, len(x)-1)
	for i := range s {
		s[i] = (y[i+1] - y[i]) / (x[i+1] - x[i])
	}
	return s
}

// A Bandpass is the response of a band, linear between its points and zero
// outside them.
type Bandpass struct {
	Name              string // for messages
	wave, resp, slope []float64

	// energy is set where the response is to energy, so that the photon
	// efficiency is resp/lambda.
	energy bool
}

// newBandpass drops zeros at the ends: they say nothing, and an SED need not
// cover them. Not all of resp is zero.
func newBandpass(name string, wave, resp []float64, energy bool) *Bandpass {
	first, last := 0, len(resp)-1
	for resp[first] == 0 && resp[first+1] == 0 {
		first++
	}
	for resp[last] == 0 && resp[last-1] == 0 {
		last--
	}
	wave, resp = wave[first:last+1], resp[first:last+1]
	return &Bandpass{Name: name, wave: wave, resp: resp, slope: slopes(wave, resp), energy: energy}
}

// ParseSpectrum reads an SED from the text of a file: wavelength and flux
// per unit wavelength, separated by blanks, commas or semicolons; lines that
// begin with # are comments. Wavelengths are positive and rise, fluxes are not
// negative. Errors name file, line and remedy.
func ParseSpectrum(name string, data []byte, unit WavelengthUnit) (*Spectrum, error) {
	wave, flux, err := parsePoints(name, data, unit, "SED", "flux")
	if err != nil {
		return nil, err
	}
	return newSpectrum(name, wave, flux), nil
}

// ParseBandpass reads a bandpass from the text of a file, in the form of
// [ParseSpectrum]: wavelength and response, not negative. energy says that the
// response is to energy and not to photons.
func ParseBandpass(name string, data []byte, unit WavelengthUnit, energy bool) (*Bandpass, error) {
	wave, resp, err := parsePoints(name, data, unit, "bandpass", "response")
	if err != nil {
		return nil, err
	}
	return newBandpass(name, wave, resp, energy), nil
}

// parsePoints reads wavelengths and values that are not negative and not all
// zero.
func parsePoints(name string, data []byte, unit WavelengthUnit, what, value string) (wave, values []float64, err error) {
	f := &sideFile{name: name, data: data}
	positive := false
	for {
		ok, err := f.next(2)
		if err != nil {
			return nil, nil, err
		}
		if !ok {
			break
		}
		w, err := f.number(0, "wavelength")
		if err != nil {
			return nil, nil, err
		}
		v, err := f.number(1, value)
		if err != nil {
			return nil, nil, err
		}
		w *= float64(unit)
		switch n := len(wave); {
		case !(w >= 1e-3 && w <= 1e14):
			return nil, nil, fault.Config.Errorf("%s:%d: a wavelength of %v Angstrom: want 1e-3 to 1e14; is the unit right?", name, f.line, w)
		case n > 0 && w == wave[n-1]:
			return nil, nil, fault.Config.Errorf("%s:%d: the wavelength stands twice: keep one of the two rows", name, f.line)
		case n > 0 && w < wave[n-1]:
			return nil, nil, fault.Config.Errorf("%s:%d: the wavelength is below the one before it: sort the file by wavelength", name, f.line)
		case v < 0:
			return nil, nil, fault.Config.Errorf("%s:%d: the %s %v is negative: set it to 0 or remove the row", name, f.line, value, v)
		case v > 1e200 || v > 0 && v < 1e-200:
			return nil, nil, fault.Config.Errorf("%s:%d: the %s %v is out of all proportion: scale the column; its unit does not matter", name, f.line, value, v)
		}
		wave, values = append(wave, w), append(values, v)
		positive = positive || v > 0
	}
	if len(wave) < 2 {
		return nil, nil, fault.Config.Errorf("%s: %d rows: a %s is two columns, wavelength and %s, of at least 2 rows", name, len(wave), what, value)
	}
	if !positive {
		return nil, nil, fault.Config.Errorf("%s: the %s is zero throughout", name, value)
	}
	return wave, values, nil
}

// integral returns the photon count of the spectrum through the band at
// redshift x-1, up to a constant, and its derivative by ln x:
//
//	I(x) = ∫ λ f(λ/x) P(λ) dλ,  P the photon efficiency
//
// Between neighbouring points of both files the integrand is a polynomial of
// degree three at most, on which Simpson's rule is exact. The spectrum must
// cover the band.
func (b *Bandpass) integral(s *Spectrum, x float64) (value, slope float64) {
	i := s.interval(b.wave[0] / x)
	j := 0
	left := b.wave[0]
	for j+1 < len(b.wave) {
		right := b.wave[j+1]
		edge := x * s.wave[i+1]
		nextSED := edge < right && i+2 < len(s.wave)
		if nextSED {
			right = edge
		}
		if right > left {
			v, d := b.cell(s, i, j, left, right, x)
			value += v
			slope += d
			left = right
		}
		if nextSED {
			i++
		} else {
			j++
		}
	}
	return value, slope
}

// cell integrates over [left, right], which lies between points j and j+1 of
// the band and between the redshifted points i and i+1 of the spectrum.
func (b *Bandpass) cell(s *Spectrum, i, j int, left, right, x float64) (value, slope float64) {
	mid := float64(0.5 * (left + right))
	df, dr := s.slope[i], b.slope[j]
	f := func(w float64) float64 { return s.flux[i] + float64(df*(w-s.wave[i])) }
	r := func(w float64) float64 { return b.resp[j] + float64(dr*(w-b.wave[j])) }
	wl, wm, wr := r(left), float64(4*r(mid)), r(right)
	if !b.energy {
		wl, wm, wr = left*wl, mid*wm, right*wr
	}
	fl, fr := f(left/x), f(right/x)
	h := (right - left) / 6
	value = float64(h * (float64(wl*fl) + float64(wm*0.5*(fl+fr)) + float64(wr*fr)))
	slope = float64(-h * (df / x) * (float64(wl*left) + float64(wm*mid) + float64(wr*right)))
	return value, slope
}

// interval returns i with wave[i] ≤ w < wave[i+1], or the nearest interval.
func (s *Spectrum) interval(w float64) int {
	lo, hi := 0, len(s.wave)-1
	for hi-lo > 1 {
		if m := (lo + hi) / 2; s.wave[m] <= w {
			lo = m
		} else {
			hi = m
		}
	}
	return lo
}

// covers returns the range of x = 1+z at which the spectrum covers the band.
func (b *Bandpass) covers(s *Spectrum) (lo, hi float64) {
	return b.wave[len(b.wave)-1] / s.wave[len(s.wave)-1], b.wave[0] / s.wave[0]
}

// minStep returns the least distance between neighbouring points in ln λ.
func minStep(wave []float64) float64 {
	least := math.Inf(1)
	for i := 1; i < len(wave); i++ {
		least = min(least, (wave[i]-wave[i-1])/wave[i])
	}
	return least
}
