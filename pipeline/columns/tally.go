package columns

import (
	"math"

	"catenrich/internal/table"
	"catenrich/pipeline/ledger"
)

// Names of the statistics that are not a column's own. Those of a pair of
// columns are called by [PairName].
const (
	// RedshiftStatistic is the range, the exact sum and the histogram over 1+z
	// of the cosmological redshifts of all rows that have one.
	RedshiftStatistic = "cosmological_redshift"

	// RedshiftOctaves is the histogram of the same over octaves of z.
	RedshiftOctaves = "cosmological_redshift/octaves"
)

// PairName is what a statistic of one column by another is called: the plane
// absolute_magnitude_r/cosmological_redshift, the relative error
// luminosity_distance_error/luminosity_distance, the luminosity function
// vmax_weight_main/absolute_magnitude_r.
func PairName(of, by string) string { return of + "/" + by }

// A Tally is what is counted of the kernel's columns. Each worker has its own.
type Tally struct {
	*ledger.Tally
	pairs []pair
	spare []float64
}

// pair is a statistic of two output columns, by their places; exactly one of
// the three is not nil.
type pair struct {
	of, by   int
	plane    *ledger.Histogram // of against z_cos
	relative *ledger.Histogram // of the ratio of's to by's size
	density  *ledger.Density   // of weights of over by
}

// NewTally returns empty counts.
func (k *Kernel) NewTally() Tally {
	t := &ledger.Tally{
		Extents: map[string]*ledger.Extent{RedshiftStatistic: new(ledger.Extent)},
		Sums:    map[string]*ledger.Sum{RedshiftStatistic: new(ledger.Sum)},
		Histograms: map[string]*ledger.Histogram{
			RedshiftStatistic: ledger.NewHistogram(ledger.RedshiftAxis()),
			RedshiftOctaves:   ledger.NewHistogram(ledger.RedshiftOctaveAxis()),
		},
		Densities: map[string]*ledger.Density{},
	}
	for i := range k.added {
		name, e := k.added[i].Name, k.stats[i]
		c := ledger.NewColumn(name, false)
		if k.added[i].Kind == table.Float {
			c.Extent = new(ledger.Extent)
		}
		if e.Summed {
			c.Sum = new(ledger.Sum)
		}
		if axis, ok := e.axis(name); ok {
			t.Histograms[name] = ledger.NewHistogram(axis)
		}
		t.Columns = append(t.Columns, c)
	}
	full := Tally{Tally: t}
	full.addPairs(k, k.once)
	for i := range k.models {
		full.addPairs(k, k.models[i].columns)
	}
	return full
}

// addPairs adds the statistics of pairs among the columns of one model, or of
// those that do not depend on it.
func (t *Tally) addPairs(k *Kernel, list []output) {
	place := func(name string, item int) int {
		for _, o := range list {
			if o.entry.Name == name && o.item == item && o.form == ValueForm {
				return o.at
			}
		}
		return -1
	}
	for _, o := range list {
		name := k.added[o.at].Name
		switch {
		case o.form == ErrorForm && (o.entry.Unit == Magnitude || o.entry.Unit == None):
			t.Histograms[name] = ledger.NewHistogram(ledger.ErrorAxis(name))
		case o.form == ErrorForm:
			if value := place(o.entry.Name, o.item); value >= 0 {
				both := PairName(name, k.added[value].Name)
				t.Histograms[both] = ledger.NewHistogram(ledger.ErrorAxis(both))
				t.pairs = append(t.pairs, pair{of: o.at, by: value, relative: t.Histograms[both]})
				t.spare = make([]float64, span)
			}
		case o.form == ValueForm && o.entry.Name == "absolute_magnitude":
			both := PairName(name, RedshiftStatistic)
			t.Histograms[both] = ledger.NewHistogram(ledger.PlaneRedshiftAxis(), ledger.PlaneMagnitudeAxis(name))
			t.pairs = append(t.pairs, pair{of: o.at, plane: t.Histograms[both]})
		case o.form == ValueForm && o.entry.Name == "vmax_weight":
			if m := place("absolute_magnitude", k.job.Selections[o.item].Limits[0].Band); m >= 0 {
				both := PairName(name, k.added[m].Name)
				t.Densities[both] = ledger.NewDensity(ledger.DensityMagnitudeAxis(k.added[m].Name))
				t.pairs = append(t.pairs, pair{of: o.at, by: m, density: t.Densities[both]})
			}
		}
	}
}

// countPairs adds rows lo to hi of a batch to the statistics of pairs.
func (t Tally) countPairs(batch *table.Batch, z []float64, lo, hi int) {
	for i := range t.pairs {
		p := &t.pairs[i]
		of := batch.Out[p.of].Float[lo:hi]
		switch {
		case p.plane != nil:
			p.plane.AddPairs(z, of)
		case p.density != nil:
			p.density.Add(batch.Out[p.by].Float[lo:hi], of)
		default:
			ratio, value := t.spare[:hi-lo], batch.Out[p.by].Float[lo:hi]
			for i := range ratio {
				ratio[i] = of[i] / math.Abs(value[i])
			}
			p.relative.Add(ratio)
		}
	}
}

// axis is what a column's histogram is drawn on, if it has one.
func (e *Entry) axis(name string) (a ledger.Axis, ok bool) {
	switch {
	case e.Unit == Magnitude && e.Scope == PerModel:
		return ledger.MagnitudeAxis(name), true
	case e.Summed && e.Unit == None:
		return ledger.FractionAxis(name), true
	}
	return a, false
}

// count adds rows lo to hi of a batch, which are still in the cache.
func (t Tally) count(batch *table.Batch, r *Rows, lo, hi int) {
	t.AddRows(r.Status)
	t.Extents[RedshiftStatistic].Add(r.ZCos)
	t.Sums[RedshiftStatistic].Add(r.ZCos)
	t.Histograms[RedshiftStatistic].Add(r.ZCos)
	t.Histograms[RedshiftOctaves].Add(r.ZCos)
	for i, c := range t.Columns {
		cells := part(&batch.Out[i], lo, hi)
		c.Add(&cells, r.Status)
		if h := t.Histograms[c.Name]; h != nil {
			h.Add(cells.Float)
		}
	}
	t.countPairs(batch, r.ZCos, lo, hi)
}

// part is rows lo to hi of an output column.
func part(c *table.Column, lo, hi int) table.Column {
	p := table.Column{Kind: c.Kind}
	switch c.Kind {
	case table.Float:
		p.Float = c.Float[lo:hi]
	case table.Flag:
		p.Flag = c.Flag[lo:hi]
	case table.Int:
		p.Int = c.Int[lo:hi]
	}
	return p
}
