package photo

import (
	"math"

	"catenrich/cosmo"
	"catenrich/internal/exact"
	"catenrich/internal/status"
)

// Units of luminosity. A spherical luminosity is 4π D_L² times a flux; D_L is in
// Mpc, fluxes in erg/s/cm² (lines) or Jy (radio).
const (
	metresPerMpc = 1e6 * cosmo.Parsec
	cmPerMpc     = 100 * metresPerMpc
	wattsPerJy   = 1e-26 // W m^-2 Hz^-1 in 1 Jy

	// LineUnit is the luminosity in erg/s of unit flux at 1 Mpc.
	LineUnit = 4 * math.Pi * cmPerMpc * cmPerMpc

	// RadioUnit is the luminosity in W/Hz of 1 Jy at 1 Mpc.
	RadioUnit = 4 * math.Pi * metresPerMpc * metresPerMpc * wattsPerJy
)

// Luminosity fills l with luminosities in units of the Sun's in the same band:
// L = 10^(-0.4 (M - M_sun)). sun is the Sun's absolute magnitude in the band
// and system of M (Willmer 2018, ApJS 236, 47, Table 3). Where M is formed with
// h (M - 5 log10 h), l is in h^-2 L_sun.
func Luminosity(l, m []float64, sun float64) {
	m = m[:len(l)]
	for i := range l {
		l[i] = exact.Exp10(-0.4 * (m[i] - sun))
	}
}

// LineLuminosity fills l with 4π D_L² F in erg/s, from fluxes F in units of
// scale erg/s/cm² and luminosity distances dl in Mpc. No K-correction applies
// to a line's total flux (Hogg 1999, arXiv:astro-ph/9905116, eq. 24). A missing
// flux gives NaN and status.Magnitude; a negative one, which noise can make,
// gives a negative luminosity.
func LineLuminosity(l, flux, dl []float64, scale float64, st []int32) {
	flux, dl, st = flux[:len(l)], dl[:len(l)], st[:len(l)]
	unit := LineUnit * scale
	for i, f := range flux {
		if f != f {
			st[i] |= status.Magnitude
		}
		l[i] = unit * f * dl[i] * dl[i]
	}
}

// A Radio is a power-law radio spectrum, S ~ nu^Alpha.
type Radio struct {
	Alpha float64
	Scale float64 // Jy in a unit of the flux column
}

// Luminosity fills l with the luminosity in W/Hz at the rest frequency equal
// to that of observation,
//
//	L_nu = 4π D_L² S (1+z)^-(1+α)
//
// (Hogg 1999, eq. 22 with the power law put in), from fluxes s in units of
// r.Scale Jy, luminosity distances dl in Mpc, and the redshifts z at which they
// were observed. alpha, if not nil, has a spectral index for each row, in
// place of r.Alpha; a missing one gives NaN and status.Input, a missing flux
// NaN and status.Magnitude.
func (r Radio) Luminosity(l, s, dl, z, alpha []float64, st []int32) {
	s, dl, z, st = s[:len(l)], dl[:len(l)], z[:len(l)], st[:len(l)]
	unit := RadioUnit * r.Scale
	for i, f := range s {
		if f != f {
			st[i] |= status.Magnitude
		}
		a := r.Alpha
		if alpha != nil {
			if a = alpha[i]; a != a {
				st[i] |= status.Input
			}
		}
		k := exact.Exp(-(1 + a) * exact.Log1p(z[i]))
		l[i] = unit * f * dl[i] * dl[i] * k
	}
}

// Size fills d with proper sizes in kpc, from angles theta in arcsec and the
// angular scale in kpc/arcsec. A missing angle gives NaN and status.Input.
func Size(d, theta, scale []float64, st []int32) {
	theta, scale, st = theta[:len(d)], scale[:len(d)], st[:len(d)]
	for i, v := range theta {
		if v != v {
			st[i] |= status.Input
		}
		d[i] = v * scale[i]
	}
}
