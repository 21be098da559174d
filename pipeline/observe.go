package pipeline

import (
	"time"

	"catenrich/internal/table"
	"catenrich/pipeline/ledger"
)

// An Observer is told how a run goes. Its methods may be called from several
// goroutines at once.
type Observer interface {
	// Advance reports rows done, and bytes of input read for them.
	Advance(rows, bytes int64)
	// Done reports the end of a unit, in whatever order units end.
	Done(o *Outcome)
	// Warn reports something the user should know that stops nothing.
	Warn(message string)
}

// What became of a unit.
type Result uint8

const (
	Written  Result = iota
	UpToDate        // its output stands, made by the same job of the same input
	Failed
)

func (r Result) String() string { return [...]string{"written", "up to date", "failed"}[r] }

// An Outcome is what became of one unit.
type Outcome struct {
	Unit    *Unit
	Result  Result
	Err     error // for Failed
	Rows    int64
	Rejects int64
	Size    int64              // bytes of output
	Bits    ledger.Bits        // rows by status bit
	Nulls   int64              // rows with any status bit
	Cells   []*table.CellError // the first few cells that could not be read
	First   *table.Reject      // the first record that has no row
	Elapsed time.Duration
}

// count takes over what a tally counted.
func (o *Outcome) count(t *ledger.Tally) {
	o.Rows, o.Rejects, o.Bits, o.Nulls = t.Rows, t.Rejects, t.Status, t.Flagged
}

// A Summary adds up a run.
type Summary struct {
	Units, Written, UpToDate, Failed int
	Rows, Rejects, Nulls, Size       int64
	Bits                             ledger.Bits
	Elapsed                          time.Duration

	Report, Verdict string // where the report is and what it says; "" without one
}

// add counts one outcome.
func (s *Summary) add(o *Outcome) {
	s.Units++
	switch o.Result {
	case Written:
		s.Written++
	case UpToDate:
		s.UpToDate++
	case Failed:
		s.Failed++
		return
	}
	s.Rows += o.Rows
	s.Rejects += o.Rejects
	s.Nulls += o.Nulls
	s.Size += o.Size
	s.Bits.Merge(&o.Bits)
}
