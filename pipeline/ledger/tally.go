package ledger

import (
	"errors"
	"fmt"

	"catenrich/internal/fault"
	"catenrich/internal/table"
)

// A Tally is what is counted about rows while they pass. Each worker may keep
// its own: merging is addition, so the result does not depend on who counted
// what. Memory does not grow with rows.
type Tally struct {
	Rows    int64     `json:"rows"`    // rows with a place in the output
	Rejects int64     `json:"rejects"` // records that have no row
	Flagged int64     `json:"flagged"` // rows with any status bit
	Status  Bits      `json:"status"`  // how many rows have each status bit
	Columns []*Column `json:"columns"` // the added columns, in the output's order

	// Statistics that a job asks for, by name.
	Extents    map[string]*Extent    `json:"extents,omitempty"`
	Sums       map[string]*Sum       `json:"sums,omitempty"`
	Histograms map[string]*Histogram `json:"histograms,omitempty"`
	Densities  map[string]*Density   `json:"densities,omitempty"`
}

// A Column counts the cells of one added column.
type Column struct {
	Name   string `json:"name"`
	Values int64  `json:"values"` // cells that are not null
	Nulls  int64  `json:"nulls"`
	True   int64  `json:"true,omitempty"` // of a column of flags

	// Reasons counts, for each status bit, the rows that have it and a null in
	// this column. A row can have several bits, and a bit can be another
	// column's reason: the counts may add up to more than Nulls.
	Reasons Bits `json:"null_reasons"`

	Extent *Extent `json:"extent,omitempty"` // nil unless asked for
	Sum    *Sum    `json:"sum,omitempty"`    // nil unless asked for
}

// NewColumn returns an empty count for a column called name, with its extent
// and exact sum if numeric is true.
func NewColumn(name string, numeric bool) *Column {
	c := &Column{Name: name}
	if numeric {
		c.Extent, c.Sum = new(Extent), new(Sum)
	}
	return c
}

// Empty returns a tally that counts the same things and has seen nothing.
func (t *Tally) Empty() *Tally {
	e := &Tally{}
	for _, c := range t.Columns {
		fresh := NewColumn(c.Name, false)
		if c.Extent != nil {
			fresh.Extent = new(Extent)
		}
		if c.Sum != nil {
			fresh.Sum = new(Sum)
		}
		e.Columns = append(e.Columns, fresh)
	}
	for name := range t.Extents {
		put(&e.Extents, name, new(Extent))
	}
	for name := range t.Sums {
		put(&e.Sums, name, new(Sum))
	}
	for name, h := range t.Histograms {
		put(&e.Histograms, name, NewHistogram(h.axes...))
	}
	for name, d := range t.Densities {
		put(&e.Densities, name, NewDensity(d.axis))
	}
	return e
}

// put stores into a map that may not be there yet.
func put[T any](m *map[string]T, name string, v T) {
	if *m == nil {
		*m = map[string]T{}
	}
	(*m)[name] = v
}

// AddRows counts the rows of a batch by their status column.
func (t *Tally) AddRows(status []int32) {
	t.Rows += int64(len(status))
	for _, s := range status {
		if s != 0 {
			t.Flagged++
			t.Status.Add(s)
		}
	}
}

// Add counts the cells of a batch's column, given the status of each row.
func (c *Column) Add(cells *table.Column, status []int32) {
	rows, nulls := len(status), int64(0)
	switch cells.Kind {
	case table.Float:
		if c.Extent == nil || c.Extent.Add(cells.Float[:rows]) > 0 {
			for i, v := range cells.Float[:rows] {
				if v != v {
					nulls++
					c.Reasons.Add(status[i])
				}
			}
		}
		if c.Sum != nil {
			c.Sum.Add(cells.Float[:rows])
		}
	case table.Flag:
		for i, v := range cells.Flag[:rows] {
			switch v {
			case table.Null:
				nulls++
				c.Reasons.Add(status[i])
			case table.True:
				c.True++
			}
		}
	case table.Bytes:
		for i, v := range cells.Bytes[:rows] {
			if v == nil {
				nulls++
				c.Reasons.Add(status[i])
			}
		}
	case table.Int: // never null
	}
	c.Nulls += nulls
	c.Values += int64(rows) - nulls
}

// complete refuses a tally, read from a file, in which something named is null.
func (t *Tally) complete() error {
	for _, c := range t.Columns {
		if c == nil {
			return errors.New("a column that is null")
		}
	}
	for name, e := range t.Extents {
		if e == nil {
			return fmt.Errorf("the extent %q is null", name)
		}
	}
	for name, s := range t.Sums {
		if s == nil {
			return fmt.Errorf("the sum %q is null", name)
		}
	}
	for name, h := range t.Histograms {
		if h == nil {
			return fmt.Errorf("the histogram %q is null", name)
		}
	}
	for name, d := range t.Densities {
		if d == nil {
			return fmt.Errorf("the density %q is null", name)
		}
	}
	return nil
}

// Merge adds what o counted. Both must count the same columns; a statistic
// that only one has is kept.
func (t *Tally) Merge(o *Tally) error {
	if len(t.Columns) == 0 && t.Rows == 0 {
		t.Columns = o.Empty().Columns
	}
	if len(t.Columns) != len(o.Columns) {
		return fault.Data.Errorf("counts of %d and of %d columns cannot be added", len(t.Columns), len(o.Columns))
	}
	for i, c := range t.Columns {
		if err := c.merge(o.Columns[i]); err != nil {
			return err
		}
	}
	t.Rows += o.Rows
	t.Rejects += o.Rejects
	t.Flagged += o.Flagged
	t.Status.Merge(&o.Status)
	return t.mergeStatistics(o)
}

func (t *Tally) mergeStatistics(o *Tally) error {
	for name, e := range o.Extents {
		if t.Extents[name] == nil {
			put(&t.Extents, name, new(Extent))
		}
		t.Extents[name].Merge(e)
	}
	for name, s := range o.Sums {
		if t.Sums[name] == nil {
			put(&t.Sums, name, new(Sum))
		}
		t.Sums[name].Merge(s)
	}
	for name, h := range o.Histograms {
		if t.Histograms[name] == nil {
			put(&t.Histograms, name, NewHistogram(h.axes...))
		}
		if err := t.Histograms[name].Merge(h); err != nil {
			return fault.Data.Wrap(fmt.Errorf("statistic %q: %w", name, err))
		}
	}
	for name, d := range o.Densities {
		if t.Densities[name] == nil {
			put(&t.Densities, name, NewDensity(d.axis))
		}
		if err := t.Densities[name].Merge(d); err != nil {
			return fault.Data.Wrap(fmt.Errorf("statistic %q: %w", name, err))
		}
	}
	return nil
}

func (c *Column) merge(o *Column) error {
	if c.Name != o.Name || (c.Extent == nil) != (o.Extent == nil) || (c.Sum == nil) != (o.Sum == nil) {
		return fault.Data.Errorf("counts of the columns %q and %q cannot be added", c.Name, o.Name)
	}
	c.Values += o.Values
	c.Nulls += o.Nulls
	c.True += o.True
	c.Reasons.Merge(&o.Reasons)
	if c.Extent != nil {
		c.Extent.Merge(o.Extent)
	}
	if c.Sum != nil {
		c.Sum.Merge(o.Sum)
	}
	return nil
}
