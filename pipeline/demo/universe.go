package demo

import (
	"fmt"

	"catenrich/cosmo"
	"catenrich/internal/exact"
)

// universe is the background model of the simulation with what it takes to
// place galaxies in it. The model is flat, so D_M = D_C.
type universe struct {
	model *cosmo.Model
	guess []float64 // D_C/D_H at steps of guessStep in z, where inversion begins
}

const guessStep = 1.0 / 256

func newUniverse() (*universe, error) {
	set, _ := cosmo.FindPreset("planck2018")
	model, err := cosmo.New(set.Params)
	if err != nil {
		return nil, fmt.Errorf("the demo's universe: %w", err)
	}
	u := &universe{model: model}
	for z := 0.0; z <= nearHigh+guessStep; z += guessStep {
		u.guess = append(u.guess, model.At(cosmo.DC, z))
	}
	return u, nil
}

// volume returns (D_C/D_H)^3, the comoving volume up to a constant.
func (u *universe) volume(z float64) float64 {
	d := u.model.At(cosmo.DC, z)
	return d * d * d
}

// redshiftOfVolume is the inverse of volume for 0 < z <= nearHigh: Newton's
// method, whose last step is far below the catalogue's rounding.
func (u *universe) redshiftOfVolume(v float64) float64 {
	d := exact.Pow(v, 1.0/3)
	low, high := 0, len(u.guess)-1
	for high-low > 1 {
		if middle := (low + high) / 2; u.guess[middle] <= d {
			low = middle
		} else {
			high = middle
		}
	}
	z := (float64(low) + (d-u.guess[low])/(u.guess[high]-u.guess[low])) * guessStep
	for range 3 {
		z -= float64((u.model.At(cosmo.DC, z) - d) * u.model.At(cosmo.E, z))
	}
	return z
}

// modulus returns the distance modulus, mag, of a source of cosmological
// redshift zcos, seen at zobs from the Sun and at zframe from the rest frame of
// the microwave background:
//
//	D_L = D_M(z_cos) (1+z_obs) (1+z_frame)/(1+z_cos)
//
// (Davis et al. 2011, ApJ 741, 67; Calcino & Davis 2017, JCAP 01, 038.)
func (u *universe) modulus(zcos, zframe, zobs float64) float64 {
	d := u.model.HubbleDistance() * u.model.At(cosmo.DC, zcos)
	d *= (1 + zobs) * (1 + zframe) / (1 + zcos)
	return float64(5*exact.Log10(d)) + 25
}
