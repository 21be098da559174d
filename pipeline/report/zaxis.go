package report

import (
	"math"

	"catenrich/cosmo"
	"catenrich/internal/exact"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/ledger"
)

// A zAxis is the redshift axis that all charts of a page share: logarithmic,
// over all but a thousandth of the rows at each end.
type zAxis struct {
	low, high float64
	bars      int64 // bins of the histogram in one bar of n(z)
	outside   int64 // rows with a redshift that is not on the axis
	median    float64
	ok        bool // there are positive redshifts
}

// newZAxis looks at the releases' own redshifts.
func newZAxis(h *ledger.Histogram) (a zAxis) {
	if h == nil {
		return a
	}
	axis := h.Axes()[0]
	total, positive := int64(0), int64(0)
	for c := range h.Cells {
		total += c.Count
		if c.Keys[0] >= axis.First && c.Keys[0] < axis.End {
			positive += c.Count
		}
	}
	if positive == 0 {
		return a
	}
	first, last := quantileKey(h, positive, 0.001), quantileKey(h, positive, 0.999)+1
	octave := int64(1) << axis.Bits
	for last-first < octave { // a single redshift still gets an axis
		first, last = first-1, last+1
	}
	a.bars = 1
	for (last-first)/a.bars > 56 {
		a.bars *= 2
	}
	first = floorTo(first, a.bars)
	last = -floorTo(-last, a.bars)
	first, last = max(first, axis.First), min(last, axis.End)
	a.low, a.high, a.ok = axis.Edge(first), axis.Edge(last), true
	a.median = min(middle(&axis, quantileKey(h, positive, 0.5)), cosmo.MaxRedshift)
	a.outside = total
	for c := range h.Cells {
		if c.Keys[0] >= first && c.Keys[0] < last {
			a.outside -= c.Count
		}
	}
	return a
}

func floorTo(k, step int64) int64 {
	m := k % step
	if m < 0 {
		m += step
	}
	return k - m
}

// quantileKey is the key of the bin in which a share of the n numbers within
// the axis is reached.
func quantileKey(h *ledger.Histogram, n int64, part float64) int64 {
	axis := h.Axes()[0]
	want, sum := int64(math.Ceil(part*float64(n))), int64(0)
	last := axis.First
	for c := range h.Cells {
		if c.Keys[0] < axis.First || c.Keys[0] >= axis.End {
			continue
		}
		last = c.Keys[0]
		if sum += c.Count; sum >= want {
			break
		}
	}
	return last
}

// middle is the middle of a bin.
func middle(a *ledger.Axis, key int64) float64 { return (a.Edge(key) + a.Edge(key+1)) / 2 }

// put makes the axis a chart's horizontal one.
func (a *zAxis) put(c *chart) { c.x.low, c.x.high, c.x.log = a.low, a.high, true }

// samples are redshifts along the axis, evenly spaced on it.
func (a *zAxis) samples() []float64 {
	const n = 96
	zs := make([]float64, n+1)
	for i := range zs {
		zs[i] = min(a.low*exact.Pow(a.high/a.low, float64(i)/n), a.high, cosmo.MaxRedshift)
	}
	return zs
}

// lookbackTicks are round lookback times in Gyr at their redshifts, far enough
// from one another for their labels.
func (a *zAxis) lookbackTicks(m *cosmo.Model, x *scale) []tick {
	const apart = 34
	var list []tick
	last := math.Inf(-1)
	for _, gyr := range []float64{0.001, 0.002, 0.005, 0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12, 13, 13.5} {
		z, ok := redshiftAt(m, gyr)
		if !ok || z < a.low || z > a.high {
			continue
		}
		if place := x.at(z); place-last >= apart {
			last = place
			list = append(list, tick{z, number(gyr, 1)})
			if gyr > 10 {
				list[len(list)-1].label = number(gyr, 3)
			}
			if gyr == math.Trunc(gyr) {
				list[len(list)-1].label = fixed(gyr, 0)
			}
		}
	}
	return list
}

// redshiftAt is the redshift whose light left so many Gyr ago, found by
// bisection in ln(1+z)'s order; ok is false beyond the model's range.
func redshiftAt(m *cosmo.Model, gyr float64) (z float64, ok bool) {
	low, high := 0.0, float64(cosmo.MaxRedshift)
	t := gyr / m.HubbleTime()
	if !(m.At(cosmo.Lookback, high) > t) {
		return 0, false
	}
	for range 60 {
		mid := math.Sqrt((1+low)*(1+high)) - 1
		if m.At(cosmo.Lookback, mid) < t {
			low = mid
		} else {
			high = mid
		}
	}
	return low, true
}

// beyond is how many rows have a redshift above z, by the histogram over 1+z:
// a bin that z divides is divided in proportion, and the count is then not
// exact.
func (r *Release) beyond(z float64) (n int64, exactly bool) {
	h := r.histogram(columns.RedshiftStatistic, ledger.RedshiftAxis())
	if h == nil || z != z {
		return 0, z != z
	}
	axis := h.Axes()[0]
	exactly = true
	for c := range h.Cells {
		k := c.Keys[0]
		switch {
		case k >= axis.End || k >= axis.First && axis.Edge(k) >= z:
			n += c.Count
		case k >= axis.First && axis.Edge(k+1) > z:
			low, high := axis.Edge(k), axis.Edge(k+1)
			n += int64(math.Round(float64(c.Count) * (high - z) / (high - low)))
			exactly = false
		}
	}
	return n, exactly
}
