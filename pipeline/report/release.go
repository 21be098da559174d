// Package report makes one HTML page of the manifests of a release: may it be
// handed over, and if not, why; then what is in it.
//
// [Load] reads the manifests below a directory, [New] takes those at hand;
// both give a [Release]. [Write] makes the page, against an earlier release if
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
	Units      []*ledger.Manifest // in order of their ids
	Missing    []Missing          // what should be there and is not, or cannot be used
	ConfigHash publish.Digest
	Settings   job.Settings
	Tally      ledger.Tally // of all units
	Input      int64        // rows that went in

	models []*cosmo.Model // one for each cosmology of the settings
}

// Missing is a unit that has no place in the sums, and why.
type Missing struct{ Unit, Why string }

// New adds up the manifests of a release. Those of another job than most are
// listed as missing, since their columns cannot be added to the others.
// Without a usable manifest the release is empty, and unfit.
func New(units []*ledger.Manifest, missing []Missing) (*Release, error) {
	r := &Release{Missing: append([]Missing(nil), missing...)}
	r.ConfigHash = commonHash(units)
	for _, m := range units {
		if m.ConfigHash != r.ConfigHash {
			r.Missing = append(r.Missing, Missing{m.Unit, fmt.Sprintf("was made by another job, of config hash %.12s…", m.ConfigHash)})
			continue
		}
		r.Units = append(r.Units, m)
	}
	sort.SliceStable(r.Units, func(i, j int) bool {
		a, b := r.Units[i], r.Units[j]
		if a.Unit != b.Unit {
			return a.Unit < b.Unit
		}
		return bytes.Compare(a.Output.SHA256[:], b.Output.SHA256[:]) < 0
	})
	sort.Slice(r.Missing, func(i, j int) bool {
		a, b := r.Missing[i], r.Missing[j]
		return a.Unit < b.Unit || a.Unit == b.Unit && a.Why < b.Why
	})
	if len(r.Units) == 0 {
		return r, nil
	}
	for _, m := range r.Units {
		if err := r.Tally.Merge(&m.Tally); err != nil {
			return nil, fault.Data.Wrap(fmt.Errorf("adding up %s: %w", m.Unit, err))
		}
		r.Input += m.Input.Rows
	}
	return r, r.settle()
}

// commonHash is the config hash of most manifests; the first in order of
// several.
func commonHash(units []*ledger.Manifest) (common publish.Digest) {
	counts := make(map[publish.Digest]int)
	for _, m := range units {
		counts[m.ConfigHash]++
	}
	for hash, n := range counts {
		best := counts[common]
		if n > best || n == best && bytes.Compare(hash[:], common[:]) < 0 {
			common = hash
		}
	}
	return common
}

// settle reads the settings and builds the models.
func (r *Release) settle() error {
	if err := json.Unmarshal(r.Units[0].Settings, &r.Settings); err != nil {
		return fault.Data.Wrap(fmt.Errorf("the settings in the manifest of %s: %w", r.Units[0].Unit, err))
	}
	for i := range r.Settings.Cosmologies {
		m, err := cosmo.New(r.Settings.Cosmologies[i].Params())
		if err != nil {
			return fault.Data.Wrap(fmt.Errorf("cosmology %d in the manifest of %s: %w", i+1, r.Units[0].Unit, err))
		}
		r.models = append(r.models, m)
	}
	for i := range r.Settings.Selections {
		s := &r.Settings.Selections[i]
		if len(s.Limits) == 0 || len(s.Redshift) != 2 {
			return fault.Data.Errorf("the selection %q in the manifest of %s has no limits", s.Name, r.Units[0].Unit)
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
func (r *Release) octaves() *ledger.Histogram { return r.Tally.Histograms[columns.RedshiftOctaves] }
