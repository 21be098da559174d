package columns

import (
	"catenrich/internal/table"
	"catenrich/pipeline/ledger"
)

// redshiftHistogram is the statistic that n(z) is drawn from.
const redshiftHistogram = "cosmological_redshift"

// NewTally returns the empty counts of the kernel's columns. Each worker has
// its own.
func (k *Kernel) NewTally() *ledger.Tally {
	t := &ledger.Tally{
		Extents:    map[string]*ledger.Extent{redshiftHistogram: new(ledger.Extent)},
		Histograms: map[string]*ledger.Histogram{redshiftHistogram: ledger.NewHistogram(ledger.RedshiftAxis())},
	}
	for i := range k.added {
		c := ledger.NewColumn(k.added[i].Name, false)
		if k.added[i].Kind == table.Float {
			c.Extent = new(ledger.Extent)
		}
		t.Columns = append(t.Columns, c)
	}
	return t
}

// count adds rows lo to hi of a batch, which are still in the cache.
func count(t *ledger.Tally, batch *table.Batch, r *Rows, lo, hi int) {
	t.AddRows(r.Status)
	t.Extents[redshiftHistogram].Add(r.ZCos)
	t.Histograms[redshiftHistogram].Add(r.ZCos)
	for i, c := range t.Columns {
		cells := part(&batch.Out[i], lo, hi)
		c.Add(&cells, r.Status)
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
