package columns

import (
	"catenrich/cosmo"
	"catenrich/cosmo/spread"
)

var volumes = []Entry{
	{
		Name: "comoving_volume", Group: "volumes", Scope: PerModel, Unit: Volume, UCD: "phys.volume;phys.cosmology",
		Doc:  "comoving volume within this redshift, whole sky",
		From: "Hogg 1999, eq. 29", Uses: cosmo.Volume,
		Eval:   func(b *Base, out []float64) { scale(out, b.Volume, b.Scales.Volume) },
		Spread: linear(cosmo.DC|cosmo.DM, (*spread.Inputs).Volume),
	},
	{
		Name: "comoving_volume_element", Group: "volumes", Scope: PerModel, Unit: VolumePerSr, UCD: "phys.volume;phys.cosmology",
		Doc:  "comoving volume per steradian and unit redshift",
		From: "Hogg 1999, eq. 28", Uses: cosmo.DM | cosmo.E,
		Eval: func(b *Base, out []float64) {
			dm, e := b.DM[:len(out)], b.E[:len(out)]
			for i := range out {
				out[i] = dm[i] * dm[i] / e[i] * b.Scales.Volume
			}
		},
		Spread: sloped(distanceUses, (*spread.Inputs).VolumeElement),
	},
}
