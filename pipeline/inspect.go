package pipeline

import (
	"context"
	"io"
	"runtime"
	"strings"

	"golang.org/x/sync/errgroup"

	"catenrich/internal/publish"
	"catenrich/internal/table"
	"catenrich/pipeline/columns"
)

// An Inspection is what a plan finds out by looking into files. It writes
// nothing.
type Inspection struct {
	Estimates []int64  // bytes of each unit's output, about; -1 is unknown
	States    []string // "up to date", "to write", "blocked" or "not looked at"
	Reasons   []string // why a unit is not up to date
}

// The states of a unit in a plan.
const (
	StateDone    = "up to date"
	StateToDo    = "to write"
	StateBlocked = "blocked"
	StateUnseen  = "not looked at"
)

// maxStates bounds how many units' outputs a plan looks at: each takes a third
// of a millisecond and some twenty requests to the filesystem, and a plan is to
// answer at once. Where there are more, none is looked at: [Gather] does it.
const maxStates = 10_000

// Inspect opens the first input of each format and binds the job to it, so that
// a plan shows what a run would stumble over at once; sends its first chunk
// through the kernel, to see how much larger outputs are; and looks at the
// output of every unit, if there are not too many.
func (p *Plan) Inspect(ctx context.Context) (*Inspection, error) {
	n := len(p.Units)
	in := &Inspection{Estimates: make([]int64, n), States: make([]string, n), Reasons: make([]string, n)}
	r := newRunner(p, Options{}, nil)
	growths := make(map[[2]*Format]float64)
	var states errgroup.Group
	states.SetLimit(lookers * runtime.GOMAXPROCS(0))
	defer states.Wait()
	for i := range p.Units {
		u := &p.Units[i]
		if u.Input == Standard {
			in.Estimates[i], in.States[i], in.Reasons[i] = -1, StateToDo, "comes from standard input"
			continue
		}
		pair := [2]*Format{u.in, u.out}
		growth, seen := growths[pair]
		if !seen {
			var err error
			if growth, err = r.growth(ctx, u); err != nil {
				return nil, err
			}
			growths[pair] = growth
		}
		in.Estimates[i] = int64(growth * float64(u.Size))
		if growth == 0 {
			in.Estimates[i] = -1
		}
		if n > maxStates {
			in.States[i] = StateUnseen
			continue
		}
		states.Go(func() (err error) {
			in.States[i], in.Reasons[i], err = r.state(ctx, u)
			return err
		})
	}
	return in, states.Wait()
}

// state says whether a unit is up to date, and if not, why.
func (r *runner) state(ctx context.Context, u *Unit) (state, why string, err error) {
	if u.Output == Standard {
		return StateToDo, "goes to standard output", nil
	}
	s, err := publish.Look(r.options.FS, u.Output)
	if err != nil {
		return "", "", err
	}
	if s.InTheWay != "" {
		return StateBlocked, s.InTheWay + " (run would want --replace)", nil
	}
	_, why, _, err = r.standing(ctx, u)
	if err != nil || why == "" {
		return StateDone, "", err
	}
	if !strings.HasPrefix(why, "its ") {
		why = "output " + why
	}
	return StateToDo, why, nil
}

// growth is how many times larger than its input the output of a unit is, as
// far as the first chunk tells; 0 where it does not. A job that does not fit
// the input is an error.
func (r *runner) growth(ctx context.Context, u *Unit) (growth float64, err error) {
	src, err := r.open(u)
	if err != nil {
		return 0, err
	}
	defer src.Close()
	w, err := r.prepare(u, src, 1, new(Outcome))
	if err != nil {
		return 0, err
	}
	sampled := guard(func() error {
		growth, err = w.sampleGrowth(ctx)
		return err
	})
	switch {
	case sampled == io.EOF: // no rows
		return 1, nil
	case sampled != nil: // a run will tell of it, with the row
		return 0, nil
	}
	return growth, nil
}

// sampleGrowth makes the output of the first chunk and measures it.
func (w *work) sampleGrowth(ctx context.Context) (float64, error) {
	c, err := w.src.Next(ctx)
	if err != nil {
		return 0, err
	}
	defer w.src.Release(c)
	b := new(table.Batch)
	b.Reset(c.Rows, w.bound.Wants, w.plan.Kernel.Added())
	if err := w.src.Decode(c, b); err != nil {
		return 0, err
	}
	w.bound.Run(b, new(columns.Scratch), w.tallies[0])
	piece, err := w.sink.Encode(c, b)
	if err != nil {
		return 0, err
	}
	made := 0
	for _, part := range piece.Parts {
		made += len(part)
	}
	switch counted, ok := w.src.(interface{ Rows() int64 }); {
	case c.Raw != nil && int(c.Consumed) < len(c.Raw) && made < len(c.Raw): // compressed, before and after
		return float64(made) / float64(max(c.Consumed, 1)), nil
	case c.Raw != nil:
		return float64(made) / float64(max(len(c.Raw), 1)), nil
	case ok && b.Rows > 0: // only new columns were made, to stand behind the whole input
		added := float64(made) / float64(b.Rows) * float64(counted.Rows())
		return 1 + added/float64(max(w.unit.Size, 1)), nil
	}
	return 0, nil
}
