package pipeline

import (
	"context"
	"errors"
	"path/filepath"
	"sync"
	"sync/atomic"
	"time"

	"golang.org/x/sync/errgroup"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
	"catenrich/pipeline/job"
	"catenrich/pipeline/ledger"
	"catenrich/pipeline/report"
)

// An Undone unit is one whose output does not stand as the job wants it.
type Undone struct {
	Unit *Unit
	Why  string
}

// A Gathering is what [Gather] found.
type Gathering struct {
	Undone   []Undone // in order of ids; if there are any, nothing was written
	Finished int      // interrupted publications that were brought to their end
	Release  string   // path of the release manifest
	Units    ledger.Units
	Rows     int64
	Rejects  int64
	Report   string // path of the report, "" without one
	Verdict  string
	Elapsed  time.Duration
}

// Gather looks at the outputs of all units, however they came about, and if
// every one stands writes the release manifest and the report: the same bytes
// as a run of the whole job. What is not done is no error, but in the result.
func Gather(ctx context.Context, p *Plan, o Options, watch Observer) (*Gathering, error) {
	start := time.Now()
	r := newRunner(p, o, watch)
	if p.ReleasePath() == "" {
		return nil, fault.Config.Errorf("the job has no output directory, so there is nothing to gather: a run of it is whole by itself (%s)", p.Job.Place("output.directory"))
	}
	if err := r.mayRelease(); err != nil {
		return nil, err
	}
	defer r.limitMemory()()
	g := &Gathering{}
	var recovered atomic.Int64
	found, err := r.collect(ctx, func(_ int, u *Unit) (*ledger.Manifest, string, error) {
		m, why, ended, err := r.settled(ctx, u)
		if ended {
			recovered.Add(1)
		}
		rows := int64(0)
		if m != nil {
			rows = m.Tally.Rows
		}
		watch.Advance(rows, u.Size)
		return m, why, err
	})
	g.Finished = int(recovered.Load())
	if err != nil {
		return nil, err
	}
	if g.Undone = found.undone; len(g.Undone) == 0 {
		err = r.release(found, g)
	}
	g.Elapsed = time.Since(start)
	return g, err
}

// settled is the manifest of a unit whose output stands, or why it does not.
// A publication that a crash interrupted is brought to its end first.
func (r *runner) settled(ctx context.Context, u *Unit) (m *ledger.Manifest, why string, ended bool, err error) {
	if u.Input == Standard {
		return nil, "", false, fault.Config.Errorf("what was read from standard input cannot be looked at again: run the job")
	}
	m, why, pending, err := r.standing(ctx, u)
	if err != nil || !pending {
		return m, why, false, err
	}
	lock, err := r.lock(ctx, u)
	if fault.Of(err) == fault.TryAgain && err != nil {
		return nil, "is being written by another run", false, nil
	}
	if err != nil {
		return nil, "", false, err
	}
	defer lock.Release()
	if _, err := publish.Recover(ctx, r.options.FS, u.Output); err != nil {
		return nil, "", false, err
	}
	m, why, _, err = r.standing(ctx, u)
	return m, why, why == "", err
}

// found is what a look at all units gave.
type found struct {
	builder report.Builder
	totals  ledger.Release // without tally and digest
	selves  []publish.Digest
	undone  []Undone
}

// lookers is how many units are looked at at once for each worker: on a
// filesystem behind a network the time goes to waiting.
const lookers = 4

// block is how many units a looker takes at a time.
const block = 64

// collect calls look for each unit, several at once, and adds up the manifests
// it gives. Memory grows by some dozens of bytes a unit, not by its manifest.
func (r *runner) collect(ctx context.Context, look func(i int, u *Unit) (m *ledger.Manifest, why string, err error)) (*found, error) {
	units := r.plan.Units
	f := &found{selves: make([]publish.Digest, len(units))}
	whys := make([]string, len(units))
	var mu sync.Mutex
	var next atomic.Int64
	group, inner := errgroup.WithContext(ctx)
	for range min(lookers*r.options.Workers, len(units)/block+1) {
		group.Go(func() error {
			var part found
			for inner.Err() == nil {
				first := int(next.Add(block)) - block
				if first >= len(units) {
					break
				}
				for i := first; i < min(first+block, len(units)); i++ {
					m, why, err := look(i, &units[i])
					if err != nil {
						return err
					}
					if whys[i] = why; why != "" {
						continue
					}
					f.selves[i] = m.Self
					if err := part.add(m); err != nil {
						return err
					}
				}
			}
			mu.Lock()
			defer mu.Unlock()
			return f.merge(&part)
		})
	}
	if err := group.Wait(); err != nil {
		return nil, err
	}
	for i, why := range whys {
		if why != "" {
			f.undone = append(f.undone, Undone{&units[i], why})
			f.builder.Miss(units[i].ID, why)
		}
	}
	return f, ctx.Err()
}

func (f *found) add(m *ledger.Manifest) error {
	f.totals.Count(m)
	return f.builder.Add(m)
}

func (f *found) merge(o *found) error {
	f.totals.Input.Merge(o.totals.Input)
	f.totals.Output.Merge(o.totals.Output)
	f.totals.Sidecars.Merge(o.totals.Sidecars)
	return f.builder.Merge(&o.builder)
}

// release writes the report and the release manifest of a job that is done.
func (r *runner) release(f *found, g *Gathering) error {
	if err := r.sweep(filepath.Dir(r.plan.ReleasePath())); err != nil {
		return err
	}
	whole, err := f.builder.Release()
	if err != nil {
		return err
	}
	var digest ledger.UnitsDigest
	for i := range r.plan.Units {
		digest.Add(r.plan.Units[i].ID, f.selves[i])
	}
	m := &f.totals
	m.ConfigHash, m.Settings, m.OutputVersion = r.plan.hash, r.plan.Settings, job.OutputVersion
	m.Units, m.Tally = digest.Units(), whole.Tally
	text, err := ledger.EncodeRelease(m)
	if err != nil {
		return err
	}
	if path := r.reportPath(); path != "" {
		if err := PutReport(r.options.FS, path, whole, r.options.Previous, r.options.Replace); err != nil {
			return err
		}
		g.Report, g.Verdict = path, whole.Headline(r.options.Previous)
	}
	g.Release, g.Units, g.Rows, g.Rejects = r.plan.ReleasePath(), m.Units, m.Tally.Rows, m.Tally.Rejects
	return publish.Put(r.options.FS, g.Release, text, ledger.IsRelease, r.options.Replace)
}

// ReleasePath is where the manifest of all units goes; "" for a job whose
// output is one named file or a stream.
func (p *Plan) ReleasePath() string {
	if report := p.ReportPath(); report != "" {
		return filepath.Join(filepath.Dir(report), ledger.ReleaseName)
	}
	return ""
}

// mayRelease refuses, before any work, places that report and release manifest
// cannot have.
func (r *runner) mayRelease() error {
	path := r.plan.ReleasePath()
	if path == "" || r.plan.partial {
		return nil
	}
	return errors.Join(r.mayReport(), publish.MayPut(r.options.FS, path, ledger.IsRelease, r.options.Replace))
}
