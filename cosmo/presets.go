package cosmo

import "slices"

// A Preset is a set of parameters under a name, with where they come from.
type Preset struct {
	Name   string
	Params Params
	Source string // publication, table and column
	Doc    string // what a user should know before choosing it
}

// Presets returns the named sets, in the order in which they are shown. The
// slices within belong to the caller.
func Presets() []Preset {
	return []Preset{
		{
			Name: "planck2018",
			// 0.30964 = (0.02242 + 0.11933)/0.6766^2: baryons and cold dark matter
			Params: Params{H0: 67.66, OmegaM: 0.30964, Flat: true, W0: -1, TCMB: 2.7255, Neff: 3.046, NeutrinoMasses: []float64{0, 0, 0.06}},
			Source: "Planck 2018 results VI, arXiv:1807.06209, table 2, last column (TT,TE,EE+lowE+lensing+BAO)",
			Doc:    "flat; omega_m leaves out the 0.06 eV neutrino, which the published 0.3111 includes",
		},
		{
			Name: "planck2015",
			// 0.30749 = (0.02230 + 0.1188)/0.6774^2
			Params: Params{H0: 67.74, OmegaM: 0.30749, Flat: true, W0: -1, TCMB: 2.7255, Neff: 3.046, NeutrinoMasses: []float64{0, 0, 0.06}},
			Source: "Planck 2015 results XIII, arXiv:1502.01589, table 4, last column (TT,TE,EE+lowP+lensing+ext; from memory)",
			Doc:    "flat; omega_m leaves out the 0.06 eV neutrino",
		},
		{
			Name:   "wmap9",
			Params: Params{H0: 69.32, OmegaM: 0.2865, Flat: true, W0: -1, TCMB: 2.725, Neff: 3.04},
			Source: "Hinshaw et al. 2013, ApJS 208, 19, table 4 (WMAP9+eCMB+BAO+H0)",
			Doc:    "flat, massless neutrinos",
		},
		{
			Name:   "seventy-thirty",
			Params: Params{H0: 70, OmegaM: 0.3, Flat: true, W0: -1},
			Source: "common practice, no source",
			Doc:    "flat, matter and a cosmological constant, no radiation: round numbers for comparing with older work",
		},
	}
}

// FindPreset returns the set of that name.
func FindPreset(name string) (Preset, bool) {
	sets := Presets()
	i := slices.IndexFunc(sets, func(p Preset) bool { return p.Name == name })
	if i < 0 {
		return Preset{}, false
	}
	return sets[i], true
}
