package columns

import (
	"fmt"
	"slices"

	"catenrich/internal/table"
	"catenrich/pipeline/job"
)

// groupAll asks for every column that the job can have.
const groupAll = "all"

// Groups returns the names of the groups in table order, "all" last.
func Groups() []string {
	var names []string
	for i := range registry {
		if !slices.Contains(names, registry[i].Group) {
			names = append(names, registry[i].Group)
		}
	}
	return append(names, groupAll)
}

// An instance is a column that a job can have: an entry, and a member of its
// family.
type instance struct {
	*Entry
	item int
	name string
	why  string // what the job does not set; "" if it can have the column
}

// instances lists the columns of a job in table order.
func instances(s *job.Settings) []instance {
	var all []instance
	for i := range registry {
		e := &registry[i]
		for item, member := range e.Family.members(s) {
			in := instance{Entry: e, item: item, name: e.Name + member}
			if e.Missing != nil {
				in.why = e.Missing(s, item)
			}
			all = append(all, in)
		}
	}
	return all
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
		if err := want(all, name, wanted); err != nil {
			wrong = append(wrong, err)
		}
	}
	expanded := []string{}
	for i := range all {
		if wanted[all[i].name] {
			expanded = append(expanded, all[i].name)
		}
	}
	return expanded, wrong
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
		if name != groupAll && name != all[i].Group {
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
