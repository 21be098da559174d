package frame

import (
	"math"

	"catenrich/internal/exact"
	"catenrich/internal/status"
)

// Vectors are unit vectors toward the rows of a batch, ICRS axes: X toward
// right ascension 0, Z toward the north celestial pole.
type Vectors struct{ X, Y, Z []float64 }

// Resize gives the vectors n rows, keeping their memory.
func (u *Vectors) Resize(n int) {
	if cap(u.X) < n {
		u.X, u.Y, u.Z = make([]float64, n), make([]float64, n), make([]float64, n)
	}
	u.X, u.Y, u.Z = u.X[:n], u.Y[:n], u.Z[:n]
}

// Directions fills u with the unit vectors toward right ascension ra and
// declination dec, ICRS, in degrees. A position that is missing or outside
// 0 ≤ ra ≤ 360, -90 ≤ dec ≤ 90 gives NaN and status.Position.
func Directions(u *Vectors, ra, dec []float64, st []int32) {
	u.Resize(len(ra))
	dec, st = dec[:len(ra)], st[:len(ra)]
	for i := range ra {
		a, d := ra[i], dec[i]
		if !(a >= 0 && a <= 360 && d >= -90 && d <= 90) {
			st[i] |= status.Position
			u.X[i], u.Y[i], u.Z[i] = math.NaN(), math.NaN(), math.NaN()
			continue
		}
		sinD, cosD := sinCosDeg(d)
		sinA, cosA := sinCosDeg(a)
		u.X[i] = cosD * cosA
		u.Y[i] = cosD * sinA
		u.Z[i] = sinD
	}
}

// Comoving fills x, y, z with the comoving position D_C n, in the unit of dc.
// It has a meaning in flat models only.
func Comoving(x, y, z, dc []float64, n *Vectors) {
	y, z, dc = y[:len(x)], z[:len(x)], dc[:len(x)]
	for i := range x {
		x[i] = dc[i] * n.X[i]
		y[i] = dc[i] * n.Y[i]
		z[i] = dc[i] * n.Z[i]
	}
}

const degree = math.Pi / 180

// sinDeg and cosDeg take degrees and are exact at multiples of 90, where the
// rounding of π would otherwise show.
func sinDeg(d float64) float64 {
	switch d {
	case 0, 180, 360, -180:
		return 0
	}
	return exact.Sin(d * degree)
}

func cosDeg(d float64) float64 {
	switch d {
	case 90, 270, -90, -270:
		return 0
	}
	return exact.Cos(d * degree)
}

// sinCosDeg is both.
func sinCosDeg(d float64) (sin, cos float64) {
	sin, cos = exact.SinCos(d * degree)
	switch d {
	case 0, 180, 360, -180:
		sin = 0
	case 90, 270, -90, -270:
		cos = 0
	}
	return sin, cos
}
