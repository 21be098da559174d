package demo

import (
	"math"
	"sort"

	"catenrich/internal/exact"
)

// The bands of the survey.
const (
	bandG = iota
	bandR
	bandI
	bands
)

var bandNames = [bands]string{"g", "r", "i"}

// extinctionPerEBV is A/E(B-V) in g, r, i for R_V = 3.1 (Schlafly & Finkbeiner
// 2011, ApJ 737, 103, table 6; from memory).
var extinctionPerEBV = [bands]float64{3.303, 2.285, 1.698}

// A template is a kind of spectrum. In g and r it is a power law, in i all
// templates are the light of old stars, oldStars.
type template struct {
	name   string
	alpha  float64 // f_nu ~ nu^alpha in g and r
	redder float64 // M_r - M_i, mag
	inMain float64 // share of the galaxies in "main"
	inDeep float64 // and in "deep"
}

// The templates and, apart, what only some objects have.
var templates = []template{
	{name: "E", alpha: -2.2, redder: 0.40, inMain: 0.35, inDeep: 0.20},
	{name: "Sbc", alpha: -1.6, redder: 0.32, inMain: 0.40, inDeep: 0.45},
	{name: "Im", alpha: -0.9, redder: 0.18, inMain: 0.25, inDeep: 0.35},
	{name: "QSO", alpha: -0.5, redder: 0.15},
}

const (
	irregular = 2 // of templates
	quasarSED = 3
	starSED   = -1 // a star has none
)

// evolutionQ and evolutionZero make e = -Q (z - z0), mag, in every band: the
// form of Lin et al. 1999, ApJ 518, 533.
const (
	evolutionQ    = 0.8
	evolutionZero = 0.1
)

func evolution(z float64) float64 { return float64(-evolutionQ * (z - evolutionZero)) }

// color returns M_g - M_r of a power law: the bands are at 4770 and 6230
// Angstrom (round, invented numbers).
func (t *template) color() float64 { return float64(2.5 * t.alpha * exact.Log10(4770.0/6230)) }

// powerLawK returns the K-correction of f_nu ~ nu^alpha, mag (Hogg et al. 2002,
// arXiv:astro-ph/0210394).
func (t *template) powerLawK(z float64) float64 {
	return float64(-2.5 * (1 + t.alpha) * exact.Log10(1+z))
}

// oldStars is the spectrum of every galaxy in i, f_lambda at lambda in
// Angstrom, about 1 at 5500: a black body of 5200 K and, in the ultraviolet, a
// power law of young stars. Invented.
func oldStars(lambda float64) float64 {
	const kelvin = 5200.0
	const second = 1.438776877e8 // h c/k, Angstrom K, CODATA 2018
	body := 1.0 / (exact.Exp(second/(lambda*kelvin)) - 1)
	x := 5500 / lambda
	return float64(120*body*x*x*x*x*x) + float64(0.2*x*x)
}

// responseI is the bandpass of i: a plateau of photon efficiency with smooth
// edges. Invented.
func responseI(lambda float64) float64 {
	const low, high, edge = 6850.0, 8450.0, 300.0
	x := min(lambda-low, high-lambda) / edge
	switch {
	case x <= 0:
		return 0
	case x >= 1:
		return 0.85
	}
	return 0.85 * 0.5 * (1 - exact.Cos(math.Pi*x))
}

// The wavelengths of the two files, Angstrom. The spectrum's file ends in the
// ultraviolet at 1200: beyond z = 4.7 it does not cover the band, as happens.
const (
	sedLow, sedHigh, sedStep    = 1200, 12000, 10
	bandLow, bandHigh, bandStep = 6850, 8450, 10
)

// photonsI counts the photons of oldStars through i at redshift z, up to a
// constant.
func photonsI(z float64) float64 {
	sum := 0.0
	for lambda := float64(bandLow); lambda <= bandHigh; lambda += bandStep {
		sum += float64(lambda * responseI(lambda) * oldStars(lambda/(1+z)))
	}
	return sum
}

// A synthetic is the K-correction of oldStars in i, tabulated.
type synthetic struct{ z, k []float64 }

// newSynthetic integrates
//
//	K = -2.5 log10 [ 1/(1+z) ∫λ f(λ/(1+z)) R(λ) dλ / ∫λ f(λ) R(λ) dλ ]
//
// (Hogg et al. 2002, the same band in both frames) at steps of 0.4 % in 1+z.
func newSynthetic() *synthetic {
	s := new(synthetic)
	rest := photonsI(0)
	for z := 0.0; z < highest+1; z = float64(1.004*(1+z)) - 1 {
		s.z = append(s.z, z)
		s.k = append(s.k, -2.5*exact.Log10(photonsI(z)/(rest*(1+z))))
	}
	return s
}

// at interpolates linearly, to about 1e-5 mag; below 0 it goes on as it begins.
func (s *synthetic) at(z float64) float64 {
	i := sort.SearchFloat64s(s.z, z)
	i = min(max(i, 1), len(s.z)-1)
	return s.k[i-1] + float64((s.k[i]-s.k[i-1])*(z-s.z[i-1])/(s.z[i]-s.z[i-1]))
}
