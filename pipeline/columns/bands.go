package columns

import (
	"catenrich/cosmo/photo"
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

	magnitudeTerms = apparentTerm | extinctionTerm | kTerm | evolutionTerm
)

// bandInput is where a band's columns are in Batch.In; -1 where there is none.
type bandInput struct {
	value, extinction, ebv, k, template int
}

// bandRows are the terms of one band for a span of rows.
type bandRows struct {
	plan  *job.BandPlan
	input bandInput
	terms Term
	sun   float64

	apparent, extinction, k, evolution []float64
	template                           []int32
}

func newBandRows(p *job.BandPlan, where func(job.Role) int, terms Term) bandRows {
	part := func(what string) int { return where(job.BandRole(p.Name, what)) }
	b := bandRows{plan: p, terms: terms, input: bandInput{
		value: part(job.PartValue), extinction: part(job.PartExtinction), ebv: where(job.RoleEBV), k: part(job.PartK), template: part(job.PartTemplate),
	}}
	if p.Sun != nil {
		b.sun = *p.Sun
	}
	b.apparent, b.extinction, b.k, b.evolution = make([]float64, span), make([]float64, span), make([]float64, span), make([]float64, span)
	if b.input.template >= 0 {
		b.template = make([]int32, span)
	}
	return b
}

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
	b.plan.K.Fill(b.k, nil, r.ZObs, b.template, r.Status)
}

// valueRows are a line flux, a radio flux density or an angular size.
type valueRows struct {
	at    int
	used  bool
	value []float64
}

// fill points at the values of rows lo to hi.
func (v *valueRows) fill(batch *table.Batch, lo, hi int) {
	if v.used {
		v.value = batch.In[v.at].Float[lo:hi]
	}
}
