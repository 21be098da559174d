package cosmo

import (
	"errors"
	"fmt"
	"math"
	"strconv"
)

// Params are the numbers that define a model. The zero value is refused: H0
// must be given.
type Params struct {
	H0      float64 // km/s/Mpc, > 0
	OmegaM  float64 // baryons and cold dark matter today, without neutrinos, >= 0
	OmegaDE float64 // dark energy today; ignored where Flat is set
	Flat    bool    // OmegaDE is 1 minus everything else
	W0, Wa  float64 // dark energy's w(a) = W0 + Wa (1-a); W0 = -1 and Wa = 0 for a cosmological constant
	TCMB    float64 // temperature of the background radiation, K; 0 leaves radiation and neutrinos out
	Neff    float64 // effective number of neutrinos, >= 0; means nothing where TCMB is 0

	// NeutrinoMasses are in eV, one for each species, which share Neff
	// equally. None means three massless species.
	NeutrinoMasses []float64
}

// A ParamError says which parameter of a model was refused. Param is its key
// in a job file.
type ParamError struct {
	Param  string
	Value  float64
	Reason string
}

func (e *ParamError) Error() string {
	return fmt.Sprintf("%s is %s: %s", e.Param, strconv.FormatFloat(e.Value, 'g', -1, 64), e.Reason)
}

// check returns all that is wrong with p taken number by number.
func (p *Params) check() error {
	var errs []error
	refuse := func(param string, v float64, reason string) {
		errs = append(errs, &ParamError{param, v, reason})
	}
	finite := func(param string, v float64) bool {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			refuse(param, v, "want a finite number")
			return false
		}
		return true
	}
	if finite("h0", p.H0) && p.H0 <= 0 {
		refuse("h0", p.H0, "want a positive number of km/s/Mpc")
	}
	if finite("omega_m", p.OmegaM) && p.OmegaM < 0 {
		refuse("omega_m", p.OmegaM, "want a density that is not negative")
	}
	if !p.Flat {
		finite("omega_de", p.OmegaDE)
	}
	finite("w0", p.W0)
	finite("wa", p.Wa)
	if finite("cmb_temperature", p.TCMB) && p.TCMB < 0 {
		refuse("cmb_temperature", p.TCMB, "want a temperature in K that is not negative")
	}
	if finite("effective_neutrinos", p.Neff) && p.Neff < 0 {
		refuse("effective_neutrinos", p.Neff, "want a number that is not negative")
	}
	for _, mass := range p.NeutrinoMasses {
		switch {
		case !finite("neutrino_masses", mass):
		case mass < 0:
			refuse("neutrino_masses", mass, "want masses in eV that are not negative")
		case mass > 0 && p.TCMB == 0:
			refuse("neutrino_masses", mass, "a mass needs a cmb_temperature above 0, which sets the neutrinos' own")
		case mass > 0 && p.Neff == 0:
			refuse("neutrino_masses", mass, "a mass needs effective_neutrinos above 0")
		}
	}
	return errors.Join(errs...)
}
