package demo

import (
	"math"

	"catenrich/cosmo"
	"catenrich/cosmo/frame"
	"catenrich/internal/exact"
)

// A field is a patch of sky between two right ascensions and two declinations,
// in degrees.
type field struct {
	name            string
	raLow, raHigh   float64
	decLow, decHigh float64
	idPrefix        string  // of its objects' identifiers; "main" begins with 0, as identifiers may
	depth           float64 // faintest r magnitude, about
	noise           float64 // magnitude error at the depth; 0.015 is added in quadrature
	dust            float64 // mean E(B-V)
}

var (
	mainField = field{
		name: "main", raLow: 150, raHigh: 158.8, decLow: 1.2, decHigh: 4.4, idPrefix: "0417",
		depth: 19.8, noise: 0.03, dust: 0.032,
	}
	deepField = field{
		name: "deep", raLow: 34, raHigh: 35, decLow: -5.5, decHigh: -4.5, idPrefix: "8421",
		depth: 24.5, noise: 0.045, dust: 0.021,
	}
)

// area returns the patch's solid angle in square degrees.
func (f *field) area() float64 {
	height := exact.Sin(f.decHigh*degree) - exact.Sin(f.decLow*degree)
	return (f.raHigh - f.raLow) * height / degree
}

const degree = math.Pi / 180

// wholeSky is 4 pi steradian in square degrees.
const wholeSky = 129600 / math.Pi

// place draws a position uniform on the patch, rounded as the catalogue has it.
func (f *field) place(d *dice) (ra, dec float64) {
	low, high := exact.Sin(f.decLow*degree), exact.Sin(f.decHigh*degree)
	return round(d.between(f.raLow, f.raHigh), 6), round(exact.Asin(d.between(low, high))/degree, 6)
}

// reddening draws the E(B-V) of the survey's dust map at a place, with its error.
func (f *field) reddening(d *dice, ra, dec float64) (ebv, err float64) {
	wave := exact.Sin(3*(ra-f.raLow)) * exact.Cos(2*(dec-f.decLow))
	ebv = f.dust * (1 + float64(0.35*wave)) * exact.Exp(0.08*d.gauss())
	ebv = round(ebv, 4)
	return ebv, round(0.1*ebv, 4)
}

// completeness is the share of the targets around a place whose spectra
// succeed: it changes from one strip of 0.4 degrees to the next.
func (f *field) completeness(ra float64) float64 {
	strip := int((ra - f.raLow) / 0.4)
	return round(0.90+float64(0.009*float64(strip*7%11)), 3)
}

// An observer sees a redshift from the moving Sun.
type observer struct {
	n       frame.Vectors
	zsun    [1]float64
	ra, dec [1]float64
	status  [1]int32
}

// sunRedshift returns what the Sun's motion against the microwave background
// adds in a direction: 1+z_hel = (1+z_cmb)(1+z_sun).
func (o *observer) sunRedshift(ra, dec float64) float64 {
	o.ra[0], o.dec[0] = ra, dec
	frame.Directions(&o.n, o.ra[:], o.dec[:], o.status[:])
	frame.SunInCMB.SunRedshift(o.zsun[:], &o.n)
	return o.zsun[0]
}

// velocityDispersion is the width of the peculiar velocities, km/s.
const velocityDispersion = 250

// move gives an object of known z_cos its peculiar velocity and the redshifts
// that follow from it and from the Sun's motion.
func (o *observer) move(t *truth, d *dice) {
	t.velocity = round(velocityDispersion*d.gauss(), 2)
	beta := t.velocity / cosmo.SpeedOfLight
	t.zcmb = t.zcos + float64((1+t.zcos)*beta)
	sun := o.sunRedshift(t.ra, t.dec)
	t.zhel = t.zcmb + float64((1+t.zcmb)*sun)
}

// round returns x to a number of decimals, as the float64 nearest to the
// decimal, which the shortest text gives back: the quotient of a whole number
// and a power of ten is rounded once.
func round(x float64, decimals int) float64 {
	return math.Round(x*tens[decimals])/tens[decimals] + 0 // -0 becomes 0
}

var tens = [...]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12}
