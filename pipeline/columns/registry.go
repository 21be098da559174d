// Package columns is the table of derived columns: what each is called, what
// it means, where its formula was published, and how a batch of rows gets it.
//
// To add a column, add one [Entry] to the table of its group (distance.go,
// time.go, volume.go, recession.go, ...). The command `catenrich columns`, the
// documentation, the metadata of the files and the tests all read the table.
// [New] makes a [Kernel] of a job's columns; [Kernel.Bind] fits it to the
// schema of one input; [Bound.Run] computes a batch.
package columns

import (
	"fmt"
	"slices"

	"catenrich/cosmo"
	"catenrich/internal/table"
	"catenrich/pipeline/job"
)

// A Scope says how often a job has a column.
type Scope uint8

const (
	Once     Scope = iota // once, whatever the cosmologies
	PerModel              // once for each [[cosmology]]
)

// An Entry is one derived column.
type Entry struct {
	Name  string
	Group string
	Scope Scope
	Unit  Unit
	UCD   string
	Doc   string // one line, what it is
	From  string // the published source, with its equation number

	// Uses are the quantities of the model that Eval reads from the base.
	Uses cosmo.Quantity

	// Eval fills out for the rows of the base. It allocates nothing. A cell
	// that cannot be computed is NaN; the kernel finds out why.
	Eval func(b *Base, out []float64)

	// Test is the same for a column of flags: table.True, False or Null.
	Test func(b *Base, out []uint8)
}

// Kind is how a batch holds the column.
func (e *Entry) Kind() table.Kind {
	if e.Test != nil {
		return table.Flag
	}
	return table.Float
}

// registry is every entry in table order, which is the order of the output.
var registry = slices.Concat(distances, times, volumes, recession, redshifts)

// All returns the table of columns in table order, without the status column.
func All() []Entry { return slices.Clone(registry) }

// StatusName is the column that says why the others are null. It is always
// added, once, last.
const StatusName = "enrich_status"

// statusEntry describes the status column as the entries describe theirs.
var statusEntry = Entry{
	Name: StatusName, Group: "always", UCD: "meta.code.qual",
	Doc:  "why derived cells of this row are null: a sum of bits, 0 where nothing is wrong",
	From: "this program; the bits are listed by `catenrich columns --status`",
}

// Status returns the entry of the status column.
func Status() Entry { return statusEntry }

// groupAll asks for every column of the table.
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

// Catalog is the table of columns as the job package asks for it.
type Catalog struct{}

// Expand turns names and groups into column names in table order, each once.
// A name that is neither is an error with the nearest names; so is a column
// named twice, since one of the two was meant to be another.
func (Catalog) Expand(_ *job.Settings, names []string) ([]string, []error) {
	var wrong []error
	wanted := make(map[string]bool)
	listed := make(map[string]bool)
	for _, name := range names {
		if listed[name] {
			wrong = append(wrong, fmt.Errorf("names %q twice", name))
			continue
		}
		listed[name] = true
		found := false
		for i := range registry {
			e := &registry[i]
			if e.Name == name || e.Group == name || name == groupAll {
				wanted[e.Name], found = true, true
			}
		}
		if !found {
			wrong = append(wrong, unknown(name))
		}
	}
	var expanded []string
	for i := range registry {
		if wanted[registry[i].Name] {
			expanded = append(expanded, registry[i].Name)
		}
	}
	return expanded, wrong
}

func unknown(name string) error {
	if name == StatusName {
		return fmt.Errorf("names %q, which is always added", name)
	}
	known := Groups()
	for i := range registry {
		known = append(known, registry[i].Name)
	}
	return fmt.Errorf("names %q, which is no column and no group; the nearest are %s", name, table.Quote(table.Nearest(name, known, 3)))
}
