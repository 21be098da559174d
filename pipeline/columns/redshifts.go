package columns

import (
	"math"

	"catenrich/internal/exact"
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
	},
	{
		Name: "cosmological_redshift", Group: "redshifts", Scope: Once, UCD: "src.redshift;phys.cosmology",
		Doc:  "redshift due to the expansion alone, after the change of frame and the peculiar velocity",
		From: "Davis et al. 2011; Planck 2018 results I, Table 3 (the Sun's motion)",
		Eval: func(b *Base, out []float64) { copy(out, b.Rows.ZCos) },
	},
}
