// Package report makes one HTML page of the manifests of a release: may it be
// handed over, and if not, why; then what is in it.
//
// [Load] reads the manifests below a directory, a [Builder] takes those at
// hand; both give a [Release]. [Write] makes the page, against an earlier release if
// there is one. What is judged, and by which thresholds, is in verdict.go and
// compare.go; chart.go draws; page.html and page.css are the page.
//
// The page holds no time, host or path: the same manifests give the same
// bytes. It has no script and asks for nothing from the network.
package report

import (
	"bytes"
	"encoding/json"
	"fmt"
	"slices"
	"sort"

	"catenrich/cosmo"
	"catenrich/internal/fault"
	"catenrich/internal/publish"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/job"
	"catenrich/pipeline/ledger"
)

// A Release is the outputs of one job, added up.
type Release struct {
	Units      []Unit    // in order of their ids
	Missing    []Missing // what should be there and is not, or cannot be used
	ConfigHash publish.Digest
	Settings   job.Settings
	Tally      ledger.Tally // of all units
	Input      int64        // rows that went in

	canonical []byte         // the settings as the manifests have them
	models    []*cosmo.Model // one for each cosmology of the settings
}

// A Unit is what the page says of one output.
type Unit struct {
	ID                           string
	Input, Rows, Rejects, Marked int64
	SHA256                       publish.Digest
}

// Missing is a unit that has no place in the sums, and why.
type Missing struct{ Unit, Why string }

// A Builder adds up manifests one by one; it keeps only their sums, so that a
// release may have any number of files. Its zero value is empty.
type Builder struct {
	groups  map[publish.Digest]*Release // by config hash
	missing []Missing
}

// maxGroups bounds how many jobs' sums are held at once.
const maxGroups = 8

// Add adds a manifest.
func (b *Builder) Add(m *ledger.Manifest) error {
	r := b.groups[m.ConfigHash]
	switch {
	case r == nil && len(b.groups) == maxGroups:
		b.Miss(m.Unit, otherJob(m.ConfigHash))
		return nil
	case r == nil:
		r = &Release{ConfigHash: m.ConfigHash, canonical: m.Settings}
		if b.groups == nil {
			b.groups = make(map[publish.Digest]*Release)
		}
		b.groups[m.ConfigHash] = r
	}
	if err := r.Tally.Merge(&m.Tally); err != nil {
		return fault.Data.Wrap(fmt.Errorf("adding up %s: %w", m.Unit, err))
	}
	r.Input += m.Input.Rows
	r.Units = append(r.Units, Unit{m.Unit, m.Input.Rows, m.Tally.Rows, m.Tally.Rejects, m.Tally.Flagged, m.Output.SHA256})
	return nil
}

// Merge adds what another builder added up, which is not to be used after it.
func (b *Builder) Merge(o *Builder) error {
	for hash, from := range o.groups {
		r := b.groups[hash]
		switch {
		case r == nil && len(b.groups) == maxGroups:
			for i := range from.Units {
				b.Miss(from.Units[i].ID, otherJob(hash))
			}
			continue
		case r == nil:
			if b.groups == nil {
				b.groups = make(map[publish.Digest]*Release)
			}
			b.groups[hash] = from
			continue
		}
		if err := r.Tally.Merge(&from.Tally); err != nil {
			return fault.Data.Wrap(fmt.Errorf("adding up %s: %w", from.Units[0].ID, err))
		}
		r.Input += from.Input
		r.Units = append(r.Units, from.Units...)
	}
	b.missing = append(b.missing, o.missing...)
	return nil
}

// Miss notes a unit that should have a manifest and has no usable one.
func (b *Builder) Miss(unit, why string) { b.missing = append(b.missing, Missing{unit, why}) }

func otherJob(hash publish.Digest) string {
	return fmt.Sprintf("was made by another job, of config hash %.12s…", hash.String())
}

// Release is the sum. Units of another job than most are listed as missing,
// since their columns cannot be added to the others. Without a usable manifest
// the release is empty, and unfit.
func (b *Builder) Release() (*Release, error) {
	r := &Release{}
	for _, g := range b.groups {
		if len(g.Units) > len(r.Units) || len(g.Units) == len(r.Units) && bytes.Compare(g.ConfigHash[:], r.ConfigHash[:]) < 0 {
			r = g
		}
	}
	r.Missing = append([]Missing(nil), b.missing...)
	for _, g := range b.groups {
		for i := range g.Units {
			if g != r {
				r.Missing = append(r.Missing, Missing{g.Units[i].ID, otherJob(g.ConfigHash)})
			}
		}
	}
	sort.Slice(r.Units, func(i, j int) bool {
		a, b := &r.Units[i], &r.Units[j]
		return a.ID < b.ID || a.ID == b.ID && bytes.Compare(a.SHA256[:], b.SHA256[:]) < 0
	})
	sort.Slice(r.Missing, func(i, j int) bool {
		a, b := r.Missing[i], r.Missing[j]
		return a.Unit < b.Unit || a.Unit == b.Unit && a.Why < b.Why
	})
	if len(r.Units) == 0 {
		return r, nil
	}
	return r, r.settle()
}

// settle reads the settings and builds the models.
func (r *Release) settle() error {
	if err := json.Unmarshal(r.canonical, &r.Settings); err != nil {
		return fault.Data.Wrap(fmt.Errorf("the settings in the manifest of %s: %w", r.Units[0].ID, err))
	}
	for i := range r.Settings.Cosmologies {
		m, err := cosmo.New(r.Settings.Cosmologies[i].Params())
		if err != nil {
			return fault.Data.Wrap(fmt.Errorf("cosmology %d in the manifest of %s: %w", i+1, r.Units[0].ID, err))
		}
		r.models = append(r.models, m)
	}
	if len(r.models) == 0 {
		return fault.Data.Errorf("the manifest of %s has no cosmology", r.Units[0].ID)
	}
	for i := range r.Settings.Selections {
		s := &r.Settings.Selections[i]
		if len(s.Limits) == 0 || len(s.Redshift) != 2 {
			return fault.Data.Errorf("the selection %q in the manifest of %s has no limits", s.Name, r.Units[0].ID)
		}
	}
	return nil
}

// column finds an added column by its name in the table of columns, for a
// cosmology of the job; nil if the job does not have it.
func (r *Release) column(name string, model int) *ledger.Column {
	full := r.name(name, model)
	for _, c := range r.Tally.Columns {
		if c.Name == full {
			return c
		}
	}
	return nil
}

// name is a column's full name.
func (r *Release) name(name string, model int) string {
	return r.Settings.Prefix + name + r.Settings.Cosmologies[model].Suffix
}

// redshifts returns how many rows have a cosmological redshift, and their sum.
func (r *Release) redshifts() (count int64, sum float64) {
	if s := r.Tally.Sums[columns.RedshiftStatistic]; s != nil {
		return s.Count(), s.Float64()
	}
	if e := r.Tally.Extents[columns.RedshiftStatistic]; e != nil {
		return e.Count(), 0
	}
	return 0, 0
}

// octaves is n(z) over octaves of z; nil where no manifest has it.
func (r *Release) octaves() *ledger.Histogram {
	return r.histogram(columns.RedshiftOctaves, ledger.RedshiftOctaveAxis())
}

// histogram is a statistic over exactly these axes, or nil: what is drawn
// relies on them, and a manifest may hold anything.
func (r *Release) histogram(name string, axes ...ledger.Axis) *ledger.Histogram {
	h := r.Tally.Histograms[name]
	if h == nil || !slices.Equal(h.Axes(), axes) {
		return nil
	}
	return h
}
