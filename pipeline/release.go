package pipeline

import (
	"bytes"
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

// retractReport removes the report before the first output changes: none ever
// stands beside outputs that it does not speak of.
func (r *runner) retractReport() (err error) {
	r.retracted.Do(func() {
		if path := r.plan.ReportPath(); path != "" {
			err = publish.Retract(r.options.FS, path, report.Ours)
		}
	})
	return err
}

// report makes the report of the run's units. Of a run in which nothing came
// about it makes one only in the place of an earlier report.
func (r *runner) report(outcomes []Outcome, s *Summary) error {
	path := r.reportPath()
	if path == "" {
		return nil
	}
	var b report.Builder
	finished := false
	for i := range outcomes {
		o := &outcomes[i]
		if o.Result == Failed {
			b.Miss(o.Unit.ID, "the run could not finish it")
			continue
		}
		m, err := r.manifestOf(o.Unit)
		if err != nil {
			return err
		}
		if err := b.Add(m); err != nil {
			return err
		}
		finished = true
	}
	if _, err := r.options.FS.Lstat(path); !finished && errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	release, err := b.Release()
	if err != nil {
		return err
	}
	s.Report, s.Verdict = path, release.Headline(r.options.Previous)
	return PutReport(r.options.FS, path, release, r.options.Previous, r.options.Replace)
}

// manifestOf reads the manifest of a finished unit.
func (r *runner) manifestOf(u *Unit) (*ledger.Manifest, error) {
	state, err := publish.Look(r.options.FS, u.Output)
	if err != nil {
		return nil, err
	}
	return ledger.Parse(state.Manifest)
}

// ReportOf is where the report of a directory of outputs, of an output or of a
// manifest goes.
func ReportOf(path string) string {
	if info, err := os.Stat(path); err == nil && info.IsDir() {
		return filepath.Join(path, ReportName)
	}
	return strings.TrimSuffix(path, publish.ManifestPath("")) + reportSuffix
}
