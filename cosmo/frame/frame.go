// Package frame turns what a catalogue holds, a velocity or a redshift in some
// rest frame, into the redshifts that cosmology needs.
//
// Start at [Route], which goes from the catalogue's frame to the one that
// distances are wanted in; [Redshifts] is the step before it, for velocities,
// and [Peculiar] the step after it. [Directions] makes unit vectors of
// positions, [Sexagesimal] reads them from text.
//
// Every function works on slices of equal length, one element a row, and
// allocates nothing. NaN marks a cell that cannot be used; where a function
// knows why its result is NaN it sets a bit of internal/status. Results are the
// same bits on every machine.
package frame

import (
	"math"

	"catenrich/internal/fault"
	"catenrich/internal/status"
)

// speedOfLight in km/s, exact (SI definition of the metre).
const speedOfLight = 299792.458

// A Frame is the rest frame of an observed redshift.
type Frame uint8

// AsGiven is a redshift that nobody converts. Heliocentric and barycentric
// are the same to a catalogue (they differ by up to 13 m/s).
const (
	AsGiven Frame = iota
	Heliocentric
	CMB
	LocalGroup
)

var frameNames = [...]string{"as-given", "heliocentric", "cmb", "local-group"}

func (f Frame) String() string { return frameNames[f] }

// ParseFrame returns the frame called name; ok is false for an unknown one.
func ParseFrame(name string) (f Frame, ok bool) {
	if name == "barycentric" {
		return Heliocentric, true
	}
	for i, s := range frameNames {
		if s == name {
			return Frame(i), true
		}
	}
	return AsGiven, false
}

// A Motion is the velocity of the Sun in a frame.
type Motion struct {
	gamma1 float64    // γ - 1, formed without a subtraction from γ
	gb     [3]float64 // γβ times the apex's unit vector, ICRS axes
}

// Motions of the Sun.
//
// The CMB dipole: 369.82 km/s toward (l, b) = (264.021°, 48.253°), Planck 2018
// results I, arXiv:1807.06205, Table 3. The Local Group: 316 km/s toward
// (93°, -4°), Karachentsev & Makarov 1996, AJ 111, 794; the paper adds this
// to cz, here it composes as redshifts do.
var (
	SunInCMB        = newMotion(369.82, 264.021, 48.253)
	SunInLocalGroup = newMotion(316, 93, -4)
)

// newMotion returns the motion at speed km/s toward galactic l, b in degrees.
func newMotion(speed, l, b float64) *Motion {
	beta := speed / speedOfLight
	g := 1 / math.Sqrt((1-beta)*(1+beta))
	n := Galactic(l, b)
	m := &Motion{gamma1: g * g * beta * beta / (g + 1)}
	for i := range n {
		m.gb[i] = g * beta * n[i]
	}
	return m
}

// Apex returns the unit vector that the Sun moves toward, ICRS axes.
func (m *Motion) Apex() (x, y, z float64) {
	n := math.Sqrt(float64(m.gb[0]*m.gb[0]) + float64(m.gb[1]*m.gb[1]) + float64(m.gb[2]*m.gb[2]))
	return m.gb[0] / n, m.gb[1] / n, m.gb[2] / n
}

// SunRedshift fills zsun with the redshift that the Sun's own motion gives a
// source in direction n:
//
//	1 + z_sun = γ (1 - β·n)
//
// It is formed as (γ-1) - γβ·n, so nothing is lost against 1. n need not be
// computed again for another motion.
func (m *Motion) SunRedshift(zsun []float64, n *Vectors) {
	gx, gy, gz := m.gb[0], m.gb[1], m.gb[2]
	nx, ny, nz := n.X[:len(zsun)], n.Y[:len(zsun)], n.Z[:len(zsun)]
	for i := range zsun {
		dot := float64(gx*nx[i]) + float64(gy*ny[i]) + float64(gz*nz[i])
		zsun[i] = m.gamma1 - dot
	}
}

// FromHeliocentric fills z with (z_hel - z_sun)/(1 + z_sun), the redshift in
// the frame of the motion behind zsun. z may be zhel.
func FromHeliocentric(z, zhel, zsun []float64) {
	zhel, zsun = zhel[:len(z)], zsun[:len(z)]
	for i := range z {
		z[i] = (zhel[i] - zsun[i]) / (1 + zsun[i])
	}
}

// ToHeliocentric is the inverse of [FromHeliocentric]:
// z_hel = z (1 + z_sun) + z_sun. zhel may be z.
func ToHeliocentric(zhel, z, zsun []float64) {
	z, zsun = z[:len(zhel)], zsun[:len(zhel)]
	for i := range zhel {
		zhel[i] = float64(z[i]*(1+zsun[i])) + zsun[i]
	}
}

// A Route leads from the frame of a catalogue to the frame of its distances.
type Route struct{ from, to *Motion }

// NewRoute returns the route from a catalogue's frame to that of distances.
// to is AsGiven, CMB or LocalGroup; AsGiven leaves the redshift as it is.
// positions says whether the catalogue has them. A route that cannot be taken
// is a fault.Config error, in terms of the job's keys.
func NewRoute(from, to Frame, positions bool) (*Route, error) {
	r := &Route{from: motionOf(from), to: motionOf(to)}
	switch {
	case to == Heliocentric:
		return nil, fault.Config.Errorf("redshift.distances_in is %q: distances are computed as-given, or in the cmb or local-group frame", to)
	case to == AsGiven || to == from:
		r.to = r.from
	case from == AsGiven:
		return nil, fault.Config.Errorf("redshift.distances_in is %q but redshift.frame is %q: say which frame the catalogue's redshifts are in", to, from)
	case !positions:
		return nil, fault.Config.Errorf("redshift.distances_in is %q and redshift.frame is %q, which takes positions: name columns.right_ascension and columns.declination", to, from)
	}
	if !positions {
		r.from, r.to = nil, nil // nothing to convert, and no heliocentric value to recover
	}
	return r, nil
}

func motionOf(f Frame) *Motion {
	switch f {
	case CMB:
		return SunInCMB
	case LocalGroup:
		return SunInLocalGroup
	}
	return nil
}

// Positions reports whether the route looks at directions at all.
func (r *Route) Positions() bool { return r.from != nil || r.to != nil }

// Apply fills zframe, the redshift that distances are computed from before any
// peculiar velocity, and zobs, the redshift as measured at the Sun, from the
// catalogue's zin. A row without a direction gets NaN where the direction is
// needed, never the unconverted value; [Directions] has set its status bit.
// scratch is as long as the others. n may be nil if the route has no Positions.
//
// Where from and to are the same frame zframe is zin, bit for bit, and so is
// zobs where the catalogue is heliocentric. At fixed position
//
//	(1+z_frame) ∝ (1+z_obs) ∝ (1+z_in)
//
// so a derivative by ln(1+z_in) is one by the logarithm of each of them.
func (r *Route) Apply(zframe, zobs, zin, scratch []float64, n *Vectors) {
	copy(zobs, zin)
	copy(zframe, zin)
	if r.from != nil {
		r.from.SunRedshift(scratch, n)
		ToHeliocentric(zobs, zin, scratch)
	}
	if r.to != r.from {
		if r.to == nil {
			copy(zframe, zobs)
			return
		}
		r.to.SunRedshift(scratch, n)
		FromHeliocentric(zframe, zobs, scratch)
	}
}

// Peculiar fills zcos with the redshift of the expansion alone:
//
//	1 + z_cos = (1 + z_frame)/(1 + v_p/c)
//
// v is the peculiar velocity in km/s, positive away from us, in the CMB frame
// (first-order form). A row without v gets NaN and status.Input; v ≤ -c has no
// meaning and gets status.Redshift. zcos may be zframe.
func Peculiar(zcos, zframe, v []float64, st []int32) {
	zframe, v, st = zframe[:len(zcos)], v[:len(zcos)], st[:len(zcos)]
	for i := range zcos {
		b := v[i] / speedOfLight
		switch {
		case b != b:
			st[i] |= status.Input
		case b <= -1:
			st[i] |= status.Redshift
			b = math.NaN()
		}
		zcos[i] = (zframe[i] - b) / (1 + b)
	}
}

// Galactic returns the ICRS unit vector toward galactic longitude l and
// latitude b, in degrees. The pole of the Galaxy is at (192.85948°, 27.12825°),
// the north celestial pole at galactic longitude 122.93192° (The Hipparcos and
// Tycho Catalogues, ESA SP-1200, 1997, vol. 1, section 1.5.3).
func Galactic(l, b float64) [3]float64 {
	const poleRA, poleDec, lNCP = 192.85948, 27.12825, 122.93192
	sinP, cosP := sinDeg(poleDec), cosDeg(poleDec)
	sinB, cosB := sinDeg(b), cosDeg(b)
	sinL, cosL := sinDeg(lNCP-l), cosDeg(lNCP-l)
	z := float64(sinP*sinB) + float64(cosP*cosB*cosL)
	u := float64(cosP*sinB) - float64(sinP*cosB*cosL) // toward the pole's meridian
	w := cosB * sinL                                  // eastward of it
	sinA, cosA := sinDeg(poleRA), cosDeg(poleRA)
	return [3]float64{float64(u*cosA) - float64(w*sinA), float64(u*sinA) + float64(w*cosA), z}
}
