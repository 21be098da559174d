package columns

import (
	"math"

	"catenrich/cosmo"
	"catenrich/cosmo/selection"
	"catenrich/internal/table"
	"catenrich/pipeline/job"
)

// selections are the columns of selections and volume-limited samples.
var selections = []Entry{
	{
		Name: "z_min", Group: "selection", Scope: PerModel, Family: PerSelection, UCD: "src.redshift;stat.min",
		Doc:  "lowest cosmological redshift at which the selection would have held the object",
		From: "Schmidt 1968; Felten 1976", Uses: cosmo.DM, Terms: selectionTerm,
		Eval: func(b *Base, out []float64) { copy(out, b.roots().zMin) },
		Size: zMinSize,
	},
	{
		Name: "z_max", Group: "selection", Scope: PerModel, Family: PerSelection, UCD: "src.redshift;stat.max",
		Doc:  "highest cosmological redshift at which the selection would have held the object",
		From: "Schmidt 1968; Felten 1976", Uses: cosmo.DM, Terms: selectionTerm,
		Eval: func(b *Base, out []float64) { copy(out, b.roots().zMax) },
		Size: zMaxSize,
	},
	{
		Name: "v_max", Group: "selection", Scope: PerModel, Family: PerSelection, Unit: Volume, UCD: "phys.volume;stat.max",
		Doc:  "comoving volume in which the selection would have held the object",
		From: "Schmidt 1968; Felten 1976", Uses: cosmo.DM, Terms: selectionTerm,
		Eval: func(b *Base, out []float64) {
			b.volumes(&selection.Volumes{Vmax: out})
			scale(out, out, b.Scales.PerMpc*b.Scales.PerMpc*b.Scales.PerMpc)
		},
		Size: volumeSize,
	},
	{
		Name: "v_over_v_max", Group: "selection", Scope: PerModel, Family: PerSelection, UCD: "phys.volume;arith.ratio",
		Doc:  "the object's own volume over its V_max, both from z_min; evenly spread from 0 to 1 in a complete sample",
		From: "Schmidt 1968", Uses: cosmo.DM, Terms: selectionTerm, Summed: true,
		Eval: func(b *Base, out []float64) { b.volumes(&selection.Volumes{OverVmax: out}) },
		Size: volumeShareSize,
	},
	{
		Name: "vmax_weight", Group: "selection", Scope: PerModel, Family: PerSelection, Unit: PerVolume, UCD: "stat.weight",
		Doc:  "1/(C V_max), the object's share of the space density",
		From: "Felten 1976", Uses: cosmo.DM, Terms: selectionTerm, Summed: true,
		Eval: func(b *Base, out []float64) {
			b.volumes(&selection.Volumes{Weight: out})
			perUnit := 1 / b.Scales.PerMpc
			scale(out, out, perUnit*perUnit*perUnit)
		},
		Size: volumeSize,
	},
	{
		Name: "in", Group: "selection", Scope: PerModel, Family: PerCut, UCD: "meta.code",
		Doc:  "whether the object belongs to the volume-limited sample",
		From: "common practice, no source", Uses: cosmo.DM, Terms: magnitudeTerms,
		Test: func(b *Base, out []uint8) { b.cut(out) },
		Size: cutSize,
	},
}

// A surveyor is a selection under one model.
type surveyor struct {
	plan   *job.SelectionPlan
	limits []*selection.Selection
}

func newSurveyor(p *job.SelectionPlan, m Model, bands []job.BandPlan) surveyor {
	s := surveyor{plan: p}
	for i := range p.Limits {
		l := &p.Limits[i]
		s.limits = append(s.limits, selection.New(m, l.K, bands[l.Band].Evolution, l.Limits))
	}
	return s
}

// selectionRows are a selection's columns of the catalogue for a span of rows,
// and the roots under the model at hand.
type selectionRows struct {
	limits       []limitRows
	completeness int
	field        int
	areas        map[string]float64
	used         bool

	survey     selection.Survey
	area       []float64
	zMin, zMax []float64
	done       bool // for the model at hand
	shells     memo // V_C(z_max) - V_C(z_min)
	inner      []float64
	work       selection.Work
}

// limitRows is one band's part of a selection.
type limitRows struct {
	faint, bright         int
	faintRows, brightRows []float64
	k                     []float64 // where the selection has its own K-correction
	apparent, offset      []float64
	zMin, zMax            []float64
}

func newSelectionRows(p *job.SelectionPlan, bands []job.BandPlan, where func(job.Role) int, used bool) selectionRows {
	s := selectionRows{
		used: used, completeness: where(job.SelectionRole(p.Name, job.PartCompleteness)), field: where(job.SelectionRole(p.Name, job.PartField)),
		areas: p.FieldAreas, zMin: make([]float64, span), zMax: make([]float64, span), area: make([]float64, span), shells: newMemo(), inner: make([]float64, span),
	}
	s.survey.Area = p.Area
	for i := range p.Limits {
		band := bands[p.Limits[i].Band].Name
		l := limitRows{
			faint: where(job.LimitRole(p.Name, band, job.PartFaint)), bright: where(job.LimitRole(p.Name, band, job.PartBright)),
			apparent: make([]float64, span), offset: make([]float64, span), zMin: make([]float64, span), zMax: make([]float64, span),
		}
		if p.SelectionSettings.Limits[i].K != nil {
			l.k = make([]float64, span)
		}
		s.limits = append(s.limits, l)
	}
	return s
}

// fill takes the selection's own columns for rows lo to hi.
func (s *selectionRows) fill(batch *table.Batch, lo, hi int) {
	if !s.used {
		return
	}
	for i := range s.limits {
		l := &s.limits[i]
		l.faintRows, l.brightRows = nil, nil
		if l.faint >= 0 {
			l.faintRows = batch.In[l.faint].Float[lo:hi]
		}
		if l.bright >= 0 {
			l.brightRows = batch.In[l.bright].Float[lo:hi]
		}
	}
	if s.completeness >= 0 {
		s.survey.Completeness = batch.In[s.completeness].Float[lo:hi]
	}
	if s.field < 0 {
		return
	}
	s.area = s.area[:hi-lo]
	for i := range s.area {
		area, ok := s.areas[string(batch.In[s.field].Bytes[lo+i])]
		if !ok {
			area = math.NaN()
		}
		s.area[i] = area
	}
	s.survey.Per = s.area
}

// roots computes z_min and z_max of the selection at hand, once a model.
func (b *Base) roots() *selectionRows {
	s := &b.Rows.selections[b.item]
	if s.done {
		return s
	}
	s.done = true
	n := len(b.Rows.ZModel)
	s.zMin, s.zMax = s.zMin[:n], s.zMax[:n]
	for i := range s.limits {
		zMin, zMax := s.zMin, s.zMax
		if i > 0 {
			zMin, zMax = s.limits[i].zMin[:n], s.limits[i].zMax[:n]
		}
		b.limitRoots(s, i, zMin, zMax)
		if i > 0 {
			selection.Intersect(s.zMin, s.zMax, zMin, zMax)
		}
	}
	return s
}

// limitRoots computes the roots of one band's limits.
func (b *Base) limitRoots(s *selectionRows, i int, zMin, zMax []float64) {
	r := b.Rows
	plan := &b.surveyors[b.item].plan.Limits[i]
	band, l := &r.bands[plan.Band], &s.limits[i]
	n := len(r.ZModel)
	l.apparent, l.offset = l.apparent[:n], l.offset[:n]
	k := band.k
	rows := selection.Rows{
		Z: r.ZModel, Apparent: l.apparent, Offset: l.offset, ObsRatio: r.ObsRatio, Shift: r.Shift,
		Template: band.template, Faint: l.faintRows, Bright: l.brightRows, Work: &s.work,
	}
	if l.k != nil {
		k = l.k[:n]
		plan.K.Fill(k, nil, r.ZObs, nil, r.Status)
		rows.Template = nil
	}
	mu := b.modulus()
	unit := b.Scales.ModulusMpc - b.Scales.Modulus
	for i := range l.apparent {
		l.apparent[i] = band.apparent[i]
		l.offset[i] = mu[i] + unit + k[i] + band.evolution[i]
	}
	if b.surveyors[b.item].plan.Corrected {
		for i := range l.apparent {
			l.apparent[i] -= band.extinction[i]
		}
	}
	b.surveyors[b.item].limits[i].Roots(zMin, zMax, &rows, r.Status)
}

// volumes fills what v asks for.
func (b *Base) volumes(v *selection.Volumes) {
	s := b.roots()
	all, filled := s.shells.ask(len(b.Rows.ZModel))
	inner := s.inner[:len(all)]
	if !filled {
		selection.Shells(inner, all, b.model, s.zMin, s.zMax, &s.work, b.Rows.Status)
	}
	s.survey.Fill(v, b.model.HubbleDistance(), b.Volume, inner, all, b.Rows.Status)
}

// cut fills the flags of a volume-limited sample.
func (b *Base) cut(out []uint8) {
	c := &b.job.Cuts[b.item]
	sample := selection.Cut{Brightest: math.Inf(-1), Faintest: c.BrighterThan, Zmin: c.Redshift[0], Zmax: c.Redshift[1]}
	sample.Flags(out, b.Rows.ZModel, b.absoluteOf(b.cutBands[b.item]))
}
