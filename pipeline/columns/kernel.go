package columns

import (
	"math"

	"catenrich/cosmo"
	"catenrich/internal/status"
	"catenrich/internal/table"
	"catenrich/pipeline/job"
)

// span is how many rows the kernel works on at a time: the base of so many
// rows stays in the second-level cache while every column reads it.
const span = 2048

// A Base is what the columns of a span of rows share under one model: the
// model's dimensionless quantities (those that some column Uses), and the rows.
type Base struct {
	cosmo.Base
	Rows   *Rows
	Scales *Scales

	angularBuf, luminosityBuf   []float64
	angularDone, luminosityDone bool
}

// Rows are the redshifts of a span of rows, whatever the model. A row that
// cannot have one holds NaN.
type Rows struct {
	ZCos   []float64 // cosmological redshift
	ZModel []float64 // the same, NaN where columns of the model are null
	ZObs   []float64 // redshift as observed at the Sun
	XObs   []float64 // 1+ZObs
	Status []int32   // bits of the row so far

	// ToAngular is (1+z_frame)/[(1+z_cos)(1+z_obs)], which turns the transverse
	// comoving distance into the angular diameter distance; nil where all
	// redshifts are the same and it is 1/(1+z).
	ToAngular []float64
}

// angular returns the angular diameter distance in Hubble distances:
// D_M(z_cos) (1+z_frame)/[(1+z_cos)(1+z_obs)] (Davis et al. 2011).
func (b *Base) angular() []float64 {
	if !b.angularDone {
		b.angularDone = true
		b.angularBuf = b.angularBuf[:len(b.Rows.ZModel)]
		dm := b.DM[:len(b.angularBuf)]
		if factor := b.Rows.ToAngular; factor != nil {
			for i := range b.angularBuf {
				b.angularBuf[i] = dm[i] * factor[i]
			}
		} else {
			divide(b.angularBuf, dm, b.X, 1)
		}
	}
	return b.angularBuf
}

// luminosity returns the luminosity distance in Hubble distances,
// (1+z_obs)^2 D_A, which is (1+z) D_M where all redshifts are the same.
func (b *Base) luminosity() []float64 {
	if !b.luminosityDone {
		b.luminosityDone = true
		b.luminosityBuf = b.luminosityBuf[:len(b.Rows.ZModel)]
		if b.Rows.ToAngular != nil {
			da, x := b.angular(), b.Rows.XObs[:len(b.luminosityBuf)]
			for i := range b.luminosityBuf {
				b.luminosityBuf[i] = x[i] * x[i] * da[i]
			}
		} else {
			dm, x := b.DM[:len(b.luminosityBuf)], b.X[:len(b.luminosityBuf)]
			for i := range b.luminosityBuf {
				b.luminosityBuf[i] = x[i] * dm[i]
			}
		}
	}
	return b.luminosityBuf
}

// A Kernel computes the columns of one job. It is immutable, and any number
// of goroutines may use it at once.
type Kernel struct {
	settings *job.Settings
	models   []model
	once     []output // columns that do not depend on the model
	added    []table.Field
	needs    []Need
	place    func(string) string
}

// model is one cosmology and the columns it gives.
type model struct {
	*cosmo.Model
	uses    cosmo.Quantity
	scales  Scales
	columns []output
}

// output is one added column: its entry and its place in Batch.Out.
type output struct {
	entry *Entry
	at    int
}

// New makes the kernel of a job. The tables of its models are built here.
func New(j *job.Job) *Kernel {
	k := &Kernel{settings: &j.Settings, needs: needs(&j.Settings), place: j.Place}
	wanted := make(map[string]bool)
	for _, name := range j.Settings.Added {
		wanted[name] = true
	}
	for i, m := range j.Models {
		c := model{Model: m, scales: scales(m, j.Settings.LengthUnit)}
		suffix := j.Settings.Cosmologies[i].Suffix
		for e := range registry {
			entry := &registry[e]
			switch {
			case !wanted[entry.Name]:
			case entry.Scope == PerModel:
				c.uses |= entry.Uses
				c.columns = append(c.columns, k.add(entry, suffix))
			case i == 0:
				k.once = append(k.once, k.add(entry, ""))
			}
		}
		c.Prepare(c.uses)
		k.models = append(k.models, c)
	}
	k.add(&statusEntry, "")
	return k
}

// add appends the field of a column.
func (k *Kernel) add(e *Entry, suffix string) output {
	field := table.Field{
		Name: k.settings.Prefix + e.Name + suffix, Kind: e.Kind(), Unit: e.Unit.VOUnit(k.settings.LengthUnit), UCD: e.UCD,
		Description: e.Doc, Source: e.From,
	}
	if note := e.Unit.Note(k.settings.LengthUnit); note != "" {
		field.Description += "; " + note
	}
	if e == &statusEntry {
		field.Kind = table.Int
	}
	k.added = append(k.added, field)
	return output{e, len(k.added) - 1}
}

// Added returns the added columns in output order, the status column last.
func (k *Kernel) Added() []table.Field { return k.added }

// A Scratch is the working memory of one worker.
type Scratch struct {
	rows Rows
	base Base
	out  []float64
}

// NewScratch returns the working memory for one worker.
func NewScratch() *Scratch {
	s := new(Scratch)
	s.rows.ZCos, s.rows.ZModel = make([]float64, span), make([]float64, span)
	s.rows.ZObs, s.rows.XObs = make([]float64, span), make([]float64, span)
	s.base.angularBuf, s.base.luminosityBuf = make([]float64, span), make([]float64, span)
	s.base.Rows = &s.rows
	return s
}

// compute fills the output columns for rows lo to hi of the batch, whose
// redshifts are in s.rows.
func (k *Kernel) compute(b *table.Batch, s *Scratch, lo, hi int) {
	for _, o := range k.once {
		k.column(o, &s.base, b, lo, hi)
	}
	for i := range k.models {
		m := &k.models[i]
		m.Fill(&s.base.Base, m.uses, s.rows.ZModel)
		s.base.Scales, s.base.angularDone, s.base.luminosityDone = &m.scales, false, false
		for _, o := range m.columns {
			k.column(o, &s.base, b, lo, hi)
		}
	}
}

// column computes one column and makes sure that each of its null cells has a
// bit of the row's status that says why.
func (k *Kernel) column(o output, base *Base, b *table.Batch, lo, hi int) {
	rows := base.Rows
	if o.entry.Test != nil {
		out := b.Out[o.at].Flag[lo:hi]
		o.entry.Test(base, out)
		for i, v := range out {
			if v == table.Null {
				rows.blame(o.entry, i)
			}
		}
		return
	}
	out := b.Out[o.at].Float[lo:hi]
	o.entry.Eval(base, out)
	for i, v := range out {
		if !(math.Abs(v) <= math.MaxFloat64) {
			out[i] = math.NaN()
			rows.blame(o.entry, i)
		}
	}
}

// blame gives the reason for a null cell. Where the row's own bits explain it
// nothing is added: a bad redshift, or a redshift that is not positive. What
// is left is a quantity that the model does not have: a divergent age, an
// event horizon, a time after the universe's end.
func (r *Rows) blame(e *Entry, i int) {
	const explains = status.Row &^ status.NotPositive
	switch {
	case r.Status[i]&explains != 0:
	case r.Status[i]&status.NotPositive != 0 && (e.Scope == Once || r.ZModel[i] != r.ZModel[i] || r.ZModel[i] <= 0 && e.zeroNull()):
	default:
		r.Status[i] |= status.NoSuch
	}
}

// zeroNull reports whether the column has no meaning at z <= 0 in any model:
// the modulus (no distance) and the age at which contact is lost.
func (e *Entry) zeroNull() bool {
	return e.Unit == Magnitude || e.Uses&cosmo.ContactLost != 0
}
