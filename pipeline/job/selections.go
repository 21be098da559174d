package job

import (
	"fmt"
	"math"
	"sort"

	"catenrich/cosmo/photo"
	"catenrich/cosmo/selection"
)

// A SelectionPlan is a selection ready to be computed.
type SelectionPlan struct {
	SelectionSettings
	Limits []LimitPlan
}

// A LimitPlan is one band's part of a selection.
type LimitPlan struct {
	Band int // index into Job.Bands
	K    *photo.Set
	selection.Limits
}

// others resolves lines, radio sources and sizes.
func (r *resolver) others(s *Settings) {
	s.Lines, s.Radios, s.Sizes = []LineSettings{}, []RadioSettings{}, []SizeSettings{}
	seen := make(map[string]bool)
	for i := range r.file.Line {
		l, path := &r.file.Line[i], fmt.Sprintf("line[%d]", i)
		r.named(path, l.Name, seen)
		r.measured(path, "line", l.Name, "flux", l.Flux, "flux_error", l.FluxError, l.Missing)
		s.Lines = append(s.Lines, LineSettings{l.Name, r.positive(path+".flux_scale", value(l.Scale, 1))})
	}
	seen = make(map[string]bool)
	for i := range r.file.Radio {
		l, path := &r.file.Radio[i], fmt.Sprintf("radio[%d]", i)
		r.named(path, l.Name, seen)
		r.measured(path, "radio", l.Name, "flux", l.Flux, "flux_error", l.FluxError, l.Missing)
		unit := map[string]float64{"Jy": 1, "mJy": 1e-3, "microJy": 1e-6}[r.choice(path+".flux_unit", l.FluxUnit, "mJy", "Jy", "mJy", "microJy")]
		s.Radios = append(s.Radios, RadioSettings{l.Name, r.finite(path+".spectral_index", l.SpectralIndex), unit})
	}
	seen = make(map[string]bool)
	for i := range r.file.Size {
		l, path := &r.file.Size[i], fmt.Sprintf("size[%d]", i)
		r.named(path, l.Name, seen)
		r.measured(path, "size", l.Name, "angle", l.Angle, "angle_error", l.Error, l.Missing)
		s.Sizes = append(s.Sizes, SizeSettings{l.Name})
	}
	sort.SliceStable(s.Lines, func(i, j int) bool { return s.Lines[i].Name < s.Lines[j].Name })
	sort.SliceStable(s.Radios, func(i, j int) bool { return s.Radios[i].Name < s.Radios[j].Name })
	sort.SliceStable(s.Sizes, func(i, j int) bool { return s.Sizes[i].Name < s.Sizes[j].Name })
}

// measured records the value and error columns of a line, radio source or size.
func (r *resolver) measured(path, kind, name, valueKey, column, errorKey, errorColumn string, list []any) {
	if column == "" {
		r.fail(path+"."+valueKey, "is not set: name its column")
	}
	missing := r.numbers(path+".missing", list)
	r.role(OtherRole(kind, name, PartValue), path+"."+valueKey, column, missing)
	r.role(OtherRole(kind, name, PartError), path+"."+errorKey, errorColumn, missing)
}

func (r *resolver) positive(path string, v float64) float64 {
	if !(v > 0) || math.IsInf(v, 0) {
		r.fail(path, "is %v, want a positive number", v)
	}
	return v
}

// selections resolves every [[selection]] and [[volume_limited]].
func (r *resolver) selections(s *Settings) {
	seen := make(map[string]bool)
	for i := range r.file.Selection {
		path := fmt.Sprintf("selection[%d]", i)
		r.named(path, r.file.Selection[i].Name, seen)
		r.job.Selections = append(r.job.Selections, r.selection(path, &r.file.Selection[i]))
	}
	sort.SliceStable(r.job.Selections, func(i, j int) bool { return r.job.Selections[i].Name < r.job.Selections[j].Name })
	s.Selections, s.Cuts = []SelectionSettings{}, []CutSettings{}
	for i := range r.job.Selections {
		s.Selections = append(s.Selections, r.job.Selections[i].SelectionSettings)
	}
	cuts := make(map[string]bool)
	for i := range r.file.Cut {
		path := fmt.Sprintf("volume_limited[%d]", i)
		r.named(path, r.file.Cut[i].Name, cuts)
		s.Cuts = append(s.Cuts, r.cut(path, &r.file.Cut[i]))
	}
	sort.SliceStable(s.Cuts, func(i, j int) bool { return s.Cuts[i].Name < s.Cuts[j].Name })
}

func (r *resolver) selection(path string, in *Selection) SelectionPlan {
	p := SelectionPlan{SelectionSettings: SelectionSettings{Name: in.Name, Redshift: r.interval(path+".redshift", in.Redshift), FieldAreas: map[string]float64{}}}
	if len(p.Redshift) == 0 {
		r.fail(path+".redshift", "is not set: give the selection's [lowest, highest] redshift")
		p.Redshift = Numbers{0, 1}
	}
	switch r.choice(path+".limits_on", in.LimitsOn, "", "corrected", "observed") {
	case "":
		r.fail(path+".limits_on", `is not set: say whether the limits are on "corrected" (m - A) or "observed" magnitudes`)
	case "corrected":
		p.Corrected = true
	}
	r.area(path, in, &p)
	r.role(SelectionRole(in.Name, PartCompleteness), path+".completeness", in.Completeness, nil)
	limits := in.Bands
	if in.Band != "" {
		if len(limits) > 0 {
			r.fail(path+".band", "and limit exclude each other")
		}
		limits = []Limit{{Band: in.Band, Faint: in.Faint, Bright: in.Bright, KCorrection: in.KCorrection}}
	}
	if len(limits) == 0 {
		r.fail(path+".band", "is not set: name the band of the limits")
	}
	for i := range limits {
		at := path
		if in.Band == "" {
			at = fmt.Sprintf("%s.limit[%d]", path, i)
		}
		if settings, plan, ok := r.limit(at, in.Name, &limits[i], p.Redshift); ok {
			p.SelectionSettings.Limits = append(p.SelectionSettings.Limits, settings)
			p.Limits = append(p.Limits, plan)
		}
	}
	return p
}

// area resolves the selection's area: one number, or one for each field.
func (r *resolver) area(path string, in *Selection, p *SelectionPlan) {
	check := func(at string, area float64) float64 {
		if err := selection.ValidateArea(in.Name, area); err != nil {
			r.fail(at, "is %v, want square degrees, above 0 and at most 41253, the whole sky", area)
		}
		return area
	}
	switch v := in.Area.(type) {
	case nil:
		r.fail(path+".area", "is not set: give the survey's area in square degrees")
	case string:
		if len(in.FieldAreas) == 0 {
			r.fail(path+".field_areas", "is not set: area names the column of fields, and each field needs its area")
		}
		for field, area := range in.FieldAreas {
			p.FieldAreas[field] = check(path+".field_areas."+field, area)
		}
		r.role(SelectionRole(in.Name, PartField), path+".area", v, nil)
	default:
		area, ok := asNumber(v)
		if !ok {
			area = math.NaN()
		}
		p.Area = check(path+".area", area)
		if len(in.FieldAreas) > 0 {
			r.fail(path+".field_areas", "is set, but area does not name a column of fields")
		}
	}
}

// limit resolves one band's limits.
func (r *resolver) limit(path, name string, in *Limit, redshift Numbers) (s LimitSettings, p LimitPlan, ok bool) {
	if p.Band = r.job.Band(in.Band); p.Band < 0 {
		r.fail(path+".band", "is %q, and no [[band]] has that name", in.Band)
		return s, p, false
	}
	s.Band, p.K = in.Band, r.job.Bands[p.Band].K
	if in.KCorrection != nil {
		s.K = new(KSettings)
		p.K = r.kCorrection(path+".k_correction", in.KCorrection, s.K)
	} else if r.job.Bands[p.Band].BandSettings.K.Kind == "column" {
		r.fail(path+".band", "is %q, whose K-correction is a column and says nothing of other redshifts: give the selection a k_correction of its own", in.Band)
		return s, p, false
	}
	p.Limits = selection.Limits{Bright: math.Inf(-1), Faint: math.Inf(1), Zmin: redshift[0], Zmax: redshift[1]}
	s.Faint = r.magnitudeLimit(path+".faint", LimitRole(name, in.Band, PartFaint), in.Faint, &p.Faint)
	s.Bright = r.magnitudeLimit(path+".bright", LimitRole(name, in.Band, PartBright), in.Bright, &p.Bright)
	if in.Faint == nil && in.Bright == nil {
		r.fail(path+".faint", "is not set: a selection needs a faint or a bright limit")
	}
	if err := p.Limits.Validate(name); err != nil {
		r.fail(path+".faint", "or its neighbours: %v", err)
	}
	return s, p, p.K != nil
}

// magnitudeLimit is a number, or the name of a column.
func (r *resolver) magnitudeLimit(path string, role Role, v any, limit *float64) *float64 {
	switch v := v.(type) {
	case nil:
		return nil
	case string:
		r.role(role, path, v, nil)
		return nil
	default:
		number, ok := asNumber(v)
		if !ok {
			r.fail(path, "is %v, want a magnitude or the name of a column", v)
		}
		*limit = r.finite(path, number)
		return limit
	}
}

func (r *resolver) cut(path string, in *Cut) CutSettings {
	s := CutSettings{Name: in.Name, Band: in.Band, Redshift: r.interval(path+".redshift", in.Redshift)}
	if len(s.Redshift) == 0 {
		r.fail(path+".redshift", "is not set: give the sample's [lowest, highest] redshift")
	}
	if in.BrighterThan == nil {
		r.fail(path+".brighter_than", "is not set: give the absolute magnitude that limits the sample")
	} else {
		s.BrighterThan = r.finite(path+".brighter_than", *in.BrighterThan)
	}
	if r.job.Band(in.Band) < 0 {
		r.fail(path+".band", "is %q, and no [[band]] has that name", in.Band)
	}
	return s
}
