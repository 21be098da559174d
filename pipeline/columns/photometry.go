package columns

import (
	"catenrich/cosmo"
	"catenrich/cosmo/photo"
	"catenrich/pipeline/job"
)

// photometry are the columns of bands, lines, radio sources and sizes.
var photometry = []Entry{
	{
		Name: "extinction", Group: "photometry", Scope: Once, Family: PerBand, Unit: Magnitude, UCD: "phys.absorption;phot.mag",
		Doc:  "Galactic foreground extinction A",
		From: "Schlafly & Finkbeiner 2011, Table 6, for coefficients times E(B-V)", Terms: extinctionTerm,
		Missing: func(s *job.Settings, i int) string {
			return unless(s.Bands[i].Extinction != "", "the band's extinction")
		},
		Eval:   func(b *Base, out []float64) { copy(out, b.band().extinction) },
		Spread: spreadRule{Error: extinctionError},
	},
	{
		Name: "k_correction", Group: "photometry", Scope: Once, Family: PerBand, Unit: Magnitude, UCD: "phot.mag;arith.diff",
		Doc:  "K-correction from the band as observed to the band at rest",
		From: "Hogg et al. 2002, eq. 13 (from memory)", Terms: kTerm,
		Missing: func(s *job.Settings, i int) string {
			return unless(s.Bands[i].K.Kind != "none", "the band's k_correction")
		},
		Eval:   func(b *Base, out []float64) { copy(out, b.band().k) },
		Spread: spreadRule{Error: kError},
	},
	{
		Name: "evolution", Group: "photometry", Scope: Once, Family: PerBand, Unit: Magnitude, UCD: "phot.mag;arith.diff",
		Doc:  "luminosity evolution e = -Q (z - z0)",
		From: "Lin et al. 1999", Terms: evolutionTerm,
		Missing: func(s *job.Settings, i int) string { return unless(s.Bands[i].Q != 0, "the band's evolution") },
		Eval:    func(b *Base, out []float64) { copy(out, b.band().evolution) },
		Spread:  spreadRule{Error: evolutionError},
	},
	{
		Name: "absolute_magnitude", Group: "photometry", Scope: PerModel, Family: PerBand, Unit: Magnitude, UCD: "phys.magAbs",
		Doc:  "absolute magnitude M = m - A - mu - K - e",
		From: "Hogg 1999, eq. 26; Lin et al. 1999 for e", Uses: cosmo.DM, Terms: magnitudeTerms,
		Eval:   func(b *Base, out []float64) { copy(out, b.absolute()) },
		Spread: spreadRule{Uses: distanceUses, Error: absoluteError, Interval: true, Displace: absoluteDisplaced},
	},
	{
		Name: "luminosity", Group: "photometry", Scope: PerModel, Family: PerBand, Unit: SolarLuminosity, UCD: "phys.luminosity",
		Doc:  "luminosity in the band, in units of the Sun's in the same band",
		From: "Willmer 2018, Table 3, for the Sun's absolute magnitude", Uses: cosmo.DM, Terms: magnitudeTerms,
		Missing: func(s *job.Settings, i int) string {
			return unless(s.Bands[i].Sun != nil, "the band's solar_absolute_magnitude")
		},
		Eval:   func(b *Base, out []float64) { photo.Luminosity(out, b.absolute(), b.band().sun) },
		Spread: spreadRule{Uses: distanceUses, Error: luminosityError},
	},
	{
		Name: "line_luminosity", Group: "photometry", Scope: PerModel, Family: PerLine, Unit: ErgPerSecond, UCD: "phys.luminosity;em.line",
		Doc:  "luminosity of the line, 4 pi D_L^2 F",
		From: "Hogg 1999, eq. 24", Uses: cosmo.DM, Terms: lineTerm,
		Eval:   lineLuminosity,
		Spread: spreadRule{Uses: distanceUses, Error: lineError},
	},
	{
		Name: "radio_luminosity", Group: "photometry", Scope: PerModel, Family: PerRadio, Unit: WattPerHertz, UCD: "phys.luminosity;em.radio",
		Doc:  "radio luminosity at the rest frequency equal to that observed, 4 pi D_L^2 S (1+z)^-(1+alpha)",
		From: "Hogg 1999, eq. 22", Uses: cosmo.DM, Terms: radioTerm,
		Eval:   radioLuminosity,
		Spread: spreadRule{Uses: distanceUses, Error: radioError},
	},
	{
		Name: "physical_size", Group: "photometry", Scope: PerModel, Family: PerSize, Unit: Kpc, UCD: "phys.size",
		Doc:  "proper transverse size, from the angular size",
		From: "Hogg 1999, section 6", Uses: cosmo.DM, Terms: sizeTerm,
		Eval:   physicalSize,
		Spread: spreadRule{Uses: distanceUses, Error: sizeError},
	},
}

func lineLuminosity(b *Base, out []float64) {
	photo.LineLuminosity(out, b.Rows.lines[b.item].value, b.luminosityMpc(), b.job.Lines[b.item].Scale, b.Rows.Status)
}

func radioLuminosity(b *Base, out []float64) {
	r := photo.Radio{Alpha: b.job.Radios[b.item].Alpha, Scale: b.job.Radios[b.item].Scale}
	r.Luminosity(out, b.Rows.radios[b.item].value, b.luminosityMpc(), b.Rows.ZObs, nil, b.Rows.Status)
}

func physicalSize(b *Base, out []float64) {
	b.kpcPerArcsec(out)
	photo.Size(out, b.Rows.sizes[b.item].value, out, b.Rows.Status)
}

// absoluteDisplaced is what turns M at rest, of m - A = 0, into the row's.
func absoluteDisplaced(b *Base, _, shift []float64) {
	r := b.band()
	for i := range shift {
		shift[i] = r.apparent[i] - r.extinction[i]
		if b.Rows.Shift != nil {
			shift[i] -= b.Rows.Shift[i]
		}
	}
}

// unless is what where it is not so.
func unless(so bool, what string) string {
	if so {
		return ""
	}
	return what
}
