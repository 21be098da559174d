package prove

import (
	"fmt"
	"slices"

	"catenrich/internal/fault"
	"catenrich/internal/table"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/job"
)

// An opened output is a source whose last columns are those that were added,
// and the direct kernel bound to the others.
type opened struct {
	table.Source
	bound  *columns.Bound
	added  []table.Field
	wants  []table.Want // what the kernel reads, then the added columns
	inputs int          // how many of wants the kernel reads
}

// open opens an output, and checks that its columns are those that its settings
// add.
func (p *Prover) open(path string, w *workshop) (*opened, error) {
	o := &opened{added: w.kernel.Added()}
	s := &w.job.Settings
	format, err := p.formats.Find(s.Output.Format, path)
	if err != nil {
		if format, err = p.formats.Find(s.Input.Format, path); err != nil {
			return nil, fault.Data.Wrap(err)
		}
	}
	if o.Source, err = format.Open(path, o.inputSettings(&s.Input)); err != nil {
		return nil, err
	}
	if err := o.bind(w); err != nil {
		o.Close()
		return nil, err
	}
	return o, nil
}

// inputSettings are those by which the output is read: a file without a header
// has the new columns too.
func (o *opened) inputSettings(in *job.InputSettings) *job.InputSettings {
	if len(in.Names) == 0 {
		return in
	}
	longer := *in
	longer.Names = slices.Clone(in.Names)
	for _, f := range o.added {
		longer.Names = append(longer.Names, f.Name)
	}
	return &longer
}

// bind finds the columns.
func (o *opened) bind(w *workshop) error {
	schema := o.Schema()
	first := len(schema.Fields) - len(o.added)
	if first < 0 {
		return fault.Data.Errorf("it has %d columns, and %d were added", len(schema.Fields), len(o.added))
	}
	for i, f := range o.added {
		if got := schema.Fields[first+i].Name; got != f.Name {
			return fault.Data.Errorf("column %d is %q, where the settings add %q", first+i+1, got, f.Name)
		}
	}
	var err error
	if o.bound, err = w.kernel.Bind(&table.Schema{File: schema.File, Fields: schema.Fields[:first]}); err != nil {
		return fault.Data.Wrap(fmt.Errorf("what the columns were computed from cannot be found: %w", err))
	}
	o.wants, o.inputs = slices.Clone(o.bound.Wants), len(o.bound.Wants)
	for i, f := range o.added {
		as := table.Float
		if f.Kind == table.Flag {
			as = table.Bytes
		}
		o.wants = append(o.wants, table.Want{Field: first + i, As: as})
	}
	return o.Select(o.wants, nil)
}

// pick copies some rows of a decoded batch: what the kernel reads and makes
// room for what it computes, and the stored cells.
func (o *opened) pick(b *table.Batch, places []int) (batch *table.Batch, stored []table.Column) {
	batch = new(table.Batch)
	batch.Reset(len(places), o.bound.Wants, o.added)
	stored = make([]table.Column, len(o.added))
	for i := range o.wants {
		to := new(table.Column)
		if i < o.inputs {
			to = &batch.In[i]
		} else {
			to = &stored[i-o.inputs]
			to.Resize(o.wants[i].As, len(places))
			to.State = make([]table.State, len(places))
		}
		copyCells(to, &b.In[i], places)
	}
	return batch, stored
}

// copyCells copies some cells into memory of their own.
func copyCells(to, from *table.Column, places []int) {
	for i, at := range places {
		to.State[i] = from.State[at]
		if from.Kind == table.Float {
			to.Float[i] = from.Float[at]
		} else {
			to.Bytes[i] = slices.Clone(from.Bytes[at])
		}
	}
}
