package report

import (
	"math"

	"catenrich/internal/exact"
	"catenrich/pipeline/ledger"
)

// A shift compares n(z) of two releases, from their histograms over octaves of
// z (32 bins each).
//
// Two nights of one survey hold mostly the same rows, so the usual two-sample
// test, made for independent samples, is blind: it allows for a scatter that
// is not there. If one release is the other with rows added or taken away at
// random, the largest distance D between the cumulative distributions follows
// Kolmogorov's law with 1/n_e = |1/n_1 - 1/n_2| (sampling without replacement)
// in place of 1/n_1 + 1/n_2. Both are reported. Binning makes them cautious.
type shift struct {
	Before, Now int64   // rows with a redshift
	D           float64 // largest distance of the cumulative distributions
	Nested      float64 // probability of D or more if rows were only added or removed at random
	Independent float64 // the same if the two were independent samples
	Moved       int64   // rows that must have changed their bin, if rows were only added or only removed
	Old, New    float64 // mean redshifts; NaN where not known
}

// shiftOf is the shift from one release to the next; ok is false where one of
// them has no redshifts or no histogram.
func shiftOf(before, now *Release) (s shift, ok bool) {
	a, b := before.octaves(), now.octaves()
	if a == nil || b == nil || a.Axes()[0] != b.Axes()[0] {
		return s, false
	}
	differ := binsOf(a, b)
	for _, d := range differ {
		s.Before, s.Now = s.Before+d[0], s.Now+d[1]
	}
	if s.Before == 0 || s.Now == 0 {
		return s, false
	}
	n1, n2 := float64(s.Before), float64(s.Now)
	var one, two, more, less int64
	for _, d := range differ {
		one, two = one+d[0], two+d[1]
		s.D = max(s.D, math.Abs(float64(one)/n1-float64(two)/n2))
		more += max(d[1]-d[0], 0)
		less += max(d[0]-d[1], 0)
	}
	s.Moved = min(more, less)
	s.Nested = kolmogorov(s.D, math.Abs(1/n1-1/n2))
	s.Independent = kolmogorov(s.D, 1/n1+1/n2)
	s.Old, s.New = mean(before), mean(now)
	return s, true
}

// binsOf returns the counts of both histograms, bin by bin in ascending order.
func binsOf(a, b *ledger.Histogram) [][2]int64 {
	axis := a.Axes()[0]
	bins := make([][2]int64, axis.End-axis.First+2)
	for c := range a.Cells {
		bins[c.Keys[0]-axis.First+1][0] += c.Count
	}
	for c := range b.Cells {
		bins[c.Keys[0]-axis.First+1][1] += c.Count
	}
	return bins
}

// mean is the mean redshift of a release.
func mean(r *Release) float64 {
	n, sum := r.redshifts()
	if n == 0 || r.Tally.Sums == nil {
		return math.NaN()
	}
	return sum / float64(n)
}

// kolmogorov is the probability that the largest distance of two cumulative
// distributions is d or more by chance, where the variance of their difference
// at the median is v/4: Q(x) = 2 sum (-1)^(k-1) exp(-2 k^2 x^2), x = d/sqrt(v)
// (Kolmogorov 1933; Smirnov 1948, Ann. Math. Stat. 19, 279). It is exact for
// large samples.
func kolmogorov(d, v float64) float64 {
	if d == 0 {
		return 1
	}
	x := d / math.Sqrt(v)
	if !(x > 0.2) { // 1 to 13 digits, where the series is slow
		return 1
	}
	q, sign := 0.0, 2.0
	for k := 1.0; k <= 40; k++ {
		kx := k * x
		term := exact.Exp(-2 * kx * kx)
		q += float64(sign * term)
		if term < 1e-16 {
			break
		}
		sign = -sign
	}
	return min(max(q, 0), 1)
}
