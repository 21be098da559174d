package pipeline

import (
	"context"
	"errors"
	"fmt"
	"path/filepath"
	"strings"
	"time"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
	"catenrich/internal/table"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/job"
	"catenrich/pipeline/ledger"
)

// rejectsSuffix names the sidecar of records that have no row.
const rejectsSuffix = ".rejects.csv"

// maxNotes bounds the bad cells that an outcome tells of.
const maxNotes = 3

// unit does one unit.
func (r *runner) unit(ctx context.Context, u *Unit, workers int) (o Outcome) {
	start := time.Now()
	o.Unit = u
	err := guard(func() error { return r.publishUnit(ctx, u, workers, &o) })
	if err != nil {
		o.Result, o.Err = Failed, err
	}
	o.Elapsed = time.Since(start)
	return o
}

// publishUnit skips a unit that is up to date, or makes its output.
func (r *runner) publishUnit(ctx context.Context, u *Unit, workers int, o *Outcome) error {
	if u.Output == Standard {
		return r.streamUnit(ctx, u, workers, o)
	}
	if done, err := r.upToDate(ctx, u, o); done || err != nil {
		return err
	}
	src, err := r.open(u)
	if err != nil {
		return err
	}
	defer src.Close()
	work, err := r.prepare(u, src, workers, o)
	if err != nil {
		return err
	}
	lock, err := r.lock(ctx, u)
	if err != nil {
		return err
	}
	defer lock.Release()
	if done, err := r.finished(ctx, u, o); done || err != nil {
		return err
	}
	release, err := publish.Begin(r.options.FS, u.Output, publish.Options{Replace: r.options.Replace, Context: ctx})
	if err != nil {
		return err
	}
	defer release.Abort()
	if err := work.into(ctx, release); err != nil {
		return err
	}
	if lock != nil && lock.Warning != nil { // another run may have done the same meanwhile
		if done, err := r.upToDate(ctx, u, o); done || err != nil {
			return err
		}
	}
	if err := r.retract(); err != nil {
		return err
	}
	return release.Commit(work.manifest)
}

// streamUnit writes to standard output: no manifest, no lock, no skipping.
func (r *runner) streamUnit(ctx context.Context, u *Unit, workers int, o *Outcome) error {
	src, err := r.open(u)
	if err != nil {
		return err
	}
	defer src.Close()
	work, err := r.prepare(u, src, workers, o)
	if err != nil {
		return err
	}
	out := publish.NewStream(r.options.Stdout, "standard output")
	err = work.copy(ctx, out)
	info, finishErr := out.Finish()
	o.Size = info.Size
	return errors.Join(err, finishErr)
}

// open opens the unit's input.
func (r *runner) open(u *Unit) (table.Source, error) {
	in := &r.plan.Job.Settings.Input
	if u.Input != Standard {
		return u.in.Open(u.Input, in)
	}
	if u.in.Stream == nil {
		return nil, fault.Config.Errorf("standard input cannot be %s: give a file", u.in.Name)
	}
	return u.in.Stream("standard input", r.options.Stdin, in)
}

// finished ends what a crash interrupted, and reports whether nothing is left
// to do: a pending publication was completed, or another run did the work while
// this one waited for its lock.
func (r *runner) finished(ctx context.Context, u *Unit, o *Outcome) (bool, error) {
	if err := r.sweep(filepath.Dir(u.Output)); err != nil {
		return false, err
	}
	if _, err := publish.Recover(ctx, r.options.FS, u.Output); err != nil {
		return false, err
	}
	return r.upToDate(ctx, u, o)
}

// sweep removes, once a run, what crashed runs left in a directory.
func (r *runner) sweep(dir string) error {
	if _, swept := r.swept.LoadOrStore(dir, true); swept {
		return nil
	}
	return publish.Sweep(r.options.FS, dir)
}

// lock takes the lock of the unit's output: in the directory that all outputs
// of the job share, under the output's path from there.
func (r *runner) lock(ctx context.Context, u *Unit) (*publish.Lock, error) {
	root, name := filepath.Dir(u.Output), filepath.Base(u.Output)
	if r.plan.Job.Directory != "" {
		for range strings.Count(u.ID, "/") {
			root, name = filepath.Dir(root), filepath.Join(filepath.Base(root), name)
		}
	}
	lock, err := publish.Acquire(ctx, root, name, r.options.Wait)
	if err == nil && lock.Warning != nil {
		r.warned.Do(func() { r.watch.Warn(lock.Warning.Error()) })
	}
	return lock, err
}

// work is one unit while it is done.
type work struct {
	*runner
	unit    *Unit
	outcome *Outcome
	src     table.Source
	chunks  *budgeted // src, as copy reads it
	sink    table.Sink
	bound   *columns.Bound
	workers int
	tallies []columns.Tally // one a worker; merged into the first

	rejects  *rejects
	numeric  []numericCheck
	rows     int64
	consumed int64
}

// prepare binds the job to the input's schema and makes the sink.
func (r *runner) prepare(u *Unit, src table.Source, workers int, o *Outcome) (*work, error) {
	w := &work{runner: r, unit: u, outcome: o, src: src, workers: workers}
	var err error
	if w.bound, err = r.plan.Kernel.Bind(src.Schema()); err != nil {
		return nil, err
	}
	if err := src.Select(w.bound.Wants, r.plan.Kernel.Added()); err != nil {
		return nil, err
	}
	newSink, ok := u.out.Sinks[u.in.Name]
	if !ok {
		return nil, fault.Config.Errorf("%s: %s cannot be written as %s", u.Input, u.in.Name, u.out.Name)
	}
	if w.sink, err = newSink(src, u.Output, r.plan.spec()); err != nil {
		return nil, err
	}
	w.numeric = newNumericChecks(src.Schema(), w.bound, r.plan.Kernel.Needs())
	for range workers {
		w.tallies = append(w.tallies, w.plan.Kernel.NewTally())
	}
	return w, nil
}

// into writes output and sidecars of a release.
func (w *work) into(ctx context.Context, release *publish.Release) error {
	out, err := release.Create("")
	if err != nil {
		return err
	}
	if err := w.describe(release); err != nil {
		return err
	}
	w.rejects = &rejects{create: func() (table.Output, error) { return release.Create(rejectsSuffix) }}
	if err := w.copy(ctx, out); err != nil {
		return err
	}
	return w.src.Check()
}

// manifest makes the unit's manifest, once its files are durable.
func (w *work) manifest(files publish.Record) ([]byte, error) {
	m := &ledger.Manifest{
		ConfigHash: w.plan.hash, Settings: w.plan.Settings, OutputVersion: job.OutputVersion, Unit: w.unit.ID, Tally: *w.tallies[0].Tally,
	}
	m.Set(files)
	m.Output.Rows, m.Input.Rows = w.rows, w.rows+w.outcome.Rejects
	size, sum := w.sink.Verbatim()
	if size > 0 {
		m.Verbatim = &ledger.Prefix{Size: size, SHA256: sum}
	}
	if own, digest, ok := w.src.Digest(); ok {
		size, sum = own, digest
	}
	m.Input.FileInfo = publish.FileInfo{Size: size, SHA256: sum}
	if w.unit.Input != Standard {
		var err error
		m.Input.Quick, err = quick(w.unit.Input, size)
		// The digest of what was copied is made behind the copying, and the
		// fingerprint just now: both must be of what was read.
		if changed := w.src.Check(); changed != nil {
			return nil, changed
		}
		if err != nil {
			return nil, err
		}
	}
	return ledger.Encode(m)
}

// copy moves the rows.
func (w *work) copy(ctx context.Context, out table.Output) error {
	if err := w.sink.Begin(out); err != nil {
		return err
	}
	w.chunks = &budgeted{Source: w.src, room: w.long, size: w.longSize}
	chunk := func(worker int, r *result) error { return w.chunk(ctx, worker, r) }
	err := stream(ctx, w.chunks, w.workers, w.depthFor(w.workers), chunk, w.collect)
	w.chunks.end()
	if err != nil {
		return err
	}
	if err := w.finishChecks(); err != nil {
		return err
	}
	if counted, ok := w.src.(interface{ Rows() int64 }); ok && counted.Rows() != w.rows {
		return fault.Internal.Errorf("internal error (please report it): %s says it has %d rows, and %d came out", w.unit.Name(), counted.Rows(), w.rows)
	}
	if err := w.sink.Finish(); err != nil {
		return err
	}
	if s, ok := w.sink.(interface{ Warnings() []string }); ok {
		for _, warning := range s.Warnings() {
			w.watch.Warn(w.unit.Name() + ": " + warning)
		}
	}
	total := w.tallies[0].Tally
	for _, t := range w.tallies[1:] {
		if err := total.Merge(t.Tally); err != nil {
			return err
		}
	}
	total.Rejects = w.outcome.Rejects
	w.outcome.Result, w.outcome.Size = Written, out.Offset()
	w.outcome.count(total)
	return nil
}

// chunk is a worker's part: decode, compute, count, encode. Short records and
// many columns make it long, so it looks at ctx in between.
func (w *work) chunk(ctx context.Context, worker int, r *result) error {
	b := w.batches.Get().(*table.Batch)
	b.Reset(r.chunk.Rows, w.bound.Wants, w.plan.Kernel.Added())
	if err := w.src.Decode(r.chunk, b); err != nil {
		return err
	}
	scratch := w.scratch.Get().(*columns.Scratch)
	w.bound.Run(b, scratch, w.tallies[worker])
	w.scratch.Put(scratch)
	if err := ctx.Err(); err != nil {
		return err
	}
	piece, err := w.sink.Encode(r.chunk, b)
	r.batch, r.piece = b, piece
	return err
}

// collect is the ordered part: rejects, checks, and the output.
func (w *work) collect(r *result) error {
	defer func() {
		w.batches.Put(r.batch)
		w.chunks.Release(r.chunk)
	}()
	r.chunk.FirstRow = w.rows
	for i := range r.batch.Rejects {
		if err := w.reject(&r.batch.Rejects[i]); err != nil {
			return err
		}
	}
	for i := range w.numeric {
		if err := w.numeric[i].see(&r.batch.In[w.numeric[i].at]); err != nil {
			return err
		}
	}
	for i := range r.batch.Cells {
		if len(w.outcome.Cells) < maxNotes {
			cell := r.batch.Cells[i]
			cell.Row += w.rows
			w.outcome.Cells = append(w.outcome.Cells, &cell)
		}
	}
	if err := w.sink.Append(r.piece, r.chunk, r.batch); err != nil {
		return fmt.Errorf("writing rows from %d: %w", w.rows+1, err)
	}
	w.rows += int64(r.batch.Rows)
	w.watch.Advance(int64(r.batch.Rows), max(r.chunk.Consumed-w.consumed, 0))
	w.consumed = max(w.consumed, r.chunk.Consumed)
	return nil
}

// finishChecks are those that need the last row to be through.
func (w *work) finishChecks() error {
	for i := range w.numeric {
		if err := w.numeric[i].end(); err != nil {
			return err
		}
	}
	return nil
}
