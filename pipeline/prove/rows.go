package prove

import (
	"context"
	"fmt"

	"golang.org/x/sync/errgroup"

	"catenrich/internal/fault"
	"catenrich/internal/table"
	"catenrich/pipeline"
	"catenrich/pipeline/ledger"
)

// checkRows reads the output: its columns, how many rows it has, what they
// count, and a sample of them recomputed. An error is a fault of the output.
func (p *Prover) checkRows(ctx context.Context, r *Report, m *ledger.Manifest, w *workshop) error {
	o, err := p.open(r.Output, w)
	if err != nil {
		return err
	}
	defer o.Close()
	r.note("columns", Passed, "%d added, with the names and in the order that the settings give", len(o.added))
	k := p.options.Rows
	if p.options.All {
		k = m.Output.Rows
	}
	v := &visit{
		Prover: p, output: o, judge: newJudge(o, w), counts: newCounts(o.added),
		sample: newSample(m.ConfigHash, m.Output.SHA256, m.Output.Rows, k),
	}
	if err := v.read(ctx); err != nil {
		return err
	}
	r.Rows, r.Recomputed = v.rows, v.recomputed
	if v.rows == m.Output.Rows {
		r.note("rows", Passed, "%d, as recorded", v.rows)
	} else {
		r.note("rows", Failed, "there are %d, not %d as recorded", v.rows, m.Output.Rows)
	}
	r.judge("counts", v.counts.compare(&m.Tally), "nulls of every column, flags, and status bits of all rows are as recorded")
	v.report(r, w)
	return nil
}

// A visit is one pass over an output.
type visit struct {
	*Prover
	output *opened
	sample *sample
	judge  *judge
	counts *counts

	rows, recomputed int64
}

// judgeRows is how many rows are recomputed by one goroutine at a time.
const judgeRows = 256

// read passes over all rows.
func (v *visit) read(ctx context.Context) error {
	group, inner := errgroup.WithContext(ctx)
	group.SetLimit(v.options.Workers)
	err := pipeline.Pass(inner, v.output, v.output.wants, v.options.Workers, func(b *table.Batch, first int64) error {
		if len(b.Rejects) > 0 {
			return fault.Data.Errorf("line %d is no row: %s", b.Rejects[0].Line, b.Rejects[0].Reason)
		}
		v.rows += int64(b.Rows)
		v.counts.add(b.In[v.output.inputs:], b.Rows)
		places := v.sample.take(first, b.Rows)
		v.recomputed += int64(len(places))
		for len(places) > 0 {
			n := min(len(places), judgeRows)
			batch, stored := v.output.pick(b, places[:n])
			numbers := make([]int64, n)
			for i, at := range places[:n] {
				numbers[i] = first + int64(at)
			}
			places = places[n:]
			group.Go(func() error {
				return guard(func() error {
					v.judge.compare(batch, stored, numbers)
					return nil
				})
			})
		}
		return nil
	})
	if failed := group.Wait(); failed != nil {
		return failed
	}
	return err
}

// report says how the sample was.
func (v *visit) report(r *Report, w *workshop) {
	for i, lost := range v.judge.lost {
		if lost {
			r.NotDone = append(r.NotDone, v.output.added[i].Name)
		}
	}
	if len(r.NotDone) > 0 {
		f := w.lost[0]
		r.note("not recomputed", Skipped, "%d of the columns: the %s (%s) with SHA-256 %s is not at hand; name it, or a directory that holds it, with --files",
			len(r.NotDone), f.Use, f.Place, f.SHA256)
	}
	r.Wrong, r.Mismatches = v.judge.wrong, append(r.Mismatches, v.judge.first...)
	if r.Wrong > 0 {
		first := r.Mismatches[0]
		r.note("values", Failed, "%d cells of %d rows are not what their rows make them, the first in row %d, column %s: %s stored, %s recomputed",
			r.Wrong, r.Recomputed, first.Row, first.Column, first.Stored, first.Recomputed)
		return
	}
	if r.Recomputed == 0 && r.Rows > 0 {
		r.note("values", Skipped, "no row was to be recomputed")
		return
	}
	which := "all"
	if r.Recomputed < r.Rows {
		which = fmt.Sprintf("a sample of %d", r.Recomputed)
	}
	r.note("values", Passed, "%s of the %d rows recomputed by quadrature, equal to %g", which, r.Rows, Tolerance)
}
