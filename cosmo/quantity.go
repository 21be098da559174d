package cosmo

import "math"

// A Quantity is one of the numbers that a redshift has in a model, or a set of
// several. All are dimensionless: distances are in units of the Hubble
// distance, times in Hubble times, volumes in cubed Hubble distances.
type Quantity uint16

const (
	// DC is the line-of-sight comoving distance int_0^z dz'/E, negative for
	// z < 0. Hogg 1999, eq. 15.
	DC Quantity = 1 << iota
	// DM is the transverse comoving distance. It has DC's sign for z < 0; for z > 0
	// its absolute value is taken past the antipode of a closed model.
	// Hogg 1999, eq. 16.
	DM
	// Slope is C_k = dD_M/dD_C: cosh, 1 or cos of the angle. It belongs to D_M
	// before the absolute value is taken: past the antipode (DC above
	// [Model.Antipode]) |D_M| changes by -Slope.
	Slope
	// E is H(z)/H0. Hogg 1999, eq. 14.
	E
	// Lookback is the time since the light left, int_0^z dz'/((1+z')E), negative
	// for z < 0. Hogg 1999, eq. 30.
	Lookback
	// Age is the cosmic time when the light left, int_z^inf dz'/((1+z')E), summed
	// from the far end; NaN in a model where it diverges.
	Age
	// Volume is the comoving volume of the whole sky within z, negative for z < 0,
	// all of space past the antipode. Hogg 1999, eq. 29.
	Volume
	// Drift is (1+z) - E = (dz/dt0)/H0. Sandage 1962; Loeb 1998.
	Drift
	// ContactLost is the cosmic age after which no signal sent from here reaches
	// the object; it lies in the past beyond the event horizon. NaN for z <= 0
	// and in a model without event horizon, or where the age diverges.
	// Davis & Lineweaver 2004, section 3.
	ContactLost
)

// A Base holds the quantities of a batch of redshifts, one element a row, in
// the units of [Quantity]. [Model.Fill] sets the slices it is asked for and
// leaves the others as they were. Its memory is kept from batch to batch; a
// Base belongs to one goroutine at a time.
type Base struct {
	Z, X                                                        []float64 // z and 1+z
	DC, DM, Slope, E, Lookback, Age, Volume, Drift, ContactLost []float64

	t     []float64 // distance from the row's cell edge
	cell  []int32   // the row's cell
	slow  []int32   // rows that no table holds
	ownDM []float64 // DM's memory where it does not alias DC
}

// Values are the quantities of one redshift.
type Values struct {
	DC, DM, Slope, E, Lookback, Age, Volume, Drift, ContactLost float64
}

// Antipode returns D_C/D_H of the antipode of a closed model, +Inf otherwise.
func (m *Model) Antipode() float64 {
	i, _ := m.e.antipode()
	return i
}

// noValues is what a redshift outside the domain has.
func noValues() Values {
	n := math.NaN()
	return Values{n, n, n, n, n, n, n, n, n}
}
