package columns

import (
	"math"

	"catenrich/cosmo"
	"catenrich/internal/exact"
)

// A Unit is a unit that may depend on the job's length unit.
type Unit uint8

const (
	None            Unit = iota
	Length               // Mpc, or the job's own
	Volume               // cubic Length
	VolumePerSr          // cubic Length per steradian
	Magnitude            // mag
	Gyr                  // Gyr
	Scale                // kpc per arcsec
	Speed                // km/s
	PerYear              // 1/yr
	SpeedDrift           // cm/s/yr
	PerVolume            // 1 over cubic Length
	SolarLuminosity      // solar luminosities of the band
	ErgPerSecond         // erg/s
	WattPerHertz         // W/Hz
	Kpc                  // kpc
)

// VOUnit returns the unit in VOUnits 1.1 for a length unit of the job file.
// Mpc/h has no VOUnit: it is written with a quoted unknown unit, and the
// description says what h is.
func (u Unit) VOUnit(length string) string {
	name, h3, h2, h1 := length, "", "", ""
	if length == "Mpc/h" {
		name, h3, h2, h1 = "Mpc", ".'littleh'**-3", ".'littleh'**-2", ".'littleh'**-1"
	}
	switch u {
	case Length:
		return name + h1
	case Volume:
		return name + "**3" + h3
	case VolumePerSr:
		return name + "**3" + h3 + ".sr**-1"
	case Magnitude:
		return "mag"
	case Gyr:
		return "Gyr"
	case Scale:
		return "kpc" + h1 + ".arcsec**-1"
	case Speed:
		return "km.s**-1"
	case PerYear:
		return "yr**-1"
	case SpeedDrift:
		return "cm.s**-1.yr**-1"
	case PerVolume:
		if length == "Mpc/h" {
			return "Mpc**-3.'littleh'**3"
		}
		return length + "**-3"
	case SolarLuminosity:
		return "solLum" + h2
	case ErgPerSecond:
		return "erg.s**-1" + h2
	case WattPerHertz:
		return "W.Hz**-1" + h2
	case Kpc:
		return "kpc" + h1
	}
	return ""
}

// Note returns what a description adds for the length unit; "" mostly.
func (u Unit) Note(length string) string {
	if length != "Mpc/h" {
		return ""
	}
	switch u {
	case Length, Volume, VolumePerSr, Scale, PerVolume, SolarLuminosity, ErgPerSecond, WattPerHertz, Kpc:
		return "h = H0 / (100 km/s/Mpc) of the column's own cosmology (Croton 2013)"
	case Magnitude:
		return "with lengths in Mpc/h a distance modulus is 5 log10(D_L h / 10 pc) and an absolute magnitude M - 5 log10 h (Croton 2013)"
	}
	return ""
}

// Scales turn the dimensionless quantities of one model into the job's units.
type Scales struct {
	Length     float64 // the Hubble distance
	Volume     float64 // its cube
	PerMpc     float64 // length units in one Mpc
	Mpc        float64 // the Hubble distance in Mpc, or Mpc/h where that is the unit
	PerArcsec  float64 // kpc per arcsec of one Hubble distance
	Time       float64 // the Hubble time, Gyr
	Modulus    float64 // distance modulus of one Hubble distance, mag
	ModulusMpc float64 // the same with lengths in Mpc, whatever the unit
	Rate       float64 // H0, 1/yr
	Horizon    float64 // event horizon in Hubble distances; +Inf where there is none
}

const (
	mpcPerGpc        = 1e3
	centimetresPerKm = 1e5
	yearsPerGyr      = 1e9
	kpcPerMpc        = 1e3
	mpcPerGlyr       = cosmo.LightYear * 1e9 / (cosmo.Parsec * 1e6)
	radiansPerArcsec = math.Pi / 648000
)

// scales returns the scales of a model for a length unit of the job file.
func scales(m Model, length string) Scales {
	mpc := m.HubbleDistance()
	little := 1.0 // h where lengths are in Mpc/h
	per := 1.0
	switch length {
	case "Gpc":
		per = 1 / mpcPerGpc
	case "Glyr":
		per = 1 / mpcPerGlyr
	case "Mpc/h":
		little = m.Params().H0 / 100
		per = little
	}
	unit := mpc * per
	return Scales{
		Length:     unit,
		Volume:     unit * unit * unit,
		PerMpc:     per,
		Mpc:        mpc * little,
		PerArcsec:  mpc * little * kpcPerMpc * radiansPerArcsec,
		Time:       m.HubbleTime(),
		Modulus:    25 + float64(5*exact.Log10(mpc*little)),
		ModulusMpc: 25 + float64(5*exact.Log10(mpc)),
		Rate:       1 / (m.HubbleTime() * yearsPerGyr),
		Horizon:    m.EventHorizon() / mpc,
	}
}
