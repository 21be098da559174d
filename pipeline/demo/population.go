package demo

import (
	"math"
	"sort"

	"catenrich/internal/exact"
)

// The luminosity function of "main" in r: a Schechter function (Schechter
// 1976, ApJ 203, 297) with invented numbers of the usual size, cut off at a
// faint end. Below, flatter slopes than -1 are not provided for: the sampler
// needs a density that rises to the faint end.
const (
	schechterM     = -20.8 // M*, mag
	schechterAlpha = -1.1
	brightest      = -24.5
	faintest       = -13.5

	// FluxLimit is the r magnitude, free of dust and noise, to which "main" is
	// complete.
	FluxLimit = 19.8
)

// Limits of the cosmological redshifts: in "main", and of any object.
const (
	nearLow, nearHigh = 0.005, 0.6
	highest           = 10.7
)

// schechter returns the luminosity function at M, per mag, without phi*:
// 0.4 ln 10 x^(alpha+1) e^-x with x = 10^(0.4 (M* - M)).
func schechter(m float64) float64 {
	x := exact.Exp10(0.4 * (schechterM - m))
	return 0.4 * ln10 * exact.Pow(x, schechterAlpha+1) * exact.Exp(-x)
}

const ln10 = 2.302585092994045684

// A cell of the sampler is a step in M for one template. A galaxy in it can be
// seen, at most, to the volume reach.
type cell struct {
	template int
	bright   float64 // its bright edge in M
	reach    float64
	peak     float64 // schechter at its faint edge, the largest in it
}

const cellWidth = 1.0 / 32 // mag

// A sampler draws the galaxies of a flux-limited field: template, M and z_cos
// with probability share x schechter(M) x dV/dz, wherever the galaxy may be
// bright enough. Whoever takes them must turn away those that are not.
type sampler struct {
	*universe
	nearest float64 // volume within nearLow
	cells   []cell
	sums    []float64 // of the weights of the cells up to each
}

// margin is added to the flux limit of the cells: peculiar velocities and the
// Sun's motion may make a galaxy brighter than its z_cos says.
const margin = 0.05 // mag

func newSampler(u *universe) *sampler {
	s := &sampler{universe: u, nearest: u.volume(nearLow)}
	total := 0.0
	for t := range templates {
		if templates[t].inMain == 0 {
			continue
		}
		for m := brightest; m < faintest; m += cellWidth {
			c := cell{template: t, bright: m, reach: s.reach(t, m, FluxLimit+margin), peak: schechter(m + cellWidth)}
			if c.reach <= s.nearest {
				break
			}
			total += float64(templates[t].inMain * c.peak * (c.reach - s.nearest))
			s.cells, s.sums = append(s.cells, c), append(s.sums, total)
		}
	}
	return s
}

// rest returns the apparent magnitude of a galaxy at rest in r, without dust.
func (u *universe) rest(t int, m, z float64) float64 {
	return m + u.modulus(z, z, z) + templates[t].powerLawK(z) + evolution(z)
}

// reach returns the volume within which a galaxy at rest is brighter than limit.
func (s *sampler) reach(t int, m, limit float64) float64 {
	low, high := nearLow, nearHigh
	if s.rest(t, m, high) < limit {
		return s.volume(high)
	}
	for range 40 {
		if middle := 0.5 * (low + high); s.rest(t, m, middle) < limit {
			low = middle
		} else {
			high = middle
		}
	}
	return s.volume(high)
}

// draw returns a candidate.
func (s *sampler) draw(d *dice) (t int, m, z float64) {
	total := s.sums[len(s.sums)-1]
	for {
		c := &s.cells[sort.SearchFloat64s(s.sums, float64(total*d.uniform()))]
		m = c.bright + float64(cellWidth*d.uniform())
		if d.uniform()*c.peak <= schechter(m) {
			v := s.nearest + float64((c.reach-s.nearest)*d.uniform())
			return c.template, m, s.redshiftOfVolume(v)
		}
	}
}

// density returns how many galaxies with phi* = 1 per Mpc^3 "main" would have:
// what the count is to be divided by to get phi*.
func (s *sampler) density() float64 {
	sum := 0.0
	for t := range templates {
		for m := brightest + cellWidth/2; m < faintest && templates[t].inMain > 0; m += cellWidth {
			if v := s.reach(t, m, FluxLimit) - s.nearest; v > 0 {
				sum += float64(templates[t].inMain * schechter(m) * v * cellWidth)
			}
		}
	}
	h := s.model.HubbleDistance()
	return sum * mainField.area() / wholeSky * (4.0 / 3 * math.Pi) * h * h * h
}

// deepRedshift draws from n(z) ~ z^2 exp(-(z/0.8)^1.5) between 0.2 and 6: with
// u = (z/0.8)^1.5 this is u exp(-u) du, the sum of two exponential deviates.
func deepRedshift(d *dice) float64 {
	for {
		u := -exact.Log(d.uniform() * d.uniform())
		if z := 0.8 * exact.Pow(u, 2.0/3); z > 0.2 && z < 6 {
			return z
		}
	}
}

// deepMagnitude draws from counts that grow as 10^(0.35 m) between 20.5 and 24.5.
func deepMagnitude(d *dice) float64 {
	growth := exact.Exp10(0.35*4) - 1
	return 20.5 + exact.Log10(1+float64(growth*d.uniform()))/0.35
}
