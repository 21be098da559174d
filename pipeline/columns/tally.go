package columns

import (
	"catenrich/internal/table"
	"catenrich/pipeline/ledger"
)

// redshiftHistogram is the statistic that n(z) is drawn from.
const redshiftHistogram = "cosmological_redshift"

// A Tally is what is counted of the kernel's columns. Each worker has its own.
type Tally struct{ *ledger.Tally }

// NewTally returns empty counts.
func (k *Kernel) NewTally() Tally {
	t := &ledger.Tally{
		Extents:    map[string]*ledger.Extent{redshiftHistogram: new(ledger.Extent)},
		Histograms: map[string]*ledger.Histogram{redshiftHistogram: ledger.NewHistogram(ledger.RedshiftAxis())},
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
	return Tally{t}
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
	t.Extents[redshiftHistogram].Add(r.ZCos)
	t.Histograms[redshiftHistogram].Add(r.ZCos)
	for i, c := range t.Columns {
		cells := part(&batch.Out[i], lo, hi)
		c.Add(&cells, r.Status)
		if h := t.Histograms[c.Name]; h != nil {
			h.Add(cells.Float)
		}
	}
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
