// Package pipeline is the run: job → plan → units → chunks through workers, in
// order → publication → manifest.
//
// [NewPlan] decides what is to be done, [Run] does it. A unit (unit.go) is one
// input file, one output file and one manifest; its chunks go through an
// ordered pool (pool.go). Formats come from cmd (format.go), columns from
// pipeline/columns, files from internal/publish, manifests from
// pipeline/ledger.
package pipeline

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"runtime/debug"
	"sync"
	"time"

	"golang.org/x/sync/semaphore"

	"catenrich/internal/publish"
	"catenrich/internal/table"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/report"
)

// Options say how a run is carried out. None of them changes an output byte.
type Options struct {
	Workers   int   // chunks worked on at once; 0 is 1
	Memory    int64 // bytes that chunks may take; 0 is the default for the workers
	Replace   bool  // replace outputs that are not ours
	Wait      bool  // wait for another run's lock, instead of an error
	FullCheck bool  // believe that a unit is up to date only after reading all of it
	NoReport  bool  // make no report

	Previous *report.Release // what the report compares with; may be nil

	Stdin          io.ReadCloser
	Stdout, Stderr io.Writer
	FS             publish.FS // nil is the real one
}

const (
	defaultMemory   = 256 << 20
	memoryPerWorker = 40 << 20
	fixedMemory     = 48 << 20 // program, tables and buffers that do not grow with chunks
	smallUnit       = 4 << 20  // bytes of input that are worth a worker of their own
)

// Run does what the plan says. A unit that fails does not stop the others; the
// error names every one that failed, the first unit's first.
func Run(ctx context.Context, p *Plan, o Options, watch Observer) (*Summary, error) {
	start := time.Now()
	r := newRunner(p, o, watch)
	if err := r.mayRelease(); err != nil {
		return nil, err
	}
	defer r.limitMemory()()
	slots := semaphore.NewWeighted(int64(r.options.Workers))
	outcomes := make([]Outcome, len(p.Units))
	var wg sync.WaitGroup
	for i := range p.Units {
		workers := r.workersFor(&p.Units[i])
		if slots.Acquire(ctx, int64(workers)) != nil {
			break
		}
		wg.Go(func() {
			defer slots.Release(int64(workers))
			outcomes[i] = r.unit(ctx, &p.Units[i], workers)
			watch.Done(&outcomes[i])
		})
	}
	wg.Wait()
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	summary, err := summarize(outcomes, time.Since(start))
	return summary, errors.Join(err, r.conclude(ctx, outcomes, summary))
}

// summarize adds up the outcomes, and joins the errors in unit order.
func summarize(outcomes []Outcome, elapsed time.Duration) (*Summary, error) {
	s := &Summary{Elapsed: elapsed}
	var failed []error
	for i := range outcomes {
		s.add(&outcomes[i])
		if err := outcomes[i].Err; err != nil {
			failed = append(failed, err)
		}
	}
	if len(failed) > 0 && len(outcomes) > 1 {
		failed = append(failed, fmt.Errorf("%d of %d units failed; the others are written", len(failed), len(outcomes)))
	}
	return s, errors.Join(failed...)
}

// runner is what the units of a run share.
type runner struct {
	plan     *Plan
	options  Options
	watch    Observer
	depth    int                 // chunks in flight, for all units together
	long     *semaphore.Weighted // memory for chunks of long records, of longSize bytes
	longSize int64
	scratch  sync.Pool
	batches  sync.Pool
	warned   sync.Once // of a filesystem without locks
	swept    sync.Map  // directories whose abandoned temporaries were removed

	retracting sync.Once // of the report of an earlier run
	retracted  error     // what came of it
}

func newRunner(p *Plan, o Options, watch Observer) *runner {
	o.Workers = max(o.Workers, 1)
	if o.Memory == 0 {
		o.Memory = defaultMemory + memoryPerWorker*int64(max(o.Workers-2, 0))
	}
	if o.FS == nil {
		o.FS = publish.OS
	}
	r := &runner{plan: p, options: o, watch: watch}
	r.scratch.New = func() any { return new(columns.Scratch) }
	r.batches.New = func() any { return new(table.Batch) }
	room := max(o.Memory-fixedMemory, 0)
	r.depth = int(max(min(room/r.chunkMemory(), int64(2*o.Workers)), 1))
	r.options.Workers = min(o.Workers, r.depth) // the others would wait for chunks, or have units that memory has no room for
	r.longSize = max(room, 1)
	r.long = semaphore.NewWeighted(r.longSize)
	return r
}

// chunkMemory estimates what one chunk in flight takes: its bytes, its
// columns, and its part of the output, for the widest format.
func (r *runner) chunkMemory() int64 {
	const (
		rows   = 1 << 16
		perIn  = 16 // decoded value, state, and the decoder's own copy
		perOut = 24 // computed value, encoded value, and its text or page
	)
	return rows*int64(perIn*len(r.plan.Kernel.Needs())+perOut*len(r.plan.Kernel.Added())) + usualChunk
}

// limitMemory tells the garbage collector what the run may take, unless the
// environment has told it already; the returned function takes it back.
func (r *runner) limitMemory() func() {
	if os.Getenv("GOMEMLIMIT") != "" {
		return func() {}
	}
	before := debug.SetMemoryLimit(r.options.Memory)
	return func() { debug.SetMemoryLimit(before) }
}

// workersFor returns how many workers a unit gets: a large unit all of them, a
// small one a single worker, so that many small units are in flight.
func (r *runner) workersFor(u *Unit) int {
	if u.Input == Standard {
		return r.options.Workers
	}
	return int(max(1, min(int64(r.options.Workers), u.Size/smallUnit)))
}

// depthFor returns how many chunks a unit with so many workers may have in
// flight: its share of what memory allows.
func (r *runner) depthFor(workers int) int {
	return max(r.depth*workers/r.options.Workers, 1)
}
