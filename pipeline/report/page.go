package report

import (
	"bytes"
	_ "embed"
	"fmt"
	"html/template"
	"io"
)

//go:embed page.html
var pageHTML string

//go:embed page.css
var pageCSS string

// page is the parsed template.
var page = template.Must(template.New("page").Parse(pageHTML))

// view is what the template shows.
type view struct {
	Style    template.CSS
	Title    string
	Subject  string
	Verdict  verdict
	Headline string
	Reasons  []check
	Hash     string

	Previous     bool
	PreviousHash string
	Compare      []comparison
	Shift        []fact // whether n(z) moved

	In, Out, Rejects, Columns string
	Usable, UsableShare       string
	MeanRedshift              string
	Status                    []reason
	Clean                     string

	Models  []modelView
	Charts  []*chart // where rows are, and what the model makes of it
	Sample  []*chart // magnitudes, selections
	Errors  []stripGroup
	Nulls   []nullGroup
	Units   []unitView
	More    string // units that are not listed
	Missing []Missing
}

// comparison is one line of "since the previous release".
type comparison struct{ What, Then, Now, Change string }

// unitView is one file.
type unitView struct {
	Name, Rows, Rejects, Flagged, Digest string
}

// maxUnits bounds how many files the page lists.
const maxUnits = 300

// Write makes the page of a release; before is the previous one, or nil.
func Write(w io.Writer, r, before *Release) error {
	v := newView(r, before)
	var b bytes.Buffer
	if err := page.Execute(&b, v); err != nil {
		return fmt.Errorf("making the report: %w", err)
	}
	_, err := w.Write(seal(b.Bytes()))
	return err
}

// Headline is what the page of a release says at its top.
func (r *Release) Headline(before *Release) string {
	v := judge(r, before)
	return v.Headline()
}

func newView(r, before *Release) *view {
	verdict := judge(r, before)
	v := &view{
		Style: template.CSS(pageCSS), Title: title(r), Subject: subject(r),
		Verdict: verdict, Headline: verdict.Headline(), Reasons: verdict.Reasons(), Missing: r.Missing[:min(len(r.Missing), maxUnits)],
	}
	if len(r.Units) == 0 {
		return v
	}
	t := &r.Tally
	v.Hash = r.ConfigHash.String()
	v.In, v.Out, v.Rejects, v.Columns = count(r.Input), count(t.Rows), count(t.Rejects), count(int64(len(t.Columns)))
	have, _ := r.redshifts()
	v.Usable, v.UsableShare = count(have), share(have, t.Rows)
	if m := mean(r); m == m {
		v.MeanRedshift = number(m, 4)
	}
	v.Status, v.Clean = statusRows(r, before), fmt.Sprintf("%s (%s)", count(t.Rows-t.Flagged), share(t.Rows-t.Flagged, t.Rows))
	v.Models, v.Errors, v.Nulls = modelViews(r), errorStrips(r), nullGroups(r)
	v.charts(r, before)
	v.units(r)
	if before != nil && len(before.Units) > 0 {
		v.Previous, v.PreviousHash, v.Compare = true, before.ConfigHash.String(), compare(r, before)
		v.Shift = shiftFacts(r, before)
	}
	return v
}

func title(r *Release) string {
	if len(r.Units) == 1 {
		return r.Units[0].ID
	}
	return plural(int64(len(r.Units)), "catalogue")
}

// subject says what was judged.
func subject(r *Release) string {
	switch n := len(r.Units); {
	case n == 0:
		return "nothing that could be added up"
	case n > 1:
		return fmt.Sprintf("%s to %s", r.Units[0].ID, r.Units[n-1].ID)
	}
	return ""
}

// charts draws what the release has.
func (v *view) charts(r, before *Release) {
	a := newZAxis(r.octaves())
	if a.ok {
		v.Charts = []*chart{redshiftChart(r, before, &a), modulusChart(r, &a), velocityChart(r, &a)}
		v.Sample = planeCharts(r, &a)
	}
	v.Sample = append(v.Sample, luminosityCharts(r)...)
	v.Sample = append(v.Sample, volumeCharts(r)...)
}

// units lists the files.
func (v *view) units(r *Release) {
	for i := range r.Units {
		if i == maxUnits {
			v.More = plural(int64(len(r.Units)-maxUnits), "more file")
			break
		}
		v.Units = append(v.Units, unitOf(&r.Units[i]))
	}
}

func unitOf(u *Unit) unitView {
	return unitView{Name: u.ID, Rows: count(u.Rows), Rejects: count(u.Rejects), Flagged: share(u.Marked, u.Rows), Digest: u.SHA256.String()}
}

// compare lists what changed since the previous release.
func compare(r, before *Release) []comparison {
	line := func(what string, now, then int64) comparison {
		return comparison{what, count(then), count(now), change(now - then)}
	}
	have, _ := r.redshifts()
	had, _ := before.redshifts()
	list := []comparison{
		line("files", int64(len(r.Units)), int64(len(before.Units))),
		line("rows", r.Tally.Rows, before.Tally.Rows),
		line("rejects", r.Tally.Rejects, before.Tally.Rejects),
		line("rows with a redshift", have, had),
	}
	list = append(list, compareSpreads(r, before)...)
	if then, now := mean(before), mean(r); then == then && now == now {
		list = append(list, comparison{"mean redshift", fixed(then, 5), fixed(now, 5), signed(100*(now/then-1), 3) + space + "%"})
	}
	return list
}

// shiftFacts are the statistics of n(z), then and now.
func shiftFacts(r, before *Release) []fact {
	s, ok := shiftOf(before, r)
	if !ok {
		return nil
	}
	return []fact{
		{"largest distance D of the cumulative distributions", number(s.D, 3)},
		{"chance of such a D if rows were only added or only removed, at random", probability(s.Nested)},
		{"chance of such a D between independent samples", probability(s.Independent)},
		{"rows that must have changed their bin, if rows were only added or only removed", "≥" + space + count(s.Moved)},
	}
}

// compareSpreads compares <V/Vmax> of the selections that both have.
func compareSpreads(r, before *Release) (list []comparison) {
	then := make(map[string]spread)
	for _, s := range spreads(before) {
		then[s.Name] = s
	}
	for _, s := range spreads(r) {
		if old, ok := then[s.Name]; ok {
			list = append(list, comparison{"⟨V/Vmax⟩, " + s.Name, fixed(old.Mean, 4), fixed(s.Mean, 4), signed(s.Mean-old.Mean, 4)})
		}
	}
	return list
}
