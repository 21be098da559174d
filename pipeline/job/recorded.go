package job

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"path/filepath"
	"slices"

	"catenrich/cosmo"
	"catenrich/cosmo/photo"
	"catenrich/cosmo/selection"
	"catenrich/internal/fault"
)

// A LostFile is an SED, bandpass or K table that a job was made with and that
// is not at hand.
type LostFile struct {
	Place  string // band.r, selection.main
	Use    string // sed, bandpass, rest_bandpass, zero_point_sed or table
	SHA256 string
}

// FromSettings makes the job again of which settings were recorded, in the
// canonical JSON of [Settings.Canonical]: all that decides what the columns
// hold, and no inputs or places of outputs. SEDs, bandpasses and K tables are
// known by their SHA-256, in hex; find returns the text of one, or nil. A
// K-correction whose file is lost is photo.Unknown.
//
// Settings that make no job are a fault.Data.
func FromSettings(canonical []byte, find func(sha256 string) []byte, c Catalog) (*Job, []LostFile, error) {
	j := &Job{Place: func(path string) string { return path }, paths: make(map[Role]string)}
	r := &resolver{file: new(File), job: j, find: find}
	if err := r.recorded(canonical, c); err != nil {
		return nil, nil, fault.Data.Errorf("the recorded settings make no job: %w", err)
	}
	return j, r.lost, nil
}

// recorded fills in the job.
func (r *resolver) recorded(canonical []byte, c Catalog) error {
	s := &r.job.Settings
	if err := readSettings(canonical, s); err != nil {
		return err
	}
	for i := range s.Cosmologies {
		m, err := cosmo.New(s.Cosmologies[i].Params())
		if err != nil {
			return err
		}
		r.job.Models = append(r.job.Models, m)
	}
	for i := range s.Bands {
		r.job.Bands = append(r.job.Bands, r.recordedBand(&s.Bands[i]))
	}
	for i := range s.Selections {
		r.job.Selections = append(r.job.Selections, r.recordedSelection(&s.Selections[i]))
	}
	if len(r.wrong) > 0 {
		return errors.Join(r.wrong...)
	}
	names, wrong := c.Expand(s, s.Added)
	if len(wrong) > 0 {
		return errors.Join(wrong...)
	}
	if !slices.Equal(names, s.Added) {
		return errors.New("the added columns are not in the order of the table of columns")
	}
	return nil
}

// readSettings decodes settings, and makes sure that nothing was left out.
func readSettings(canonical []byte, s *Settings) error {
	var version struct {
		OutputVersion int `json:"outputVersion"`
	}
	if err := json.Unmarshal(canonical, &version); err != nil {
		return err
	}
	if version.OutputVersion != OutputVersion {
		return fmt.Errorf("they are of output version %d, and this release is of version %d: use a release of that version", version.OutputVersion, OutputVersion)
	}
	if err := json.Unmarshal(canonical, s); err != nil {
		return err
	}
	again, err := s.Canonical()
	if err != nil {
		return err
	}
	if !bytes.Equal(again, canonical) {
		return errors.New("they hold what this release does not know, or lack what it needs")
	}
	if (s.Catalogue[RoleQuality] == "") != (len(s.Redshift.QualityGood) == 0) {
		return errors.New("the quality column and its good marks go together")
	}
	if (s.Catalogue[RoleRedshiftLower] == "") != (s.Catalogue[RoleRedshiftUpper] == "") {
		return errors.New("the lower and upper redshift go together")
	}
	for i := range s.Cuts {
		if len(s.Cuts[i].Redshift) != 2 || !slices.ContainsFunc(s.Bands, func(b BandSettings) bool { return b.Name == s.Cuts[i].Band }) {
			return fmt.Errorf("the sample %q has no band or no redshift limits", s.Cuts[i].Name)
		}
	}
	return nil
}

func (r *resolver) recordedBand(b *BandSettings) BandPlan {
	path := "band." + b.Name
	p := BandPlan{BandSettings: *b, Evolution: photo.Evolution{Q: b.Q, Z0: b.Z0}}
	var known bool
	p.Photometer = photo.Photometer{Offset: b.Offset, ZeroPoint: b.ZeroPoint, Softening: b.Softening}
	if p.Photometer.Measure, known = measures[b.Measure]; !known {
		r.fail(path, "measures %q", b.Measure)
	}
	if p.Spread, known = spreads[b.ErrorKind]; !known {
		r.fail(path, "has errors of kind %q", b.ErrorKind)
	}
	p.K = r.recordedK(path, &b.K, r.job.Settings.Catalogue[BandRole(b.Name, PartTemplate)])
	return p
}

var (
	measures = map[string]photo.Measure{"magnitude": photo.Magnitude, "flux": photo.Flux, "asinh": photo.Asinh}
	spreads  = map[string]photo.Spread{"": 0, "magnitude": photo.MagnitudeError, "flux": photo.FluxError, "ivar": photo.FluxIvar}
)

// recordedK makes a K-correction; nil for a column.
func (r *resolver) recordedK(path string, s *KSettings, template string) *photo.Set {
	k := &KCorrection{
		Table: s.Files["table"], Template: template, SED: s.Files["sed"], Bandpass: s.Files["bandpass"], RestBandpass: s.Files["rest_bandpass"],
		ZeroPointSED: s.Files["zero_point_sed"], BandpassKind: s.BandpassKind, WavelengthUnit: s.WavelengthUnit, RestBandRedshift: s.RestRedshift,
	}
	switch s.Kind {
	case "none":
		return photo.Single(photo.None{})
	case "column":
		return nil
	case "power_law":
		k.PowerLaw = &s.Alpha
	}
	before := len(r.lost)
	set := r.kCorrection(path, k, new(KSettings))
	if len(r.lost) > before {
		return photo.Single(photo.Unknown{})
	}
	return set
}

func (r *resolver) recordedSelection(s *SelectionSettings) SelectionPlan {
	path := "selection." + s.Name
	p := SelectionPlan{SelectionSettings: *s}
	if len(s.Redshift) != 2 {
		r.fail(path, "has no redshift limits")
		return p
	}
	for i := range s.Limits {
		l := &s.Limits[i]
		plan := LimitPlan{Band: r.job.Band(l.Band), Limits: selection.Limits{
			Bright: value(l.Bright, math.Inf(-1)), Faint: value(l.Faint, math.Inf(1)), Zmin: s.Redshift[0], Zmax: s.Redshift[1],
		}}
		switch {
		case plan.Band < 0:
			r.fail(path, "is in the band %q, which is not there", l.Band)
			continue
		case l.K != nil:
			plan.K = r.recordedK(path, l.K, "")
		default:
			plan.K = r.job.Bands[plan.Band].K
		}
		if err := plan.Validate(s.Name); err != nil || plan.K == nil {
			r.fail(path, "has no limits that can be computed (%v)", err)
		}
		p.Limits = append(p.Limits, plan)
	}
	return p
}

// SideFiles lists the SEDs, bandpasses and K tables that the file names, with
// paths as they are from the working directory.
func (f *File) SideFiles() []string {
	var list []string
	add := func(k *KCorrection) {
		if k == nil {
			return
		}
		for _, name := range []string{k.Table, k.SED, k.Bandpass, k.RestBandpass, k.ZeroPointSED} {
			if name != "" && !filepath.IsAbs(name) {
				name = filepath.Join(filepath.Dir(f.Name), name)
			}
			if name != "" {
				list = append(list, name)
			}
		}
	}
	for i := range f.Band {
		add(f.Band[i].KCorrection)
	}
	for i := range f.Selection {
		add(f.Selection[i].KCorrection)
		for k := range f.Selection[i].Bands {
			add(f.Selection[i].Bands[k].KCorrection)
		}
	}
	return list
}
