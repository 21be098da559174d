package report

import (
	"fmt"
	"math"
	"strings"

	"catenrich/internal/status"
)

// A level is how grave a finding is.
type level uint8

const (
	holds level = iota // as it should be
	look               // somebody should look before the release is handed over
	stop               // the release should not be handed over
)

// Word is what the page calls the level; the shape beside it says the same.
func (l level) Word() string { return [...]string{"holds", "look", "stop"}[l] }

// A check is one thing that was looked at.
type check struct {
	Level   level
	Name    string // what should hold
	Finding string // what was found
	Rule    string // when it is look, and when stop
}

// The thresholds. They are this program's own judgement, with no source; the
// page states each beside its finding.
const (
	lookWithout     = 0.20  // share of rows without a redshift
	stopWithout     = 0.50  //
	lookMoreWithout = 0.01  // its growth since the previous release
	stopMoreWithout = 0.05  //
	lookMoreMarked  = 0.01  // growth of the share of rows with a status bit
	stopMoreMarked  = 0.10  //
	stopFewerRows   = 0.01  // share of rows lost since the previous release
	lookSigmas      = 3     // of <V/Vmax> from 0.5
	unlikely        = 1e-3  // probability below which a shift of n(z) is no chance
	lookMoved       = 2e-3  // share of rows that must have changed their redshift
	stopDistance    = 0.02  // of the cumulative distributions, where chance is ruled out
	lookMean        = 0.002 // relative change of the mean redshift among as many rows
)

// A verdict is every check and the gravest level.
type verdict struct {
	Level  level
	Checks []check
}

// judge looks at a release, and at the one before it if there is one.
func judge(r, before *Release) verdict {
	var v verdict
	v.add(finished(r), rows(r))
	if len(r.Units) > 0 {
		v.add(reasons(r), without(r))
		v.add(volumes(r)...)
		if before != nil && len(before.Units) > 0 {
			v.add(sameJob(r, before), sameFiles(r, before), fewer(r, before), moreWithout(r, before), moreMarked(r, before), shifted(r, before))
		}
	}
	return v
}

func (v *verdict) add(checks ...check) {
	for _, c := range checks {
		v.Level = max(v.Level, c.Level)
		v.Checks = append(v.Checks, c)
	}
}

// Headline is the answer.
func (v *verdict) Headline() string {
	return [...]string{"Fit to hand over", "Look before handing over", "Do not hand over"}[v.Level]
}

// Reasons are the findings that stand against handing over, the gravest first.
func (v *verdict) Reasons() []check {
	var list []check
	for l := stop; l > holds; l-- {
		for _, c := range v.Checks {
			if c.Level == l {
				list = append(list, c)
			}
		}
	}
	return list
}

// grade is stop or look where a number is beyond a threshold.
func grade(isLook, isStop bool) level {
	switch {
	case isStop:
		return stop
	case isLook:
		return look
	}
	return holds
}

func finished(r *Release) check {
	c := check{Name: "Every file is finished", Rule: "stop if a file is missing, damaged or of another job", Level: grade(false, len(r.Missing) > 0 || len(r.Units) == 0)}
	c.Finding = plural(int64(len(r.Units)), "file") + " of one job"
	if n := len(r.Missing); n > 0 {
		c.Finding = fmt.Sprintf("%s of %s cannot be used; the first is %s: %s", count(int64(n)), plural(int64(n+len(r.Units)), "file"), r.Missing[0].Unit, r.Missing[0].Why)
	} else if len(r.Units) == 0 {
		c.Finding = "no file at all"
	}
	return c
}

func rows(r *Release) check {
	t := &r.Tally
	c := check{Name: "Every row is accounted for", Rule: "look if there are rejects, stop if there are no rows or they do not add up"}
	c.Level = grade(t.Rejects > 0, t.Rows == 0 || r.Input != t.Rows+t.Rejects)
	c.Finding = fmt.Sprintf("%s in = %s out + %s", plural(r.Input, "row"), count(t.Rows), plural(t.Rejects, "reject"))
	switch {
	case r.Input != t.Rows+t.Rejects:
		c.Finding = fmt.Sprintf("%s in, but %s out and %s", plural(r.Input, "row"), count(t.Rows), plural(t.Rejects, "reject"))
	case t.Rejects > 0:
		c.Finding = fmt.Sprintf("%s cannot be split into fields and have no row (see *.rejects.csv); %s", plural(t.Rejects, "record"), c.Finding)
	}
	return c
}

// reasons proves that no cell is empty for no reason.
func reasons(r *Release) check {
	c := check{Name: "Every empty cell has its reason", Rule: "stop if a cell is empty and no status bit says why"}
	cells := int64(0)
	for _, column := range r.Tally.Columns {
		said := int64(0)
		for _, n := range column.Reasons {
			said += n
		}
		if said < column.Nulls {
			c.Level, c.Finding = stop, fmt.Sprintf("%s of %s are empty, and status bits explain %s", plural(column.Nulls, "cell"), column.Name, count(said))
			return c
		}
		cells += column.Nulls
	}
	c.Finding = plural(cells, "empty cell") + ", each with a status bit that says why"
	return c
}

// without is the share of rows that have no redshift to work with.
func without(r *Release) check {
	have, _ := r.redshifts()
	none, total := r.Tally.Rows-have, r.Tally.Rows
	part := float64(none) / float64(max(total, 1))
	c := check{
		Name: "Rows have a usable redshift", Level: grade(part > lookWithout, part > stopWithout),
		Finding: fmt.Sprintf("%s of %s have no redshift (%s)", count(none), plural(total, "row"), share(none, total)),
		Rule:    fmt.Sprintf("look above %.0f %%, stop above %.0f %%", 100*lookWithout, 100*stopWithout),
	}
	if marked := r.Tally.Status[bit(status.Quality)]; marked > 0 {
		c.Finding += fmt.Sprintf("; the survey's own quality mark rules out %s", count(marked))
	}
	return c
}

// bit is the number of a status bit.
func bit(mask int32) int {
	n := 0
	for mask > 1 {
		mask >>= 1
		n++
	}
	return n
}

// A spread is <V/Vmax> of one selection and model.
type spread struct {
	Name        string
	N           int64
	Mean, Sigma float64 // Sigma: expected scatter of the mean, 1/sqrt(12 N)
}

// Away is the distance from 0.5 in units of the expected scatter.
func (s spread) Away() float64 { return (s.Mean - 0.5) / s.Sigma }

// spreads lists <V/Vmax> of every selection that has the column.
func spreads(r *Release) (list []spread) {
	for m := range r.models {
		for i := range r.Settings.Selections {
			column := r.column("v_over_v_max_"+r.Settings.Selections[i].Name, m)
			if column == nil || column.Sum == nil || column.Sum.Count() == 0 {
				continue
			}
			n := column.Sum.Count()
			list = append(list, spread{column.Name, n, column.Sum.Float64() / float64(n), 1 / math.Sqrt(12*float64(n))})
		}
	}
	return list
}

// volumes judges the completeness of selections (Schmidt 1968).
func volumes(r *Release) (list []check) {
	for _, s := range spreads(r) {
		away := s.Away()
		c := check{
			Name: "⟨V/Vmax⟩ is 0.5", Level: grade(math.Abs(away) > lookSigmas, false),
			Finding: fmt.Sprintf("%s: %s, expected 0.5 ± %s for %s: %s σ", s.Name, fixed(s.Mean, 4), fixed(s.Sigma, 4), plural(s.N, "row"), signed(away, 1)),
			Rule:    fmt.Sprintf("look beyond %d σ, σ = 1/√(12 N): a complete, unevolving sample has 0.5", lookSigmas),
		}
		switch {
		case away < -lookSigmas:
			c.Finding += "; objects are missing near the limit, or were fewer or fainter in the past than the job's evolution says"
		case away > lookSigmas:
			c.Finding += "; objects crowd near the limit, or were more or brighter in the past than the job's evolution says"
		}
		list = append(list, c)
	}
	return list
}

func sameJob(r, before *Release) check {
	c := check{Name: "The job is the same as last time", Rule: "look if the config hash differs", Finding: "same config hash"}
	if r.ConfigHash != before.ConfigHash {
		c.Level, c.Finding = look, "the config hash differs; what changed: "+changed(r, before)
	}
	return c
}

func sameFiles(r, before *Release) check {
	c := check{Name: "No file is gone since last time", Rule: "stop if the previous release had a file that this one lacks"}
	have := make(map[string]bool)
	for _, m := range r.Units {
		have[m.ID] = true
	}
	var gone []Unit
	for _, m := range before.Units {
		if !have[m.ID] {
			gone = append(gone, m)
		}
	}
	c.Finding = plural(int64(len(r.Units)), "file") + " now, " + count(int64(len(before.Units))) + " then"
	if len(gone) > 0 {
		c.Level = stop
		c.Finding += fmt.Sprintf("; %s not there any more, the first: %s", plural(int64(len(gone)), "file"), gone[0].ID)
	}
	return c
}

func fewer(r, before *Release) check {
	now, then := r.Tally.Rows, before.Tally.Rows
	lost := float64(then-now) / float64(max(then, 1))
	c := check{
		Name: "No rows were lost since last time", Level: grade(now < then, lost > stopFewerRows),
		Finding: fmt.Sprintf("%s, %s last time (%s)", plural(now, "row"), count(then), change(now-then)),
		Rule:    fmt.Sprintf("look if there are fewer, stop if %.0f %% fewer", 100*stopFewerRows),
	}
	if now < then {
		c.Finding = fmt.Sprintf("%s fewer than last time (%s of them): %s", plural(then-now, "row"), share(then-now, then), c.Finding)
	}
	return c
}

func moreWithout(r, before *Release) check {
	haveNow, _ := r.redshifts()
	haveThen, _ := before.redshifts()
	now, then := r.Tally.Rows-haveNow, before.Tally.Rows-haveThen
	more := float64(now)/float64(max(r.Tally.Rows, 1)) - float64(then)/float64(max(before.Tally.Rows, 1))
	return check{
		Name: "As many rows have a redshift as last time", Level: grade(more > lookMoreWithout, more > stopMoreWithout),
		Finding: fmt.Sprintf("%s of the rows have no redshift, %s last time (%s percentage points): %s with one, were %s", share(now, r.Tally.Rows), share(then, before.Tally.Rows), signed(100*more, 2), plural(haveNow, "row"), count(haveThen)),
		Rule:    fmt.Sprintf("look above +%.0f points, stop above +%.0f", 100*lookMoreWithout, 100*stopMoreWithout),
	}
}

// noRedshift are the bits of rows that have no redshift; without and
// moreWithout judge these.
const noRedshift = status.Missing | status.NotNumber | status.Redshift | status.Quality

// moreMarked judges the status bit whose share of rows grew most.
func moreMarked(r, before *Release) check {
	c := check{
		Name: "Status bits are as rare as last time", Finding: "no bit became more frequent",
		Rule: fmt.Sprintf("look if the share of a bit grew by %.0f percentage point, stop if by %.0f", 100*lookMoreMarked, 100*stopMoreMarked),
	}
	most := 0.0
	for i := range status.Count {
		now, then := r.Tally.Status[i], before.Tally.Status[i]
		grown := float64(now)/float64(max(r.Tally.Rows, 1)) - float64(then)/float64(max(before.Tally.Rows, 1))
		if int32(1)<<i&noRedshift != 0 || grown <= most {
			continue
		}
		most = grown
		c.Finding = fmt.Sprintf("“%s” (bit %d): %s (%s), %s last time (%s)", status.Describe(i), 1<<i, plural(now, "row"), share(now, r.Tally.Rows), count(then), share(then, before.Tally.Rows))
	}
	c.Level = grade(most > lookMoreMarked, most > stopMoreMarked)
	return c
}

// shifted judges whether n(z) moved.
func shifted(r, before *Release) check {
	c := check{
		Name: "n(z) is that of last time",
		Rule: fmt.Sprintf("look if %g %% of the rows must have changed redshift, if chance explains the difference with less than %g, or if the mean of as many rows moved by %g %%; stop if even independent samples would not differ so (same limit) and D is above %g",
			100*lookMoved, unlikely, 100*lookMean, stopDistance),
	}
	s, ok := shiftOf(before, r)
	if !ok {
		c.Level, c.Finding = look, "one of the two has no histogram of redshifts to compare"
		return c
	}
	moved, drift := float64(s.Moved)/float64(s.Now), s.New/s.Old-1
	same := s.Before == s.Now
	c.Level = grade(moved > lookMoved || !same && s.Nested < unlikely || same && math.Abs(drift) > lookMean, s.Independent < unlikely && s.D > stopDistance)
	if s.D == 0 && drift == 0 {
		c.Finding = "the same, bin for bin"
		return c
	}
	var parts []string
	if s.Moved > 0 {
		parts = append(parts, fmt.Sprintf("at least %s (%s) changed redshift, or were exchanged for others", plural(s.Moved, "row"), share(s.Moved, s.Now)))
	}
	if drift == drift {
		parts = append(parts, fmt.Sprintf("the mean redshift is %s, was %s (%s %%)", fixed(s.New, 4), fixed(s.Old, 4), signed(100*drift, 2)))
	}
	if !same && s.Nested < unlikely {
		parts = append(parts, fmt.Sprintf("chance of such a difference if rows were only %s, at random: %s", map[bool]string{true: "added", false: "removed"}[s.Now > s.Before], probability(s.Nested)))
	}
	c.Finding = "n(z): " + strings.Join(parts, "; ")
	return c
}

func probability(p float64) string {
	if p < 1e-6 {
		return "below 10⁻⁶"
	}
	return number(p, 2)
}
