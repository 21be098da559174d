package columns

import (
	"fmt"
	"slices"

	"catenrich/internal/table"
	"catenrich/pipeline/job"
)

// Names that stand for many columns, besides the groups of the table.
const (
	groupAll       = "all"       // every value that the job can have
	groupErrors    = "errors"    // the errors of the columns that the job names
	groupIntervals = "intervals" // their intervals
)

// Groups returns the names of the groups in table order, then "all", and
// "errors" and "intervals", which speak of the columns named beside them.
func Groups() []string {
	var names []string
	for i := range registry {
		if !slices.Contains(names, registry[i].Group) {
			names = append(names, registry[i].Group)
		}
	}
	return append(names, groupAll, groupErrors, groupIntervals)
}

// An instance is a column that a job can have: an entry, and a member of its
// family.
type instance struct {
	*Entry
	item int
	form Form
	name string
	why  string // what the job does not set; "" if it can have the column
}

// instances lists the columns of a job in table order.
func instances(s *job.Settings) []instance {
	var all []instance
	for i := range registry {
		e := &registry[i]
		for item, member := range e.Family.members(s) {
			name := e.Name
			if member != "" {
				name += "_" + member
			}
			for form := ValueForm; form <= HighForm; form++ {
				if !e.has(form) {
					continue
				}
				in := instance{Entry: e, item: item, form: form, name: name + form.suffix()}
				if e.Missing != nil {
					in.why = e.Missing(s, item)
				}
				if in.why == "" {
					in.why = form.missing(s, e, item)
				}
				all = append(all, in)
			}
		}
	}
	return all
}

// has reports whether the entry can be asked for in the form.
func (e *Entry) has(f Form) bool {
	switch f {
	case ErrorForm:
		return e.Spread.Error != nil
	case LowForm, HighForm:
		return e.Spread.Interval
	}
	return true
}

// missing says why a job cannot have a form of a column.
func (f Form) missing(s *job.Settings, e *Entry, item int) string {
	_, sigmaZ := s.Catalogue[job.RoleRedshiftError]
	_, sigmaV := s.Catalogue[job.RoleVelocityError]
	_, quantiles := s.Catalogue[job.RoleRedshiftLower]
	switch {
	case f == ErrorForm && !(sigmaZ || sigmaV || s.Redshift.PeculiarVelocitySigma > 0 || e.Family.hasErrors(s, item)):
		return "an error: columns.redshift_error, columns.velocity_error, redshift.peculiar_velocity_sigma or one of what it is made of"
	case (f == LowForm || f == HighForm) && !quantiles:
		return "columns.redshift_lower and columns.redshift_upper"
	}
	return ""
}

// hasErrors reports whether the catalogue has an error of the measured value.
func (f Family) hasErrors(s *job.Settings, item int) bool {
	var roles []job.Role
	switch f {
	case PerBand:
		name := s.Bands[item].Name
		roles = []job.Role{job.BandRole(name, job.PartError), job.BandRole(name, job.PartExtinctionError), job.RoleEBVError}
	case PerLine:
		roles = []job.Role{job.OtherRole("line", s.Lines[item].Name, job.PartError)}
	case PerRadio:
		roles = []job.Role{job.OtherRole("radio", s.Radios[item].Name, job.PartError)}
	case PerSize:
		roles = []job.Role{job.OtherRole("size", s.Sizes[item].Name, job.PartError)}
	}
	for _, role := range roles {
		if _, ok := s.Catalogue[role]; ok {
			return true
		}
	}
	return false
}

// Catalog is the table of columns as the job package asks for it.
type Catalog struct{}

// Expand turns names and groups into column names in table order, each once.
// A group stands for those of its columns that the job can have. A name that
// is neither is an error with the nearest names; so is a column that the job
// cannot have, and one named twice, since one of the two was meant to be
// another.
func (Catalog) Expand(s *job.Settings, names []string) ([]string, []error) {
	var wrong []error
	all := instances(s)
	wanted := make(map[string]bool)
	listed := make(map[string]bool)
	for _, name := range names {
		if listed[name] {
			wrong = append(wrong, fmt.Errorf("names %q twice", name))
			continue
		}
		listed[name] = true
		if name == groupErrors || name == groupIntervals {
			continue
		}
		if err := want(all, name, wanted); err != nil {
			wrong = append(wrong, err)
		}
	}
	expanded := []string{}
	wantSpread(all, listed, wanted)
	for i := range all {
		if wanted[all[i].name] {
			expanded = append(expanded, all[i].name)
		}
	}
	return expanded, wrong
}

// wantSpread adds the errors and intervals of the wanted columns, as far as the
// job can have them.
func wantSpread(all []instance, listed, wanted map[string]bool) {
	value := ""
	for i := range all {
		in := &all[i]
		if in.form == ValueForm {
			value = in.name
			continue
		}
		group := groupIntervals
		if in.form == ErrorForm {
			group = groupErrors
		}
		if listed[group] && wanted[value] && in.why == "" {
			wanted[in.name] = true
		}
	}
}

// want marks the columns that one name or group stands for.
func want(all []instance, name string, wanted map[string]bool) error {
	for i := range all {
		if all[i].name == name {
			if all[i].why != "" {
				return fmt.Errorf("names %q, which needs %s", name, all[i].why)
			}
			wanted[name] = true
			return nil
		}
	}
	group, why := false, ""
	for i := range all {
		if name != groupAll && name != all[i].Group || all[i].form != ValueForm {
			continue
		}
		if all[i].why == "" {
			wanted[all[i].name], group = true, true
		} else if why == "" {
			why = all[i].why
		}
	}
	switch {
	case group:
		return nil
	case why != "":
		return fmt.Errorf("names the group %q, none of whose columns this job can have: it needs %s", name, why)
	case slices.Contains(Groups(), name):
		return fmt.Errorf("names the group %q, which this job has no members of (no [[band]], [[selection]] or the like)", name)
	}
	return unknown(all, name)
}

func unknown(all []instance, name string) error {
	if name == StatusName {
		return fmt.Errorf("names %q, which is always added", name)
	}
	known := Groups()
	for i := range all {
		known = append(known, all[i].name)
	}
	return fmt.Errorf("names %q, which is no column and no group; the nearest are %s", name, table.Quote(table.Nearest(name, known, 3)))
}
