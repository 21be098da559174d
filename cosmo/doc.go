// Package cosmo computes distances, times, volumes and horizons in a
// homogeneous, isotropic universe with matter, curvature of either sign,
// radiation, massive neutrinos and dark energy of the equation of state
// w(a) = w0 + wa (1-a).
//
// Start with [New] or a [Preset]. A [Model] is immutable, so any number of
// goroutines may share one. Parameters are checked once, in New; a redshift
// outside the domain gives NaN, never a panic or an error, because a catalogue of
// a billion rows will hold a few bad ones.
//
// There are two paths to every quantity. [Model.Fill] serves batches from
// polynomial cells (cells.go, build.go) that are built once a model; its bits
// are the same on every machine. [Model.Direct] integrates one redshift by
// another library, in another variable, and judges the first.
//
// Quantities are dimensionless, see [Quantity]; scalars such as [Model.Age] are
// in Gyr and Mpc. H0 is in km/s/Mpc. The symbols are those of Hogg 1999,
// arXiv:astro-ph/9905116.
package cosmo
