package columns

import (
	"catenrich/cosmo"
	"catenrich/cosmo/spread"
)

var distances = []Entry{
	{
		Name: "comoving_distance", Group: "distances", Scope: PerModel, Unit: Length, UCD: "pos.distance;phys.cosmology",
		Doc:  "line-of-sight comoving distance",
		From: "Hogg 1999, eq. 15", Uses: cosmo.DC,
		Eval:   func(b *Base, out []float64) { scale(out, b.DC, b.Scales.Length) },
		Spread: linear(0, (*spread.Inputs).ComovingDistance),
	},
	{
		Name: "transverse_comoving_distance", Group: "distances", Scope: PerModel, Unit: Length, UCD: "pos.distance;phys.cosmology",
		Doc:  "transverse comoving distance; past the antipode of a closed model its absolute value",
		From: "Hogg 1999, eq. 16", Uses: cosmo.DM,
		Eval:   func(b *Base, out []float64) { scale(out, b.DM, b.Scales.Length) },
		Spread: linear(distanceUses, (*spread.Inputs).TransverseDistance),
	},
	{
		Name: "angular_diameter_distance", Group: "distances", Scope: PerModel, Unit: Length, UCD: "pos.distance;phys.cosmology",
		Doc:  "angular diameter distance",
		From: "Hogg 1999, eq. 18; frames as Calcino & Davis 2017", Uses: cosmo.DM,
		Eval:   func(b *Base, out []float64) { scale(out, b.angular(), b.Scales.Length) },
		Spread: linear(distanceUses, (*spread.Inputs).AngularDiameterDistance).displaced(angularDisplaced),
	},
	{
		Name: "luminosity_distance", Group: "distances", Scope: PerModel, Unit: Length, UCD: "pos.distance;phys.cosmology",
		Doc:  "luminosity distance",
		From: "Hogg 1999, eq. 21; frames as Calcino & Davis 2017", Uses: cosmo.DM,
		Eval:   func(b *Base, out []float64) { scale(out, b.luminosity(), b.Scales.Length) },
		Spread: linear(distanceUses, (*spread.Inputs).LuminosityDistance).displaced(luminosityDisplaced),
	},
	{
		Name: "emission_distance", Group: "distances", Scope: PerModel, Unit: Length, UCD: "pos.distance;phys.cosmology",
		Doc:  "proper distance at the time when the light left",
		From: "Davis & Lineweaver 2004", Uses: cosmo.DC,
		Eval:   func(b *Base, out []float64) { divide(out, b.DC, b.X, b.Scales.Length) },
		Spread: linear(cosmo.DC, (*spread.Inputs).EmissionDistance),
	},
	{
		Name: "distance_modulus", Group: "distances", Scope: PerModel, Unit: Magnitude, UCD: "phot.mag.distMod",
		Doc:  "distance modulus, 5 log10 of the luminosity distance over 10 pc",
		From: "Hogg 1999, eq. 25", Uses: cosmo.DM,
		Eval:   func(b *Base, out []float64) { copy(out, b.modulus()) },
		Spread: linear(distanceUses, (*spread.Inputs).DistanceModulus).displaced(modulusDisplaced),
	},
	{
		Name: "angular_scale", Group: "distances", Scope: PerModel, Unit: Scale, UCD: "pos.distance;phys.cosmology",
		Doc:  "proper transverse length seen under one arcsecond",
		From: "Hogg 1999, section 6", Uses: cosmo.DM,
		Eval:   func(b *Base, out []float64) { b.kpcPerArcsec(out) },
		Spread: angularScaleRule(),
	},
}

// angularScaleRule is that of the angular diameter distance, in kpc/arcsec.
func angularScaleRule() spreadRule {
	rule := linear(distanceUses, (*spread.Inputs).AngularDiameterDistance).displaced(angularDisplaced)
	distance := rule.Error
	rule.Error = func(b *Base, out []float64) {
		distance(b, out)
		scale(out, out, b.Scales.PerArcsec/b.Scales.Length)
	}
	return rule
}

// scale sets out = v * by.
func scale(out, v []float64, by float64) {
	v = v[:len(out)]
	for i := range out {
		out[i] = v[i] * by
	}
}

// divide sets out = v / x * by.
func divide(out, v, x []float64, by float64) {
	v, x = v[:len(out)], x[:len(out)]
	for i := range out {
		out[i] = v[i] / x[i] * by
	}
}
