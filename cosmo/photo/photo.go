// Package photo turns what a catalogue measured in a band into absolute
// magnitudes and luminosities:
//
//	M = m - A - mu - K - e
//
// m is the apparent magnitude ([Photometer]), A the Galactic extinction
// ([Extinction]), mu the distance modulus, K the K-correction and
// e = -Q (z - z0) the luminosity evolution ([Evolution]). [Absolute] puts them
// together.
//
// A K-correction is a [Correction], however it came about: [None], [PowerLaw],
// a [Table], or a [Synthetic] one from a [Spectrum] and a [Bandpass]. The same
// value serves magnitudes, their errors, and the roots of package selection.
//
// Functions work on slices of equal length, one element a row, and allocate
// nothing. NaN marks a cell that cannot be used; where a function knows why its
// result is NaN it sets a bit of internal/status. Settings are checked once,
// when a value is made, and a wrong one is a fault.Config error. Results are
// the same bits on every machine.
package photo

import (
	"math"

	"catenrich/internal/status"
)

// pogson is 2.5/ln 10, the magnitudes in a factor e of flux.
const pogson = 2.5 / math.Ln10

// Given fills dst with a column of the catalogue that a band needs, an
// extinction or a K-correction; where it is missing the row gets status.Input.
func Given(dst, src []float64, st []int32) {
	src, st = src[:len(dst)], st[:len(dst)]
	for i, v := range src {
		if v != v {
			st[i] |= status.Input
		}
		dst[i] = v
	}
}

// Extinction fills a with the extinction r E(B-V), in magnitudes. r is A/E(B-V)
// of the band: the coefficients of Schlafly & Finkbeiner (2011, ApJ 737, 103,
// Table 6) multiply the original E(B-V) of Schlegel, Finkbeiner & Davis (1998),
// with no second factor of 0.86. A row without E(B-V) gets status.Input.
func Extinction(a []float64, r float64, ebv []float64, st []int32) {
	ebv, st = ebv[:len(a)], st[:len(a)]
	for i, v := range ebv {
		if v != v {
			st[i] |= status.Input
		}
		a[i] = r * v
	}
}

// Evolution is a linear luminosity evolution, Q magnitudes a unit redshift
// around z0: e = -Q (z - z0), so Q > 0 is brighter in the past (Lin et al.
// 1999, ApJ 518, 533). The zero value is none.
type Evolution struct{ Q, Z0 float64 }

// At returns e(z), in magnitudes.
func (v Evolution) At(z float64) float64 { return float64(-v.Q * (z - v.Z0)) }

// Fill fills e with e(z) at the cosmological redshifts z.
func (v Evolution) Fill(e, z []float64) {
	z = z[:len(e)]
	for i := range e {
		e[i] = -v.Q * (z[i] - v.Z0)
	}
}

// Terms are what an absolute magnitude is made of, in magnitudes. Apparent and
// Modulus are required; a nil slice of the others is a term that is not applied.
type Terms struct{ Apparent, Extinction, Modulus, K, Evolution []float64 }

// Absolute fills out with M = m - A - mu - K - e. A term that is NaN gives NaN,
// its reason having been set by what filled it.
func (t *Terms) Absolute(out []float64) {
	m, mu := t.Apparent[:len(out)], t.Modulus[:len(out)]
	for i := range out {
		out[i] = m[i] - mu[i]
	}
	subtract(out, t.Extinction)
	subtract(out, t.K)
	subtract(out, t.Evolution)
}

// Offset fills out with mu + K + e, the difference m - A - M.
func (t *Terms) Offset(out []float64) {
	copy(out, t.Modulus[:len(out)])
	add(out, t.K)
	add(out, t.Evolution)
}

func subtract(out, term []float64) {
	if term == nil {
		return
	}
	term = term[:len(out)]
	for i := range out {
		out[i] -= term[i]
	}
}

func add(out, term []float64) {
	if term == nil {
		return
	}
	term = term[:len(out)]
	for i := range out {
		out[i] += term[i]
	}
}
