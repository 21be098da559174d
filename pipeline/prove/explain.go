package prove

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"

	"catenrich/internal/fault"
	"catenrich/internal/number"
	"catenrich/internal/publish"
	"catenrich/internal/status"
	"catenrich/internal/table"
	"catenrich/pipeline"
	"catenrich/pipeline/columns"
)

// An Account is how the derived values of one row came to be.
type Account struct {
	Output     string    `json:"output"`
	Row        int64     `json:"row"` // from 1
	ConfigHash string    `json:"config_hash"`
	Sections   []Section `json:"sections"` // terms, in the order in which one follows from another
	Columns    []Derived `json:"columns"`  // in the output's order, without the status
	Status     int32     `json:"status"`
	Reasons    []string  `json:"status_means"` // one for each bit
	Whole      bool      `json:"whole"`        // every stored value is the recomputed one
}

// A Section is a part of an Account: the redshift, a cosmology, a band.
type Section struct {
	Title string `json:"title"`
	Terms []Term `json:"terms"`
}

// A Term is a number on the way to a derived value. Value is nil where there is
// none: not a number, or infinite, or text of the catalogue.
type Term struct {
	Name  string   `json:"term"`
	Value *float64 `json:"value"`
	Unit  string   `json:"unit"`
	How   string   `json:"how"`
	Text  string   `json:"text,omitempty"`
}

// A Derived is one added column of the row.
type Derived struct {
	Column     string `json:"column"`
	Stored     string `json:"stored"`
	Recomputed string `json:"recomputed"` // by the direct path; "not at hand" without the file it takes
	Same       bool   `json:"same"`
	Unit       string `json:"unit"`
	What       string `json:"what"`
	Source     string `json:"source"`
}

// Explain recomputes one row, numbered from 1, by the direct path, and tells
// every term on the way. An output that its manifest does not describe is a
// fault.Data, as is a row that is not there.
func (p *Prover) Explain(output string, row int64) (*Account, error) {
	var a *Account
	err := guard(func() error {
		w, o, err := p.opening(output)
		if err != nil {
			return err
		}
		defer o.Close()
		b, within, err := o.rowAt(row)
		if err != nil {
			return err
		}
		a = &Account{Output: output, Row: row, ConfigHash: w.hash.String(), Reasons: []string{}, Whole: true}
		a.fill(o, w, b, within)
		return nil
	})
	return a, err
}

// opening opens an output that its manifest describes, as far as sizes and
// quick fingerprints tell.
func (p *Prover) opening(output string) (*workshop, *opened, error) {
	m, err := p.manifest(output)
	if err != nil {
		return nil, nil, fmt.Errorf("the manifest of %s: %w", output, err)
	}
	state, err := publish.Look(publish.OS, output)
	if err != nil {
		return nil, nil, err
	}
	if !state.Ours {
		return nil, nil, fault.Data.Errorf("%s is not the output that its manifest describes; `catenrich verify` says more", output)
	}
	w, err := p.workshop(output, m)
	if err != nil {
		return nil, nil, err
	}
	o, err := p.open(output, w)
	return w, o, err
}

// rowAt decodes the chunk that holds a row.
func (o *opened) rowAt(row int64) (b *table.Batch, within int, err error) {
	c, within, err := o.Locate(row - 1)
	if err != nil {
		return nil, 0, err
	}
	b = new(table.Batch)
	b.Reset(c.Rows, o.wants, nil)
	if err := o.Decode(c, b); err != nil {
		return nil, 0, err
	}
	if within >= b.Rows {
		return nil, 0, fault.Data.Errorf("there is no row %d", row)
	}
	return b, within, nil
}

// fill recomputes the row and compares it.
func (a *Account) fill(o *opened, w *workshop, b *table.Batch, within int) {
	batch, stored := o.pick(b, []int{within})
	given := slices.Clone(batch.In)
	for i := range given {
		given[i].Float, given[i].State = slices.Clone(given[i].Float), slices.Clone(given[i].State)
	}
	scratch := new(columns.Scratch)
	sizes := o.bound.Judge(batch, scratch)
	n := &narrator{bound: o.bound, job: w.job, given: given, trace: scratch.Trace(0)}
	a.Sections = n.sections()
	j := newJudge(o, w)
	last := len(o.added) - 1
	for i, f := range o.added {
		same := j.same(&batch.Out[i], &stored[i], sizes[i], 0)
		computed := shown(&batch.Out[i], 0)
		if j.lost[i] {
			same, computed = true, "not at hand"
		}
		a.Whole = a.Whole && same
		if i < last {
			a.Columns = append(a.Columns, Derived{f.Name, shown(&stored[i], 0), computed, same, f.Unit, f.Description, f.Source})
		}
	}
	a.Status = int32(stored[last].Float[0])
	for i := range status.Count {
		if a.Status&(1<<i) != 0 {
			a.Reasons = append(a.Reasons, fmt.Sprintf("%d: %s", 1<<i, status.Describe(i)))
		}
	}
}

// errFound ends a search.
var errFound = errors.New("found")

// Find returns the number, from 1, of the first row of an output whose column
// holds a value: the same text, or the same number. None is a fault.Data.
func (p *Prover) Find(ctx context.Context, output, column, value string) (row int64, err error) {
	err = guard(func() error {
		_, o, err := p.opening(output)
		if err != nil {
			return err
		}
		defer o.Close()
		row, err = o.find(ctx, column, value, p.options.Workers)
		return err
	})
	return row, err
}

func (o *opened) find(ctx context.Context, column, value string, workers int) (row int64, err error) {
	schema := o.Schema()
	at, err := schema.Index(column, "--where")
	if err != nil {
		return 0, err
	}
	want := table.Want{Field: at, As: table.Bytes}
	v, isNumber := number.Parse([]byte(value))
	if t := schema.Fields[at].Type; t.Numeric() && t != table.Untyped {
		if want.As = table.Float; !isNumber {
			return 0, fault.Usage.Errorf("--where: %q is no number, and the column %q holds numbers", value, column)
		}
		v = t.Round(v)
	}
	wants := []table.Want{want}
	if err := o.Select(wants, nil); err != nil {
		return 0, err
	}
	err = pipeline.Pass(ctx, o, wants, workers, func(b *table.Batch, first int64) error {
		for i := range b.Rows {
			if holds(&b.In[0], i, value, v, isNumber) {
				row = first + int64(i) + 1
				return errFound
			}
		}
		return nil
	})
	switch {
	case errors.Is(err, errFound):
		return row, nil
	case err != nil:
		return 0, err
	}
	return 0, fault.Data.Errorf("%s: no row has %s = %s", schema.File, column, value)
}

// holds reports whether a cell is the text, or the number v if that is one.
func holds(c *table.Column, i int, text string, v float64, isNumber bool) bool {
	if c.State[i] != table.Good {
		return text == "" && c.State[i] == table.Missing
	}
	if c.Kind == table.Float {
		return c.Float[i] == v
	}
	if string(c.Bytes[i]) == text {
		return true
	}
	cell, ok := number.Parse(c.Bytes[i])
	return isNumber && ok && cell == v
}

// known is nil for what is no finite number.
func known(v float64) *float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return nil
	}
	return &v
}
