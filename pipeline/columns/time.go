package columns

import (
	"catenrich/cosmo"
	"catenrich/cosmo/spread"
)

var times = []Entry{
	{
		Name: "lookback_time", Group: "times", Scope: PerModel, Unit: Gyr, UCD: "time.interval;phys.cosmology",
		Doc:  "time since the light left",
		From: "Hogg 1999, eq. 30", Uses: cosmo.Lookback,
		Eval:   func(b *Base, out []float64) { scale(out, b.Lookback, b.Scales.Time) },
		Spread: linear(0, (*spread.Inputs).Lookback),
	},
	{
		Name: "age_at_emission", Group: "times", Scope: PerModel, Unit: Gyr, UCD: "time.age;phys.cosmology",
		Doc:  "age of the universe when the light left",
		From: "Hogg 1999, section 10", Uses: cosmo.Age,
		Eval:   func(b *Base, out []float64) { scale(out, b.Age, b.Scales.Time) },
		Spread: linear(0, (*spread.Inputs).Age),
	},
	{
		Name: "contact_lost_age", Group: "times", Scope: PerModel, Unit: Gyr, UCD: "time.age;phys.cosmology",
		Doc:  "cosmic age after which a signal sent from here never reaches the object; in the past beyond the event horizon",
		From: "Davis & Lineweaver 2004, from the event horizon and the comoving distance", Uses: cosmo.ContactLost,
		Eval:   func(b *Base, out []float64) { scale(out, b.ContactLost, b.Scales.Time) },
		Spread: spreadRule{Error: contactLostError, Interval: true},
	},
}
