package frame

import (
	"math"

	"catenrich/internal/status"
)

// A Convention says how a catalogue turned a wavelength into a velocity.
type Convention uint8

// With β = v/c and c exact:
//
//	Optical       z = β
//	Radio         1+z = 1/(1-β)
//	Relativistic  1+z = √((1+β)/(1-β)), for motion along the line of sight
//
// (Greisen et al. 2006, A&A 446, 747, Table 1 has all three.)
const (
	Optical Convention = iota
	Radio
	Relativistic
)

var conventionNames = [...]string{"optical", "radio", "relativistic"}

func (c Convention) String() string { return conventionNames[c] }

// ParseConvention returns the convention called name; ok is false for an
// unknown one.
func ParseConvention(name string) (c Convention, ok bool) {
	for i, s := range conventionNames {
		if s == name {
			return Convention(i), true
		}
	}
	return Optical, false
}

// Redshifts fills z from velocities v in km/s. A velocity for which 1+z would
// not be positive and finite (optical v ≤ -c, radio v ≥ c, relativistic
// |v| ≥ c) gives NaN and status.Redshift; NaN stays NaN. z may be v.
func Redshifts(z, v []float64, c Convention, st []int32) {
	v, st = v[:len(z)], st[:len(z)]
	for i := range z {
		b := v[i] / speedOfLight
		if b != b {
			z[i] = b
			continue
		}
		if !c.allows(b) {
			st[i] |= status.Redshift
			z[i] = math.NaN()
			continue
		}
		switch c {
		case Optical:
			z[i] = b
		case Radio:
			z[i] = b / (1 - b)
		case Relativistic:
			z[i] = relativistic(b)
		}
	}
}

// relativistic returns √((1+β)/(1-β)) - 1, without a subtraction from 1 where
// the result is small.
func relativistic(b float64) float64 {
	if b < -0.5 || b > 0.5 {
		return math.Sqrt((1+b)/(1-b)) - 1
	}
	root := math.Sqrt((1 - b) * (1 + b))
	return b * (1 + b/(1+root)) / root
}

// allows reports whether 1+z is positive and finite at v = β c.
func (c Convention) allows(b float64) bool {
	switch c {
	case Optical:
		return b > -1 && b <= math.MaxFloat64
	case Radio:
		return b < 1 && b >= -math.MaxFloat64
	}
	return b > -1 && b < 1
}

// RedshiftErrors fills sz with the error of a redshift that came from a
// velocity with error sv, both in km/s: σ_z = |dz/dv| σ_v. sz may be sv.
func RedshiftErrors(sz, sv, v []float64, c Convention) {
	sv, v = sv[:len(sz)], v[:len(sz)]
	for i := range sz {
		sz[i] = sv[i] * c.slope(v[i]/speedOfLight) / speedOfLight
	}
}

// slope is dz/dβ: 1, 1/(1-β)², or 1/((1-β)√(1-β²)).
func (c Convention) slope(b float64) float64 {
	switch c {
	case Optical:
		return 1
	case Radio:
		return 1 / ((1 - b) * (1 - b))
	}
	return 1 / ((1 - b) * math.Sqrt((1-b)*(1+b)))
}

// Valid marks rows whose redshift cannot be used at all: 1+z not positive
// (status.Redshift), infinite (status.NotNumber), outside [lo, hi]
// (status.Range). Such a z becomes NaN. A NaN stays as it is, its reason
// being known where it was read.
func Valid(z []float64, lo, hi float64, st []int32) {
	st = st[:len(z)]
	for i, v := range z {
		if v > -1 && v >= lo && v <= hi && v <= math.MaxFloat64 {
			continue
		}
		switch {
		case v != v:
			continue
		case v > math.MaxFloat64 || v < -math.MaxFloat64:
			st[i] |= status.NotNumber
		case v <= -1:
			st[i] |= status.Redshift
		default:
			st[i] |= status.Range
		}
		z[i] = math.NaN()
	}
}
