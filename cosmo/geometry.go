package cosmo

import (
	"math"

	"catenrich/internal/exact"
)

// The geometry of space, in units of the Hubble distance: i is D_C/D_H and
// q = O_k i^2, positive in an open model. Near q = 0 the series are used, whose
// terms are right for any curvature, however small.

// seriesBelow is the |q| up to which the series below are summed; their last
// terms are then under 1e-17.
const seriesBelow = 1.0

// transverse returns D_M/D_H, with the sign of i and, in a closed model,
// negative past the antipode. Source: Hogg 1999, eq. 16.
func (e *expansion) transverse(i float64) float64 {
	q := float64(e.curvature * i * i)
	switch {
	case math.Abs(q) < seriesBelow:
		// sinh(r)/r with r^2 = q
		s := 1.0
		for k := 9.0; k > 0; k-- {
			s = 1 + float64(q*s)/(2*k*(2*k+1))
		}
		return float64(i * s)
	case q > 0:
		r := math.Sqrt(e.curvature)
		return exact.Sinh(r*i) / r
	default:
		r := math.Sqrt(-e.curvature)
		return exact.Sin(r*i) / r
	}
}

// slope returns C_k = dD_M/dD_C.
func (e *expansion) slope(i float64) float64 {
	q := float64(e.curvature * i * i)
	switch {
	case math.Abs(q) < seriesBelow:
		s := 1.0
		for k := 9.0; k > 0; k-- {
			s = 1 + float64(q*s)/(2*k*(2*k-1))
		}
		return s
	case q > 0:
		return exact.Cosh(math.Sqrt(q))
	default:
		return exact.Cos(math.Sqrt(-q))
	}
}

// volumeRatio returns the volume within i, both sides of the sky's, over i^3:
//
//	V/D_H^3 = pi (sinh 2r - 2r)/O_k^(3/2),  r = sqrt(O_k) i
//
// and its continuation to O_k < 0. Source: Hogg 1999, eq. 29, written with the
// angle r so that it holds past the equator of a closed model. Past the antipode
// see wholeVolume.
func (e *expansion) volumeRatio(i float64) float64 {
	q := float64(e.curvature * i * i)
	switch {
	case math.Abs(q) < seriesBelow:
		s := 1.0
		for k := 13.0; k > 1; k-- {
			s = 1 + float64(4*q*s)/(2*k*(2*k+1))
		}
		return float64(4 * math.Pi / 3 * s)
	case q > 0:
		r := math.Sqrt(q)
		return math.Pi * (exact.Sinh(2*r) - float64(2*r)) / (q * r)
	default:
		r := math.Sqrt(-q)
		return math.Pi * (float64(2*r) - exact.Sin(2*r)) / (-q * r)
	}
}

// antipode returns D_C/D_H of the antipode and the volume of all space over
// D_H^3: +Inf both unless the model is closed.
func (e *expansion) antipode() (i, volume float64) {
	if e.curvature >= 0 {
		return math.Inf(1), math.Inf(1)
	}
	r := math.Sqrt(-e.curvature)
	return math.Pi / r, 2 * math.Pi * math.Pi / (r * -e.curvature)
}
