package columns

import (
	"sort"
	"strings"

	"catenrich/internal/fault"
	"catenrich/internal/number"
	"catenrich/internal/table"
	"catenrich/pipeline/job"
)

// A Need is a column of the catalogue that the job reads.
type Need struct {
	Role    job.Role
	Column  string
	As      table.Kind
	Setting string // the key that names it
}

// listNeeds lists the columns that the job's columns read, in order of role.
func (k *Kernel) listNeeds() []Need {
	var list []Need
	for role, column := range k.job.Settings.Catalogue {
		if k.reads(role) {
			list = append(list, Need{role, column, k.kindOf(role), k.job.RolePath(role)})
		}
	}
	sort.Slice(list, func(i, j int) bool { return list[i].Role < list[j].Role })
	return list
}

// reads reports whether some column reads the role. A column of the catalogue
// that nothing reads need not even exist.
func (k *Kernel) reads(role job.Role) bool {
	switch role {
	case job.RoleRedshift, job.RoleVelocity, job.RoleQuality, job.RoleRedshiftHeliocentric, job.RolePeculiarVelocity:
		return true
	case job.RoleRightAscension, job.RoleDeclination:
		s := &k.job.Settings.Redshift
		return k.terms&directionTerm != 0 || s.Frame != "as-given" && s.Frame != s.DistancesIn || s.Frame == "cmb" || s.Frame == "local-group"
	}
	switch {
	case role == job.RoleRedshiftError || role == job.RoleVelocityError:
		return k.terms&errorTerm != 0
	case role == job.RoleRedshiftLower || role == job.RoleRedshiftUpper:
		return k.terms&quantileTerm != 0
	}
	for i := range k.job.Bands {
		if k.bandReads(i, role) {
			return true
		}
	}
	return k.selectionReads(role) || k.valueReads(role)
}

// bandReads reports whether a column of the ith band reads the role.
func (k *Kernel) bandReads(i int, role job.Role) bool {
	b, terms := &k.job.Bands[i], k.bandTerms[i]
	switch role {
	case job.RoleEBV:
		return terms&extinctionTerm != 0 && b.Extinction == "coefficient"
	case job.BandRole(b.Name, job.PartValue):
		return terms&apparentTerm != 0
	case job.BandRole(b.Name, job.PartExtinction):
		return terms&extinctionTerm != 0
	case job.BandRole(b.Name, job.PartError):
		return terms&apparentTerm != 0 && terms&errorTerm != 0
	case job.BandRole(b.Name, job.PartExtinctionError):
		return terms&extinctionTerm != 0 && terms&errorTerm != 0
	case job.RoleEBVError:
		return terms&extinctionTerm != 0 && terms&errorTerm != 0 && b.Extinction == "coefficient"
	case job.BandRole(b.Name, job.PartK), job.BandRole(b.Name, job.PartTemplate):
		return terms&kTerm != 0
	}
	return false
}

func (k *Kernel) selectionReads(role job.Role) bool {
	for i := range k.job.Selections {
		if k.selected[i] && strings.HasPrefix(string(role), string(job.SelectionRole(k.job.Selections[i].Name, ""))) {
			return true
		}
	}
	return false
}

func (k *Kernel) valueReads(role job.Role) bool {
	for kind, term := range map[string]Term{"line.": lineTerm, "radio.": radioTerm, "size.": sizeTerm} {
		if k.terms&term != 0 && strings.HasPrefix(string(role), kind) {
			return strings.HasSuffix(string(role), "."+job.PartValue) || k.terms&errorTerm != 0
		}
	}
	return false
}

// kindOf is how a role's column is read; positions may be numbers or text.
func (k *Kernel) kindOf(role job.Role) table.Kind {
	switch {
	case role == job.RoleQuality:
		if _, number := k.job.Settings.Redshift.QualityGood[0].(float64); number {
			return table.Float
		}
		return table.Bytes
	case role == job.RoleRightAscension, role == job.RoleDeclination,
		strings.HasSuffix(string(role), "."+job.PartTemplate), strings.HasSuffix(string(role), "."+job.PartField):
		return table.Bytes
	}
	return table.Float
}

// Needs lists the columns of the catalogue that the kernel reads.
func (k *Kernel) Needs() []Need { return k.needs }

// Place names a setting as the user wrote it.
func (k *Kernel) Place(path string) string { return k.job.Place(path) }

// A Bound is a kernel fitted to the schema of one input.
type Bound struct {
	*Kernel
	Wants     []table.Want
	at        map[job.Role]int // index into Wants
	sentinels [][]float64      // of each want, rounded to the column's own type
	redshift  *redshifter
}

// where returns the place of a role's column in Batch.In, or -1.
func (b *Bound) where(role job.Role) int {
	if at, ok := b.at[role]; ok {
		return at
	}
	return -1
}

// Bind finds the job's columns in a schema. A column that is absent, or holds
// no numbers where numbers are needed, and an added name that is there
// already, are errors.
func (k *Kernel) Bind(schema *table.Schema) (*Bound, error) {
	b := &Bound{Kernel: k, at: make(map[job.Role]int)}
	for _, need := range k.needs {
		if err := b.bind(schema, need); err != nil {
			return nil, err
		}
	}
	if name := schema.Clash(k.added); name != "" {
		return nil, fault.Config.Errorf("%s already has a column %q (names are compared without case): set %s to give the new columns another name",
			schema.File, name, k.Place("add.prefix"))
	}
	var err error
	b.redshift, err = newRedshifter(&k.job.Settings, b.where, k.terms)
	return b, err
}

// bind finds one column.
func (b *Bound) bind(schema *table.Schema, need Need) error {
	field, err := schema.Index(need.Column, b.Place(need.Setting))
	if err != nil {
		return err
	}
	kind := schema.Fields[field].Type
	position := need.Role == job.RoleRightAscension || need.Role == job.RoleDeclination
	if position && kind != table.Untyped && kind.Numeric() {
		need.As = table.Float
	}
	if need.As == table.Float && !kind.Numeric() || kind == table.Other {
		return fault.Data.Errorf("%s: the column %q (%s) holds %v values, which cannot be used there: name another column",
			schema.File, need.Column, b.Place(need.Setting), kind)
	}
	b.at[need.Role] = len(b.Wants)
	b.Wants = append(b.Wants, table.Want{Field: field, As: need.As})
	var rounded []float64
	for _, v := range b.job.Settings.Missing[need.Role] {
		rounded = append(rounded, kind.Round(v))
	}
	b.sentinels = append(b.sentinels, rounded)
	return nil
}

// dropSentinels turns the cells that hold a sentinel into missing ones; text
// counts as the number it parses to.
func dropSentinels(c *table.Column, sentinels []float64) {
	for _, sentinel := range sentinels {
		for i, v := range c.Float {
			if v == sentinel && c.Kind == table.Float {
				c.SetBad(i, table.Missing)
			}
		}
		if c.Kind != table.Bytes {
			continue
		}
		for i, text := range c.Bytes {
			if v, ok := number.Parse(text); ok && v == sentinel {
				c.SetBad(i, table.Missing)
			}
		}
	}
}
