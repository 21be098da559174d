package pipeline

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"strconv"

	"catenrich/internal/fault"
	"catenrich/internal/table"
)

// reject notes a record that has no row, and fails beyond the job's limit.
func (w *work) reject(r *table.Reject) error {
	o := w.outcome
	if o.Rejects++; o.First == nil {
		first := *r
		o.First = &first
	}
	if limit := w.plan.Job.MaxRejects; o.Rejects > limit {
		return fault.Data.Errorf("%s:%d: %s; that makes %d rejects, and %s is %d: mend the file, or raise the limit to keep the rest and find such records in %s",
			w.unit.Name(), r.Line, r.Reason, o.Rejects, w.plan.Job.Place("limits.max_rejects"), limit, w.rejectsPlace())
	}
	if w.rejects == nil { // standard output: they go where messages go
		_, err := fmt.Fprintf(w.options.Stderr, "catenrich: %s:%d: %s: %q\n", w.unit.Name(), r.Line, r.Reason, r.Record)
		return fault.IO.Wrap(err)
	}
	return w.rejects.add(w.unit.ID, r)
}

// rejectsPlace is where records that have no row can be found.
func (w *work) rejectsPlace() string {
	if w.rejects == nil {
		return "standard error"
	}
	return w.unit.Output + rejectsSuffix
}

// rejects writes the sidecar of records that have no row, made when the first
// of them comes.
type rejects struct {
	create func() (table.Output, error)
	out    table.Output
	text   bytes.Buffer
	csv    *csv.Writer
}

// rejectsHeader names the sidecar's columns.
var rejectsHeader = []string{"file", "line", "byte_offset", "reason", "record"}

func (r *rejects) add(unit string, reject *table.Reject) error {
	if r.out == nil {
		out, err := r.create()
		if err != nil {
			return err
		}
		r.out, r.csv = out, csv.NewWriter(&r.text)
		r.csv.Write(rejectsHeader)
	}
	r.csv.Write([]string{unit, strconv.FormatInt(reject.Line, 10), strconv.FormatInt(reject.Offset, 10), reject.Reason, string(reject.Record)})
	r.csv.Flush()
	if err := r.csv.Error(); err != nil {
		return err
	}
	_, err := r.out.Write(r.text.Bytes())
	r.text.Reset()
	return err
}
