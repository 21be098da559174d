package pipeline

import (
	"bytes"
	"context"
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"strings"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
	"catenrich/pipeline/ledger"
	"catenrich/pipeline/report"
)

// ReportName is the report of a directory of outputs, below it.
const ReportName = "report.html"

// reportSuffix ends the name of a report of one output.
const reportSuffix = ".report.html"

// ReportPath is where [Run] puts the report; "" for a job whose output is one
// named file or a stream, which gets a report only when somebody asks for it.
func (p *Plan) ReportPath() string {
	if p.Job.File != "" || p.Job.Directory == "" {
		return ""
	}
	dir := p.Job.Directory
	if !filepath.IsAbs(dir) {
		dir = filepath.Join(p.Job.Base, dir)
	}
	return filepath.Join(dir, ReportName)
}

// isReport reports whether a path is called as reports are.
func isReport(path string) bool {
	base := strings.ToLower(filepath.Base(path))
	return base == ReportName || strings.HasSuffix(base, reportSuffix)
}

// PutReport writes the report of a release to path, whole or not at all. What
// stands there is replaced if it is an earlier report of ours.
func PutReport(fsys publish.FS, path string, r, previous *report.Release, replace bool) error {
	var page bytes.Buffer
	if err := report.Write(&page, r, previous); err != nil {
		return fault.Internal.Wrap(err)
	}
	return publish.Put(fsys, path, page.Bytes(), report.Ours, replace)
}

// reportPath is where this run puts its report, or "".
func (r *runner) reportPath() string {
	if r.options.NoReport {
		return ""
	}
	return r.plan.ReportPath()
}

// mayReport refuses, before any work, a place that the report cannot have.
func (r *runner) mayReport() error {
	path := r.reportPath()
	if path == "" {
		return nil
	}
	for i := range r.plan.Units {
		if u := &r.plan.Units[i]; strings.EqualFold(u.Output, path) {
			return fault.Config.Errorf("%s would be written to %s, which is the place of the report: rename it, or run with --no-report", u.Input, path)
		}
	}
	return publish.MayPut(r.options.FS, path, report.Ours, r.options.Replace)
}

// retract removes report and release manifest before the first output changes:
// none ever stands beside outputs that it does not speak of.
func (r *runner) retract() error {
	r.retracting.Do(func() {
		if path := r.plan.ReportPath(); path != "" {
			r.retracted = publish.Retract(r.options.FS, path, report.Ours)
		}
		if path := r.plan.ReleasePath(); path != "" {
			r.retracted = errors.Join(r.retracted, publish.Retract(r.options.FS, path, ledger.IsRelease))
		}
	})
	return r.retracted
}

// conclude makes the report and the release manifest of the run's units. Where
// a unit failed there is only a report, which says so; of a run in which
// nothing came about, only in the place of an earlier report. A share has not
// seen all units, and makes neither.
func (r *runner) conclude(ctx context.Context, outcomes []Outcome, s *Summary) error {
	if r.plan.ReleasePath() == "" || r.plan.partial {
		return nil
	}
	found, err := r.collect(ctx, func(i int, u *Unit) (*ledger.Manifest, string, error) {
		if outcomes[i].Result == Failed {
			return nil, "the run could not finish it", nil
		}
		return r.manifestOf(u)
	})
	if err != nil {
		return err
	}
	if len(found.undone) == 0 {
		var g Gathering
		err := r.release(found, &g)
		s.Report, s.Verdict = g.Report, g.Verdict
		return err
	}
	if err := publish.Retract(r.options.FS, r.plan.ReleasePath(), ledger.IsRelease); err != nil {
		return err
	}
	path := r.reportPath()
	if path == "" || len(found.undone) == len(outcomes) && !exists(r.options.FS, path) {
		return nil
	}
	release, err := found.builder.Release()
	if err != nil {
		return err
	}
	s.Report, s.Verdict = path, release.Headline(r.options.Previous)
	return PutReport(r.options.FS, path, release, r.options.Previous, r.options.Replace)
}

// manifestOf reads the manifest of a unit that this run has just finished or
// found standing. Another run may have put its own there since.
func (r *runner) manifestOf(u *Unit) (*ledger.Manifest, string, error) {
	text, err := publish.ReadManifest(r.options.FS, u.Output)
	if err != nil {
		return nil, "", err
	}
	m, err := ledger.Parse(text)
	switch {
	case err != nil:
		return nil, "", err
	case m.ConfigHash != r.plan.hash || m.Unit != u.ID:
		return nil, "was replaced by another run", nil
	}
	return m, "", nil
}

// exists reports whether something has the name.
func exists(fsys publish.FS, path string) bool {
	_, err := fsys.Lstat(path)
	return !errors.Is(err, fs.ErrNotExist)
}

// ReportOf is where the report of a directory of outputs, of an output or of a
// manifest goes.
func ReportOf(path string) string {
	if info, err := os.Stat(path); err == nil && info.IsDir() {
		return filepath.Join(path, ReportName)
	}
	return strings.TrimSuffix(path, publish.ManifestPath("")) + reportSuffix
}
