package columns

import (
	"math"

	"catenrich/cosmo"
	"catenrich/cosmo/spread"
	"catenrich/internal/exact"
	"catenrich/pipeline/job"
)

// redshifts are the columns about the redshift itself. They come after the
// others: a reader of the output looks for distances first.
var redshifts = []Entry{
	{
		Name: "surface_brightness_dimming", Group: "distances", Scope: Once, Unit: Magnitude, UCD: "phot.mag;phys.cosmology",
		Doc:  "cosmological dimming of surface brightness, 10 log10(1+z)",
		From: "Tolman 1930; Hogg 1999, section 7",
		Eval: func(b *Base, out []float64) {
			for i, z := range b.Rows.ZObs { // 1+z would lose the digits of a small z
				out[i] = 10 / math.Ln10 * exact.Log1p(z)
			}
		},
		Spread: onceRule((*spread.Inputs).Dimming),
	},
	{
		Name: "cosmological_redshift", Group: "redshifts", Scope: Once, UCD: "src.redshift;phys.cosmology",
		Doc:    "redshift due to the expansion alone, after the change of frame and the peculiar velocity",
		From:   "Davis et al. 2011; Planck 2018 results I, Table 3 (the Sun's motion)",
		Eval:   func(b *Base, out []float64) { copy(out, b.Rows.ZCos) },
		Spread: onceRule((*spread.Inputs).CosmologicalRedshift),
	},
	{
		Name: "comoving_x", Group: "positions", Scope: PerModel, Unit: Length, UCD: "pos.cartesian.x;phys.cosmology",
		Doc:  "comoving position, toward right ascension 0, declination 0 (ICRS)",
		From: "Hogg 1999, eq. 15, times the unit vector", Uses: cosmo.DC, Terms: directionTerm, Missing: noPositions,
		Eval:   func(b *Base, out []float64) { along(out, b, b.Rows.Toward.X) },
		Spread: alongX,
	},
	{
		Name: "comoving_y", Group: "positions", Scope: PerModel, Unit: Length, UCD: "pos.cartesian.y;phys.cosmology",
		Doc:  "comoving position, toward right ascension 90 degrees, declination 0 (ICRS)",
		From: "Hogg 1999, eq. 15, times the unit vector", Uses: cosmo.DC, Terms: directionTerm, Missing: noPositions,
		Eval:   func(b *Base, out []float64) { along(out, b, b.Rows.Toward.Y) },
		Spread: alongY,
	},
	{
		Name: "comoving_z", Group: "positions", Scope: PerModel, Unit: Length, UCD: "pos.cartesian.z;phys.cosmology",
		Doc:  "comoving position, toward the north celestial pole (ICRS)",
		From: "Hogg 1999, eq. 15, times the unit vector", Uses: cosmo.DC, Terms: directionTerm, Missing: noPositions,
		Eval:   func(b *Base, out []float64) { along(out, b, b.Rows.Toward.Z) },
		Spread: alongZ,
	},
}

// The errors of comoving positions.
var (
	alongX = positionRule(func(r *Rows) []float64 { return r.Toward.X })
	alongY = positionRule(func(r *Rows) []float64 { return r.Toward.Y })
	alongZ = positionRule(func(r *Rows) []float64 { return r.Toward.Z })
)

func positionRule(toward func(*Rows) []float64) spreadRule {
	return spreadRule{Uses: cosmo.E, Error: func(b *Base, out []float64) {
		b.inputs.Position(b.partials(len(out)), toward(b.Rows))
		b.Rows.sigmas.Fill(out, &b.partial)
	}}
}

// onceRule is the error of a column that no model has a part in.
func onceRule(partial func(*spread.Inputs, *spread.Partial)) spreadRule {
	return spreadRule{Error: func(b *Base, out []float64) {
		x := b.spare[:len(out)]
		for i, z := range b.Rows.ZCos {
			x[i] = 1 + z
		}
		in := spread.Inputs{Base: &cosmo.Base{X: x}}
		partial(&in, b.partials(len(out)))
		b.Rows.sigmas.Fill(out, &b.partial)
	}}
}

// along fills out with one component of the comoving position.
func along(out []float64, b *Base, toward []float64) {
	dc := b.DC[:len(out)]
	for i := range out {
		out[i] = dc[i] * b.Scales.Length * toward[i]
	}
}

// noPositions says why comoving positions cannot be had.
func noPositions(s *job.Settings, _ int) string {
	if _, ok := s.Catalogue[job.RoleRightAscension]; !ok {
		return "columns.right_ascension and columns.declination"
	}
	for i := range s.Cosmologies {
		if c := &s.Cosmologies[i]; !c.Flat && (c.OmegaM+c.OmegaDE != 1 || c.CMBTemperature != 0) {
			return "flat models: in a curved one there are no Cartesian coordinates"
		}
	}
	return ""
}
