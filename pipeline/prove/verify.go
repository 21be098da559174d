package prove

import (
	"context"
	"fmt"
	"runtime/debug"
	"time"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
	"catenrich/pipeline/ledger"
)

// A Result is how a check ended.
type Result string

const (
	Passed  Result = "passed"
	Failed  Result = "failed"
	Skipped Result = "not done" // nothing is wrong, but this was not looked at
)

// A Check is one thing that was looked at.
type Check struct {
	Name   string `json:"check"`
	Result Result `json:"result"`
	Detail string `json:"detail"`
}

// A Report is what verifying one output found.
type Report struct {
	Output     string     `json:"output"`
	Whole      bool       `json:"whole"` // no check failed
	ConfigHash string     `json:"config_hash"`
	Checks     []Check    `json:"checks"`
	Rows       int64      `json:"rows"`
	Recomputed int64      `json:"rows_recomputed"`
	Wrong      int64      `json:"cells_wrong"`
	Mismatches []Mismatch `json:"mismatches"`     // the first of them
	NotDone    []string   `json:"not_recomputed"` // columns whose files are not at hand
	Digested   int64      `json:"bytes_digested"`
	Rate       float64    `json:"gigabytes_per_second"` // of digesting
	Seconds    float64    `json:"seconds"`
}

// note adds a check.
func (r *Report) note(name string, result Result, format string, args ...any) {
	r.Checks = append(r.Checks, Check{name, result, fmt.Sprintf(format, args...)})
	r.Whole = r.Whole && result != Failed
}

// judge adds a check that failed if err is not nil, and says whether it passed.
func (r *Report) judge(name string, err error, format string, args ...any) bool {
	if err != nil {
		r.note(name, Failed, "%v", err)
		return false
	}
	r.note(name, Passed, format, args...)
	return true
}

// Err is nil for a whole output, else a fault.Data that says what is wrong
// with it.
func (r *Report) Err() error {
	if r.Whole {
		return nil
	}
	for _, c := range r.Checks {
		if c.Result == Failed {
			return fault.Data.Errorf("%s: not proven: %s: %s", r.Output, c.Name, c.Detail)
		}
	}
	return fault.Data.Errorf("%s: not proven", r.Output)
}

// Verify looks at one output. What is wrong with the output is in the report;
// an error means that it could not be looked at, or that ctx ended.
func (p *Prover) Verify(ctx context.Context, output string) (*Report, error) {
	start := time.Now()
	r := &Report{Output: output, Whole: true, Mismatches: []Mismatch{}, NotDone: []string{}}
	m, err := p.manifest(output)
	if err == nil {
		r.ConfigHash = m.ConfigHash.String()
		r.note("manifest", Passed, "whole: its own digest, the hash of its settings, and its accounts of %d rows", m.Output.Rows)
		err = p.verify(ctx, r, m)
	} else if fault.Of(err) == fault.Data {
		r.note("manifest", Failed, "%v", err)
		err = nil
	}
	r.Seconds = time.Since(start).Seconds()
	return r, err
}

// verify looks at what a whole manifest describes.
func (p *Prover) verify(ctx context.Context, r *Report, m *ledger.Manifest) error {
	if err := checkSidecars(r, m); err != nil {
		return err
	}
	if there, err := p.checkOutput(ctx, r, m); err != nil || !there {
		return err
	}
	if err := p.checkInput(r, m); err != nil {
		return err
	}
	shop, err := p.workshop(r.Output, m)
	if !r.judge("settings", err, "config hash %v, recomputed from them", m.ConfigHash) {
		return ctx.Err()
	}
	err = guard(func() error { return p.checkRows(ctx, r, m, shop) })
	if ctx.Err() != nil {
		return ctx.Err()
	}
	if err != nil {
		r.note("rows", Failed, "%v", err)
	}
	return nil
}

// manifest reads the manifest of an output; a fault.Data if it is no good.
func (p *Prover) manifest(output string) (*ledger.Manifest, error) {
	state, err := publish.Look(publish.OS, output)
	switch {
	case err != nil:
		return nil, err
	case state.Manifest == nil && state.Pending:
		return nil, fault.Data.Errorf("its publication was interrupted: run the job again to finish it")
	case state.Manifest == nil:
		return nil, fault.Data.Errorf("there is none (%s)", publish.ManifestPath(output))
	case state.Pending:
		return nil, fault.Data.Errorf("a newer publication was interrupted: run the job again to finish it")
	}
	return ledger.Parse(state.Manifest)
}

// guard turns a panic, which settings or a file made for harm may cause, into
// an error.
func guard(f func() error) (err error) {
	defer func() {
		if p := recover(); p != nil {
			err = fault.Internal.Errorf("internal error (please report it): %v\n%s", p, debug.Stack())
		}
	}()
	return f()
}
