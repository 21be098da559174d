package columns

import (
	"catenrich/internal/fault"
	"catenrich/internal/status"
	"catenrich/internal/table"
	"catenrich/pipeline/job"
	"catenrich/pipeline/ledger"
)

// A Need is a column of the catalogue that the job reads.
type Need struct {
	Role    job.Role
	Column  string
	As      table.Kind
	Setting string // the key that names it
}

// needs lists the columns that the settings read, in a fixed order.
func needs(s *job.Settings) []Need {
	var list []Need
	read := func(role job.Role, as table.Kind) {
		if name, ok := s.Catalogue[role]; ok {
			list = append(list, Need{role, name, as, "columns." + string(role)})
		}
	}
	read(job.RoleRedshift, table.Float)
	read(job.RoleVelocity, table.Float)
	if len(s.Redshift.QualityGood) > 0 {
		as := table.Bytes
		if _, number := s.Redshift.QualityGood[0].(float64); number {
			as = table.Float
		}
		read(job.RoleQuality, as)
	}
	return list
}

// Needs lists the columns of the catalogue that the kernel reads.
func (k *Kernel) Needs() []Need { return k.needs }

// Place names a setting as the user wrote it.
func (k *Kernel) Place(path string) string { return k.place(path) }

// A Bound is a kernel fitted to the schema of one input.
type Bound struct {
	*Kernel
	Wants     []table.Want
	sentinels [][]float64 // of each want, rounded to the column's own type
	redshift  redshifter
	quality   *quality
}

// Bind finds the job's columns in a schema. A column that is absent, or holds
// no numbers where numbers are needed, and an added name that is there
// already, are errors.
func (k *Kernel) Bind(schema *table.Schema) (*Bound, error) {
	b := &Bound{Kernel: k}
	where := make(map[job.Role]int)
	for _, need := range k.needs {
		field, err := schema.Index(need.Column, k.place(need.Setting))
		if err != nil {
			return nil, err
		}
		kind := schema.Fields[field].Type
		if need.As == table.Float && !kind.Numeric() {
			return nil, fault.Data.Errorf("%s: the column %q (%s) holds %v values, and numbers are needed: name another column",
				schema.File, need.Column, k.place(need.Setting), kind)
		}
		if kind == table.Other {
			return nil, fault.Data.Errorf("%s: the column %q (%s) is nested or of a type that cannot be read: name another column",
				schema.File, need.Column, k.place(need.Setting))
		}
		where[need.Role] = len(b.Wants)
		b.Wants = append(b.Wants, table.Want{Field: field, As: need.As})
		var rounded []float64
		for _, v := range k.settings.Missing[need.Role] {
			rounded = append(rounded, kind.Round(v))
		}
		b.sentinels = append(b.sentinels, rounded)
	}
	if name := schema.Clash(k.added); name != "" {
		return nil, fault.Config.Errorf("%s already has a column %q (names are compared without case): set %s to give the new columns another name",
			schema.File, name, k.place("add.prefix"))
	}
	b.redshift = newRedshifter(k.settings, where)
	if at, ok := where[job.RoleQuality]; ok {
		b.quality = newQuality(k.settings.Redshift.QualityGood, at)
	}
	return b, nil
}

// Run computes every added column of a decoded batch, and counts it.
func (b *Bound) Run(batch *table.Batch, s *Scratch, tally *ledger.Tally) {
	for i, sentinels := range b.sentinels {
		dropSentinels(&batch.In[i], sentinels)
	}
	bits := batch.Out[len(b.added)-1].Int
	clear(bits)
	for lo := 0; lo < batch.Rows; lo += span {
		hi := min(lo+span, batch.Rows)
		s.rows.resize(hi - lo)
		s.rows.Status = bits[lo:hi]
		b.redshift.fill(batch, &s.rows, lo)
		b.quality.apply(batch, &s.rows, lo)
		b.compute(batch, s, lo, hi)
		count(tally, batch, &s.rows, lo, hi)
	}
}

// dropSentinels turns the cells that hold a sentinel into missing ones.
func dropSentinels(c *table.Column, sentinels []float64) {
	for _, sentinel := range sentinels {
		for i, v := range c.Float {
			if v == sentinel {
				c.SetBad(i, table.Missing)
			}
		}
	}
}

// quality marks the rows that the survey itself calls unusable.
type quality struct {
	at      int
	numbers map[float64]bool
	words   map[string]bool
}

func newQuality(good []any, at int) *quality {
	q := &quality{at: at, numbers: make(map[float64]bool), words: make(map[string]bool)}
	for _, mark := range good {
		switch mark := mark.(type) {
		case float64:
			q.numbers[mark] = true
		case string:
			q.words[mark] = true
		}
	}
	return q
}

// apply takes the redshift from every row without a good mark.
func (q *quality) apply(batch *table.Batch, r *Rows, lo int) {
	if q == nil {
		return
	}
	column := &batch.In[q.at]
	for i := range r.ZCos {
		good := false
		if column.Kind == table.Float {
			good = q.numbers[column.Float[lo+i]]
		} else {
			good = q.words[string(column.Bytes[lo+i])]
		}
		if !good {
			r.drop(i, status.Quality)
		}
	}
}
