package columns

import (
	"catenrich/cosmo"
	"catenrich/cosmo/frame"
	"catenrich/cosmo/spread"
	"catenrich/internal/exact"
	"catenrich/pipeline/job"
)

// A Base is what the columns of a span of rows share under one model: the
// model's dimensionless quantities (those that some column Uses), and the rows.
// What several columns make of them is computed when the first asks for it.
type Base struct {
	cosmo.Base
	Rows   *Rows
	Scales *Scales

	model     Model
	surveyors []surveyor
	job       *job.Settings
	cutBands  []int
	item      int // member of the family at hand

	angularMemo, luminosityMemo, mpcMemo, modulusMemo, logSlopeMemo memo
	absoluteMemo, sigmaMemo                                         []memo // of each band

	inputs        spread.Inputs // of errors
	partial       spread.Partial
	spare, spare2 []float64
}

// A memo is a slice that is computed once a model and span.
type memo struct {
	buffer []float64
	done   bool
}

func newMemo() memo { return memo{buffer: make([]float64, span)} }

// ask returns the slice, n long, and whether it has been filled; from now on
// it counts as filled.
func (m *memo) ask(n int) (v []float64, filled bool) {
	filled, m.done = m.done, true
	m.buffer = m.buffer[:n]
	return m.buffer, filled
}

func newBase(r *Rows, k *Kernel) Base {
	b := Base{
		Rows: r, job: &k.job.Settings, cutBands: k.cutBands,
		angularMemo: newMemo(), luminosityMemo: newMemo(), mpcMemo: newMemo(), modulusMemo: newMemo(), logSlopeMemo: newMemo(),
		spare: make([]float64, span), spare2: make([]float64, span),
	}
	for range r.bands {
		b.absoluteMemo, b.sigmaMemo = append(b.absoluteMemo, newMemo()), append(b.sigmaMemo, newMemo())
	}
	return b
}

// begin forgets what was computed for another model or span.
func (b *Base) begin(m *model) {
	b.model, b.Scales, b.surveyors = m.Model, &m.scales, m.surveyors
	in := &b.inputs
	in.HubbleDistance, in.HubbleTime, in.H0, in.Antipode = m.scales.Length, m.scales.Time, m.h0, m.antipode
	in.Base, in.ObsRatio, in.FrameRatio = &b.Base, b.Rows.ObsRatio, b.Rows.FrameRatio
	in.Begin()
	b.angularMemo.done, b.luminosityMemo.done, b.mpcMemo.done, b.modulusMemo.done, b.logSlopeMemo.done = false, false, false, false, false
	for i := range b.absoluteMemo {
		b.absoluteMemo[i].done, b.sigmaMemo[i].done = false, false
	}
	for i := range b.Rows.selections {
		b.Rows.selections[i].done, b.Rows.selections[i].shells.done = false, false
	}
}

// band is the band at hand.
func (b *Base) band() *bandRows { return &b.Rows.bands[b.item] }

// angular returns the angular diameter distance in Hubble distances.
func (b *Base) angular() []float64 {
	v, filled := b.angularMemo.ask(len(b.Rows.ZModel))
	if !filled {
		frame.AngularDiameterDistances(v, b.DM, b.Rows.ZModel, b.Rows.ObsRatio, b.Rows.FrameRatio)
	}
	return v
}

// luminosity returns the luminosity distance in Hubble distances.
func (b *Base) luminosity() []float64 {
	v, filled := b.luminosityMemo.ask(len(b.Rows.ZModel))
	if !filled {
		frame.LuminosityDistances(v, b.DM, b.Rows.ZModel, b.Rows.ObsRatio, b.Rows.FrameRatio)
	}
	return v
}

// luminosityMpc returns the luminosity distance in Mpc, or in Mpc/h where that
// is the job's length unit.
func (b *Base) luminosityMpc() []float64 {
	v, filled := b.mpcMemo.ask(len(b.Rows.ZModel))
	if !filled {
		scale(v, b.luminosity(), b.Scales.Mpc)
	}
	return v
}

// kpcPerArcsec fills out with the angular scale.
func (b *Base) kpcPerArcsec(out []float64) { scale(out, b.angular(), b.Scales.PerArcsec) }

// modulus returns the distance modulus, NaN where the luminosity distance is
// zero or negative.
func (b *Base) modulus() []float64 {
	v, filled := b.modulusMemo.ask(len(b.Rows.ZModel))
	if filled {
		return v
	}
	exact.Log10Slice(v, b.luminosity())
	for i, l := range v {
		v[i] = b.Scales.Modulus + float64(5*l)
	}
	return v
}

// absolute returns the absolute magnitudes of the band at hand.
func (b *Base) absolute() []float64 { return b.absoluteOf(b.item) }

// absoluteOf returns the absolute magnitudes of a band, M = m - A - mu - K - e.
func (b *Base) absoluteOf(band int) []float64 {
	v, filled := b.absoluteMemo[band].ask(len(b.Rows.ZModel))
	if filled {
		return v
	}
	r, mu := &b.Rows.bands[band], b.modulus()
	for i := range v {
		v[i] = r.apparent[i] - r.extinction[i] - mu[i] - r.k[i] - r.evolution[i]
	}
	return v
}
