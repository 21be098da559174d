package columns

import (
	"math"
	"strings"

	"catenrich/cosmo"
	"catenrich/cosmo/spread"
	"catenrich/internal/status"
	"catenrich/internal/table"
	"catenrich/pipeline/job"
)

// span is how many rows the kernel works on at a time: the base of so many
// rows stays in the second-level cache while every column reads it.
const span = 2048

// A Kernel computes the columns of one job. It is immutable, and any number
// of goroutines may use it at once.
type Kernel struct {
	job    *job.Job
	models []model
	once   []output // columns that do not depend on the model
	added  []table.Field
	needs  []Need

	terms     Term   // of all columns
	bandTerms []Term // of each band
	selected  []bool // whether any column of each selection is there
	cutBands  []int  // index of each cut's band
	stats     []*Entry
	outputs   []output // by their place in Batch.Out
	direct    bool     // made by NewDirect
}

// model is one cosmology and the columns it gives.
type model struct {
	Model
	cells     *cosmo.Model // the model as the job has it
	uses      cosmo.Quantity
	scales    Scales
	columns   []output
	surveyors []surveyor
	h0        float64
	antipode  float64              // D_C/D_H
	rimUses   cosmo.Quantity       // of columns with intervals
	turns     map[int]spread.Turns // of these columns, by their place in Batch.Out
}

// output is one added column: its entry, the member of its family, and its
// place in Batch.Out.
type output struct {
	entry *Entry
	item  int
	form  Form
	at    int
}

// New makes the kernel of a job. The tables of its models are built here.
func New(j *job.Job) *Kernel {
	return newKernel(j, func(m *cosmo.Model) Model { return m }, false)
}

// newKernel makes a kernel whose models are seen through a path to them.
func newKernel(j *job.Job, path func(*cosmo.Model) Model, direct bool) *Kernel {
	k := &Kernel{job: j, direct: direct, bandTerms: make([]Term, len(j.Bands)), selected: make([]bool, len(j.Selections))}
	for i := range j.Settings.Cuts {
		k.cutBands = append(k.cutBands, j.Band(j.Settings.Cuts[i].Band))
	}
	wanted := k.wanted()
	for i, cells := range j.Models {
		m := path(cells)
		c := model{Model: m, cells: cells, scales: scales(m, j.Settings.LengthUnit), h0: m.Params().H0, antipode: m.Antipode(), turns: make(map[int]spread.Turns)}
		for _, in := range wanted {
			switch {
			case in.Scope == PerModel:
				c.use(in)
				c.columns = append(c.columns, k.add(in, j.Settings.Cosmologies[i].Suffix))
			case i == 0:
				k.once = append(k.once, k.add(in, ""))
			}
		}
		for s := range j.Selections {
			if k.selected[s] {
				c.uses |= cosmo.Volume
			}
		}
		if direct {
			c.uses |= sizeUses
		}
		c.Prepare(c.uses)
		for s := range j.Selections {
			if k.selected[s] {
				c.surveyors = append(c.surveyors, newSurveyor(&j.Selections[s], m, j.Bands))
			} else {
				c.surveyors = append(c.surveyors, surveyor{})
			}
		}
		for _, o := range c.columns {
			if o.form == LowForm || o.form == HighForm {
				c.turns[o.at] = k.findTurns(&c, o)
			}
		}
		k.models = append(k.models, c)
	}
	k.add(instance{Entry: &statusEntry, name: StatusName}, "")
	k.needs = k.listNeeds()
	return k
}

// use notes which quantities a column reads.
func (m *model) use(in instance) {
	m.uses |= in.Uses
	switch in.form {
	case ErrorForm:
		m.uses |= in.Spread.Uses
	case LowForm, HighForm:
		m.rimUses |= in.Uses
	}
}

// wanted lists the job's columns, and notes what they read.
func (k *Kernel) wanted() []instance {
	named := make(map[string]bool)
	for _, name := range k.job.Settings.Added {
		named[name] = true
	}
	var list []instance
	for _, in := range instances(&k.job.Settings) {
		if !named[in.name] {
			continue
		}
		list = append(list, in)
		terms := in.Terms
		switch in.form {
		case ErrorForm:
			terms |= errorTerm
		case LowForm, HighForm:
			terms |= quantileTerm
		}
		k.terms |= terms
		switch in.Family {
		case PerBand:
			k.bandTerms[in.item] |= terms
		case PerCut:
			k.bandTerms[k.cutBands[in.item]] |= in.Terms
		case PerSelection:
			k.selected[in.item] = true
			k.selectionTerms(&k.job.Selections[in.item])
		}
	}
	return list
}

// selectionTerms notes what a selection reads of its bands.
func (k *Kernel) selectionTerms(p *job.SelectionPlan) {
	for i := range p.Limits {
		terms := apparentTerm | evolutionTerm
		if p.SelectionSettings.Limits[i].K == nil {
			terms |= kTerm
		}
		if p.Corrected {
			terms |= extinctionTerm
		}
		k.bandTerms[p.Limits[i].Band] |= terms
	}
}

// add appends the field of a column.
func (k *Kernel) add(in instance, suffix string) output {
	e, s := in.Entry, &k.job.Settings
	field := table.Field{
		Name: s.Prefix + in.name + suffix, Kind: e.Kind(), Unit: e.Unit.VOUnit(s.LengthUnit), UCD: e.UCD,
		Description: in.form.describe(e.Doc), Source: e.From,
	}
	if in.form != ValueForm {
		field.Kind = table.Float
		// Of the words that must stand first, a UCD has room for one.
		field.UCD = "stat.error;" + strings.TrimPrefix(field.UCD, "arith.rate;")
	}
	if note := e.Unit.Note(s.LengthUnit); note != "" {
		field.Description += "; " + note
	}
	if e == &statusEntry {
		field.Kind = table.Int
	}
	k.added = append(k.added, field)
	k.stats = append(k.stats, e)
	k.outputs = append(k.outputs, output{e, in.item, in.form, len(k.added) - 1})
	return k.outputs[len(k.outputs)-1]
}

// Added returns the added columns in output order, the status column last.
func (k *Kernel) Added() []table.Field { return k.added }

// A Scratch is the working memory of one worker.
type Scratch struct {
	bound *Bound // whose rows it was made for
	rows  Rows
	base  Base

	low, high  *rim         // of intervals; nil where the job has none
	ends       [5][]float64 // of the interval at hand
	intervalOf place        // whose that is
	sizes      [][]float64  // of each column, as Judge returns them; nil while running
}

// Run computes every added column of a decoded batch, and counts it.
func (b *Bound) Run(batch *table.Batch, s *Scratch, tally Tally) {
	b.run(batch, s, &tally)
}

// run is Run; it counts nothing where tally is nil.
func (b *Bound) run(batch *table.Batch, s *Scratch, tally *Tally) {
	s.fit(b)
	for i, sentinels := range b.sentinels {
		dropSentinels(&batch.In[i], sentinels)
	}
	bits := batch.Out[len(b.added)-1].Int
	clear(bits)
	for lo := 0; lo < batch.Rows; lo += span {
		hi := min(lo+span, batch.Rows)
		s.rows.Status = bits[lo:hi]
		b.redshift.fill(batch, &s.rows, lo, hi)
		s.rows.fillTerms(batch, lo, hi)
		if b.terms&errorTerm != 0 {
			s.rows.fillSigmas(b.redshift, batch, lo, hi)
		}
		if s.low != nil {
			s.fillRims(b.redshift, batch, lo, hi)
		}
		b.compute(batch, s, lo, hi)
		if tally != nil {
			tally.count(batch, &s.rows, lo, hi)
		}
	}
}

// fit gives the scratch the memory that a bound kernel needs.
func (s *Scratch) fit(b *Bound) {
	if s.bound == b {
		return
	}
	*s = Scratch{bound: b}
	s.rows.buffers.allocate()
	j := b.job
	for i := range j.Bands {
		s.rows.bands = append(s.rows.bands, newBandRows(&j.Bands[i], b.where, b.bandTerms[i]))
	}
	values := func(kind string, term Term, names []string) (rows []valueRows) {
		for _, name := range names {
			v := valueRows{at: b.where(job.OtherRole(kind, name, job.PartValue)), sigmaAt: -1, used: b.terms&term != 0}
			if v.used && b.terms&errorTerm != 0 {
				v.sigmaAt = b.where(job.OtherRole(kind, name, job.PartError))
			}
			rows = append(rows, v)
		}
		return rows
	}
	s.rows.lines = values("line", lineTerm, PerLine.members(&j.Settings))
	s.rows.radios = values("radio", radioTerm, PerRadio.members(&j.Settings))
	s.rows.sizes = values("size", sizeTerm, PerSize.members(&j.Settings))
	for i := range j.Selections {
		s.rows.selections = append(s.rows.selections, newSelectionRows(&j.Selections[i], j.Bands, b.where, b.selected[i]))
	}
	s.base = newBase(&s.rows, b.Kernel)
	if b.terms&quantileTerm != 0 {
		s.low, s.high = newRim(b), newRim(b)
		for i := range s.ends {
			s.ends[i] = make([]float64, span)
		}
	}
}

// fillTerms computes what columns read besides redshifts.
func (r *Rows) fillTerms(batch *table.Batch, lo, hi int) {
	for i := range r.bands {
		r.bands[i].fill(batch, r, lo, hi)
	}
	for _, list := range [][]valueRows{r.lines, r.radios, r.sizes} {
		for i := range list {
			list[i].fill(batch, r, lo, hi)
		}
	}
	for i := range r.selections {
		r.selections[i].fill(batch, lo, hi)
	}
}

// compute fills the output columns for rows lo to hi of the batch.
func (k *Kernel) compute(b *table.Batch, s *Scratch, lo, hi int) {
	for _, o := range k.once {
		k.column(o, s, nil, b, lo, hi)
	}
	for i := range k.models {
		m := &k.models[i]
		m.Fill(&s.base.Base, m.uses, s.rows.ZModel)
		s.base.begin(m)
		if s.low != nil {
			s.intervalOf = place{}
			for _, r := range []*rim{s.low, s.high} {
				m.Fill(&r.base.Base, m.rimUses, r.rows.ZModel)
				r.base.begin(m)
			}
		}
		for _, o := range m.columns {
			k.column(o, s, m, b, lo, hi)
		}
	}
}

// column computes one column and makes sure that each of its null cells has a
// bit of the row's status that says why. m is nil for a column that does not
// depend on the model.
func (k *Kernel) column(o output, s *Scratch, m *model, b *table.Batch, lo, hi int) {
	s.base.item = o.item
	if o.entry.Test != nil {
		s.flags(o, b.Out[o.at].Flag[lo:hi])
	} else {
		s.numbers(o, m, b.Out[o.at].Float[lo:hi])
	}
	if s.sizes != nil {
		s.size(o, m, b, lo, hi)
	}
}

// flags is column for flags.
func (s *Scratch) flags(o output, out []uint8) {
	o.entry.Test(&s.base, out)
	for i, v := range out {
		if v == table.Null {
			s.rows.blame(o.entry, i)
		}
	}
}

// numbers is column for numbers.
func (s *Scratch) numbers(o output, m *model, out []float64) {
	rows := &s.rows
	switch o.form {
	case ValueForm:
		o.entry.Eval(&s.base, out)
	case ErrorForm:
		o.entry.Spread.Error(&s.base, out)
	default:
		s.interval(o, m, out)
	}
	if finite(out) {
		return
	}
	for i, v := range out {
		if math.Abs(v) <= math.MaxFloat64 {
			continue
		}
		out[i] = math.NaN()
		if o.form == ValueForm {
			rows.blame(o.entry, i)
		} else {
			rows.blameSpread(o, i)
		}
	}
}

// finite reports whether every number is. v - v is 0 or NaN, and four sums wait
// for one another less than one does.
func finite(v []float64) bool {
	var a, b, c, d float64
	for len(v) >= 4 {
		a += v[0] - v[0]
		b += v[1] - v[1]
		c += v[2] - v[2]
		d += v[3] - v[3]
		v = v[4:]
	}
	for _, x := range v {
		a += x - x
	}
	return a+b+c+d == 0
}

// blame gives the reason for a null cell. Mostly the row's bits explain it: it
// has no redshift, a column of the model has no meaning at its redshift, or a
// term is missing. What is left is a quantity that the model does not have: a
// divergent age, an event horizon, a time after the universe's end.
func (r *Rows) blame(e *Entry, i int) {
	bits, z := r.Status[i], r.ZModel[i]
	nowhere := bits&status.NotPositive != 0 && (z != z || z <= 0 && e.zeroNull())
	switch {
	case bits != 0 && (r.ZCos[i] != r.ZCos[i] || r.ZObs[i] != r.ZObs[i]):
	case bits&status.Range != 0 || nowhere:
	case bits&^status.Row&^status.NoSuch != 0 && e.Terms != 0:
	default:
		r.Status[i] |= status.NoSuch
	}
}

// zeroNull reports whether the column has no meaning at z <= 0 in any model:
// a magnitude (no distance), what is made of it, and the age at which contact
// is lost.
func (e *Entry) zeroNull() bool {
	return e.Unit == Magnitude || e.Family != Single || e.Uses&cosmo.ContactLost != 0
}
