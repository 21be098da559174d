package columns

import (
	"catenrich/cosmo/photo"
	"catenrich/cosmo/spread"
	"catenrich/internal/table"
	"catenrich/pipeline/job"
)

// A Term is what a column reads of the rows besides their redshifts. Terms
// that no column of the job reads are not computed, and raise no status bit.
type Term uint32

const (
	directionTerm Term = 1 << iota
	apparentTerm
	extinctionTerm
	kTerm
	evolutionTerm
	lineTerm
	radioTerm
	sizeTerm
	selectionTerm
	errorTerm    // standard errors
	quantileTerm // intervals

	magnitudeTerms = apparentTerm | extinctionTerm | kTerm | evolutionTerm
)

// bandInput is where a band's columns are in Batch.In; -1 where there is none.
type bandInput struct {
	value, extinction, ebv, k, template int
	sigmaM, sigmaA, sigmaEBV            int
}

// bandRows are the terms of one band for a span of rows.
type bandRows struct {
	plan  *job.BandPlan
	input bandInput
	terms Term
	sun   float64

	apparent, extinction, k, evolution []float64
	template                           []int32

	// For errors: of the magnitude, the extinction and E(B-V), nil where the
	// catalogue has none; the variance that they make of an absolute magnitude;
	// and dK/dz.
	sigmaM, sigmaA, sigmaEBV, variance, kSlope []float64
}

func newBandRows(p *job.BandPlan, where func(job.Role) int, terms Term) bandRows {
	part := func(what string) int { return where(job.BandRole(p.Name, what)) }
	b := bandRows{plan: p, terms: terms, input: bandInput{
		value: part(job.PartValue), extinction: part(job.PartExtinction), ebv: where(job.RoleEBV), k: part(job.PartK), template: part(job.PartTemplate),
		sigmaM: part(job.PartError), sigmaA: part(job.PartExtinctionError), sigmaEBV: where(job.RoleEBVError),
	}}
	if p.Extinction != "coefficient" {
		b.input.sigmaEBV = -1
	}
	if p.Sun != nil {
		b.sun = *p.Sun
	}
	b.apparent, b.extinction, b.k, b.evolution = make([]float64, span), make([]float64, span), make([]float64, span), make([]float64, span)
	if b.input.template >= 0 {
		b.template = make([]int32, span)
	}
	if terms&errorTerm != 0 {
		b.makeErrors()
	}
	return b
}

// makeErrors makes the memory for errors, of those that the catalogue has.
func (b *bandRows) makeErrors() {
	b.variance = make([]float64, span)
	for _, sigma := range []struct {
		at     int
		buffer *[]float64
	}{{b.input.sigmaM, &b.sigmaM}, {b.input.sigmaA, &b.sigmaA}, {b.input.sigmaEBV, &b.sigmaEBV}} {
		if sigma.at >= 0 {
			*sigma.buffer = make([]float64, span)
		}
	}
	if b.input.k < 0 {
		b.kSlope = make([]float64, span)
	}
}

// slopes is dK/dz, nil for a K-correction that does not know the redshift.
func (b *bandRows) slopes() []float64 { return b.kSlope }

// fill computes the terms of rows lo to hi that some column reads.
func (b *bandRows) fill(batch *table.Batch, r *Rows, lo, hi int) {
	n := hi - lo
	b.apparent, b.extinction, b.k, b.evolution = b.apparent[:n], b.extinction[:n], b.k[:n], b.evolution[:n]
	if b.terms&apparentTerm != 0 {
		b.plan.Photometer.Magnitudes(b.apparent, batch.In[b.input.value].Float[lo:hi], r.Status)
	}
	if b.terms&extinctionTerm != 0 {
		b.fillExtinction(batch, r, lo, hi)
	}
	if b.terms&kTerm != 0 {
		b.fillK(batch, r, lo, hi)
	}
	if b.terms&evolutionTerm != 0 {
		b.plan.Evolution.Fill(b.evolution, r.ZCos)
	}
	if b.terms&errorTerm != 0 {
		b.fillErrors(batch, r, lo, hi)
	}
}

// fillErrors takes the catalogue's errors of the terms that some column reads.
func (b *bandRows) fillErrors(batch *table.Batch, r *Rows, lo, hi int) {
	n := hi - lo
	b.variance = b.variance[:n]
	if b.sigmaM != nil && b.terms&apparentTerm != 0 {
		b.sigmaM = b.sigmaM[:n]
		b.plan.Photometer.Errors(b.sigmaM, batch.In[b.input.value].Float[lo:hi], batch.In[b.input.sigmaM].Float[lo:hi], b.plan.Spread, r.Status)
	}
	for _, sigma := range []struct {
		at     int
		buffer *[]float64
	}{{b.input.sigmaA, &b.sigmaA}, {b.input.sigmaEBV, &b.sigmaEBV}} {
		if *sigma.buffer != nil && b.terms&extinctionTerm != 0 {
			*sigma.buffer = (*sigma.buffer)[:n]
			copy(*sigma.buffer, batch.In[sigma.at].Float[lo:hi])
			photo.Nonnegative(*sigma.buffer, r.Status)
		}
	}
	if b.terms&apparentTerm != 0 {
		spread.MagnitudeVariance(b.variance, b.sigmaM, b.sigmaA, b.plan.PerEBV, b.sigmaEBV)
	}
}

// moveTo makes b the terms of o at the redshifts of r.
func (b *bandRows) moveTo(r *Rows, o *bandRows) {
	n := len(r.ZModel)
	b.apparent, b.extinction, b.template = o.apparent, o.extinction, o.template
	b.k, b.evolution = b.k[:n], b.evolution[:n]
	if b.terms&quantileTerm == 0 {
		return
	}
	if b.input.k >= 0 {
		copy(b.k, o.k)
	} else {
		b.plan.K.Fill(b.k, nil, r.ZObs, b.template, r.Status)
	}
	b.plan.Evolution.Fill(b.evolution, r.ZCos)
}

// restingBand is a band for one row at rest with m - A = 0, which findTurns
// moves. With several templates it follows the first: where their magnitudes
// turn differs little, and nobody reads an interval to that precision.
func restingBand(p *job.BandPlan) bandRows {
	return bandRows{plan: p, apparent: make([]float64, 1), extinction: make([]float64, 1), k: make([]float64, 1), evolution: make([]float64, 1)}
}

// rest moves a resting band to redshift z.
func (b *bandRows) rest(z float64) {
	if b.plan.K != nil {
		b.k[0] = b.plan.K.Each[0].Value(z)
	}
	b.evolution[0] = b.plan.Evolution.At(z)
}

func (b *bandRows) fillExtinction(batch *table.Batch, r *Rows, lo, hi int) {
	switch b.plan.Extinction {
	case "column":
		photo.Given(b.extinction, batch.In[b.input.extinction].Float[lo:hi], r.Status)
	case "coefficient":
		photo.Extinction(b.extinction, b.plan.PerEBV, batch.In[b.input.ebv].Float[lo:hi], r.Status)
	default:
		clear(b.extinction)
	}
}

func (b *bandRows) fillK(batch *table.Batch, r *Rows, lo, hi int) {
	if b.input.k >= 0 {
		photo.Given(b.k, batch.In[b.input.k].Float[lo:hi], r.Status)
		return
	}
	if b.template != nil {
		b.template = b.template[:hi-lo]
		b.plan.K.Templates(b.template, batch.In[b.input.template].Bytes[lo:hi], r.Status)
	}
	if b.kSlope != nil {
		b.kSlope = b.kSlope[:hi-lo]
	}
	b.plan.K.Fill(b.k, b.kSlope, r.ZObs, b.template, r.Status)
}

// valueRows are a line flux, a radio flux density or an angular size.
type valueRows struct {
	at, sigmaAt int
	used        bool
	value       []float64
	sigma       []float64 // nil where no column reads it, or there is none
}

// fill points at the values of rows lo to hi.
func (v *valueRows) fill(batch *table.Batch, r *Rows, lo, hi int) {
	if v.used {
		v.value = batch.In[v.at].Float[lo:hi]
	}
	if v.sigmaAt >= 0 {
		v.sigma = batch.In[v.sigmaAt].Float[lo:hi]
		photo.Nonnegative(v.sigma, r.Status)
	}
}
