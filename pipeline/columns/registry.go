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

// A Family is what a column is repeated for. Its name then ends in the name of
// each: absolute_magnitude_r.
type Family uint8

const (
	Single Family = iota
	PerBand
	PerLine
	PerRadio
	PerSize
	PerSelection
	PerCut
)

// An Entry is one derived column, or one for each member of a family.
type Entry struct {
	Name   string
	Group  string
	Scope  Scope
	Family Family
	Unit   Unit
	UCD    string
	Doc    string // one line, what it is
	From   string // the published source, with its equation number

	// Uses are the quantities of the model that Eval reads from the base, and
	// Terms what it reads of the rows besides their redshifts.
	Uses  cosmo.Quantity
	Terms Term

	// Missing says why a job cannot have the column: what it does not set; ""
	// if it can. item is the member of the family. A nil Missing is always.
	Missing func(s *job.Settings, item int) string

	// Eval fills out for the rows of the base. It allocates nothing. A cell
	// that cannot be computed is NaN; where the reason is one of the terms, its
	// status bit has been set, else the kernel finds out why.
	Eval func(b *Base, out []float64)

	// Summed asks for the exact sum and the histogram of the column among the
	// statistics; range and nulls are counted of every column.
	Summed bool

	// Spread says how the column is uncertain; the zero value: it has neither
	// error nor interval.
	Spread spreadRule

	// Size turns values into what their errors are measured against, where that
	// is not the value itself, or a magnitude (a factor e) for magnitudes; for
	// flags it fills in how far, in parts, each is from changing. Only proofs
	// ask, see [Bound.Judge].
	Size func(b *Base, out []float64)

	// Test is Eval for a column of flags: table.True, False or Null.
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
var registry = slices.Concat(distances, times, volumes, recession, redshifts, photometry, selections)

// All returns the table of columns in table order, without the status column.
func All() []Entry { return slices.Clone(registry) }

// Pattern is the column's name as the documentation writes it.
func (e *Entry) Pattern() string {
	return e.Name + [...]string{"", "_<band>", "_<line>", "_<radio>", "_<size>", "_<selection>", "_<sample>"}[e.Family]
}

// members returns the names of the family's members in a job, in its order; a
// single column has one member without a name.
func (f Family) members(s *job.Settings) []string {
	switch f {
	case PerBand:
		return names(s.Bands, func(m *job.BandSettings) string { return m.Name })
	case PerLine:
		return names(s.Lines, func(m *job.LineSettings) string { return m.Name })
	case PerRadio:
		return names(s.Radios, func(m *job.RadioSettings) string { return m.Name })
	case PerSize:
		return names(s.Sizes, func(m *job.SizeSettings) string { return m.Name })
	case PerSelection:
		return names(s.Selections, func(m *job.SelectionSettings) string { return m.Name })
	case PerCut:
		return names(s.Cuts, func(m *job.CutSettings) string { return m.Name })
	}
	return []string{""}
}

func names[T any](list []T, name func(*T) string) []string {
	all := make([]string, len(list))
	for i := range list {
		all[i] = name(&list[i])
	}
	return all
}

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
