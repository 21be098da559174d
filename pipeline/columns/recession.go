package columns

import (
	"catenrich/cosmo"
	"catenrich/cosmo/spread"
	"catenrich/internal/table"
)

var recession = []Entry{
	{
		Name: "recession_velocity_now", Group: "recession", Scope: PerModel, Unit: Speed, UCD: "phys.veloc;phys.cosmology",
		Doc:  "recession velocity today, H0 times the comoving distance (Hubble flow only)",
		From: "Davis & Lineweaver 2004", Uses: cosmo.DC,
		Eval:   func(b *Base, out []float64) { scale(out, b.DC, cosmo.SpeedOfLight) },
		Spread: linear(0, (*spread.Inputs).VelocityNow),
	},
	{
		Name: "recession_velocity_at_emission", Group: "recession", Scope: PerModel, Unit: Speed, UCD: "phys.veloc;phys.cosmology",
		Doc:  "recession velocity when the light left, H(z) times the proper distance then (Hubble flow only)",
		From: "Davis & Lineweaver 2004", Uses: cosmo.DC | cosmo.E,
		Eval: func(b *Base, out []float64) {
			dc, e, x := b.DC[:len(out)], b.E[:len(out)], b.X[:len(out)]
			for i := range out {
				out[i] = e[i] * dc[i] / x[i] * cosmo.SpeedOfLight
			}
		},
		Spread: sloped(cosmo.DC, (*spread.Inputs).VelocityAtEmission),
	},
	{
		Name: "superluminal_now", Group: "recession", Scope: PerModel, UCD: "meta.code;phys.cosmology",
		Doc:  "whether the object recedes faster than light today: it lies outside the Hubble sphere",
		From: "Davis & Lineweaver 2004", Uses: cosmo.DC,
		Test: func(b *Base, out []uint8) { exceeds(out, b.DC, 1) },
		Size: superluminalNowSize,
	},
	{
		Name: "superluminal_at_emission", Group: "recession", Scope: PerModel, UCD: "meta.code;phys.cosmology",
		Doc:  "whether the object receded faster than light when the light left",
		From: "Davis & Lineweaver 2004", Uses: cosmo.DC | cosmo.E,
		Test: func(b *Base, out []uint8) {
			dc, e, x := b.DC[:len(out)], b.E[:len(out)], b.X[:len(out)]
			for i := range out {
				out[i] = flag(e[i]*dc[i]/x[i], 1)
			}
		},
		Size: superluminalAtEmissionSize,
	},
	{
		Name: "beyond_event_horizon", Group: "recession", Scope: PerModel, UCD: "meta.code;phys.cosmology",
		Doc:  "whether a signal sent today can never arrive there; false in a model without an event horizon",
		From: "Davis & Lineweaver 2004", Uses: cosmo.DC,
		Test: func(b *Base, out []uint8) { exceeds(out, b.DC, b.Scales.Horizon) },
		Size: beyondHorizonSize,
	},
	{
		Name: "redshift_drift", Group: "recession", Scope: PerModel, Unit: PerYear, UCD: "arith.rate;src.redshift",
		Doc:  "change of the redshift per year of our time, (1+z) H0 - H(z)",
		From: "Sandage 1962; Loeb 1998", Uses: cosmo.Drift,
		Eval:   func(b *Base, out []float64) { scale(out, b.Drift, b.Scales.Rate) },
		Spread: sloped(0, (*spread.Inputs).RedshiftDrift),
		Size:   redshiftDriftSize,
	},
	{
		Name: "velocity_drift", Group: "recession", Scope: PerModel, Unit: SpeedDrift, UCD: "arith.rate;phys.veloc",
		Doc:  "the redshift drift as a velocity, c/(1+z) dz/dt",
		From: "Sandage 1962; Loeb 1998", Uses: cosmo.Drift,
		Eval: func(b *Base, out []float64) {
			divide(out, b.Drift, b.X, b.Scales.Rate*cosmo.SpeedOfLight*centimetresPerKm)
		},
		Spread: sloped(0, (*spread.Inputs).VelocityDrift),
		Size:   velocityDriftSize,
	},
}

// exceeds tests v > limit, row by row.
func exceeds(out []uint8, v []float64, limit float64) {
	v = v[:len(out)]
	for i := range out {
		out[i] = flag(v[i], limit)
	}
}

// flag is v > limit, Null for a NaN.
func flag(v, limit float64) uint8 {
	switch {
	case v > limit:
		return table.True
	case v <= limit:
		return table.False
	}
	return table.Null
}
