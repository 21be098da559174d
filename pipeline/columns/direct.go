package columns

import (
	"math"

	"catenrich/cosmo"
	"catenrich/cosmo/selection"
	"catenrich/internal/table"
	"catenrich/pipeline/job"
)

// A Model is what columns ask of a cosmology, a span of rows at a time:
// *cosmo.Model answers from its cells, *cosmo.Quadrature by integrals.
type Model interface {
	selection.Model
	HubbleTime() float64   // Gyr
	EventHorizon() float64 // Mpc
	Params() cosmo.Params
	Prepare(q cosmo.Quantity)
	Fill(b *cosmo.Base, q cosmo.Quantity, z []float64)
	LogSlopeE(out []float64, b *cosmo.Base)
	ContactLostSlope(out []float64, b *cosmo.Base)
}

// NewDirect makes the kernel of a job whose models are integrated row by row
// instead of read from cells. It proves what [New] has made, see [Bound.Judge],
// and never makes an output.
func NewDirect(j *job.Job) *Kernel {
	return newKernel(j, func(m *cosmo.Model) Model { return m.Quadrature() }, true)
}

// sizeUses are the quantities that sizes read, whatever the columns.
const sizeUses = cosmo.DC | cosmo.E

// Judge is Run for a kernel of [NewDirect], and returns for each column and
// row the size that an error of the cell is measured against: mostly the size
// of the value, and an absolute one for quantities that cross zero. For a flag
// it is how far, in parts, the flag is from changing. For the status it is nil.
// The slices are the caller's.
func (b *Bound) Judge(batch *table.Batch, s *Scratch) [][]float64 {
	sizes := make([][]float64, len(b.added))
	for i := range sizes[:len(sizes)-1] {
		sizes[i] = make([]float64, batch.Rows)
	}
	s.fit(b)
	s.sizes = sizes
	b.run(batch, s, nil)
	s.sizes = nil
	return sizes
}

// NeedsFile reports whether the ith added column is made with a K-correction
// that cannot be computed, because the file it comes from is not at hand.
func (k *Kernel) NeedsFile(i int) bool {
	o := k.outputs[i]
	lost := func(band int) bool { return k.job.Bands[band].K.Lost() }
	switch e := o.entry; {
	case e.Family == PerBand && e.Terms&kTerm != 0:
		return lost(o.item)
	case e.Family == PerCut:
		return lost(k.cutBands[o.item])
	case e.Family == PerSelection:
		for _, l := range k.job.Selections[o.item].Limits {
			if l.K.Lost() {
				return true
			}
		}
	}
	return false
}

// size fills the sizes of one column for rows lo to hi of the batch.
func (s *Scratch) size(o output, m *model, b *table.Batch, lo, hi int) {
	e, sizes := o.entry, s.sizes[o.at][lo:hi]
	if e.Test != nil {
		e.Size(&s.base, sizes)
		for i, f := range s.blur(e, m, len(sizes)) {
			sizes[i] /= f
		}
		return
	}
	values := b.Out[o.at].Float[lo:hi]
	if o.form == ValueForm {
		copy(sizes, values)
	} else {
		e.Eval(&s.base, sizes)
	}
	switch {
	case e.Size != nil:
		e.Size(&s.base, sizes)
	case e.Unit == Magnitude:
		for i := range sizes {
			sizes[i] = perMag
		}
	}
	for i, f := range s.blur(e, m, len(sizes)) {
		sizes[i] *= f
	}
	if o.form == ErrorForm {
		s.rows.sizeErrors(sizes)
	}
	for i, v := range values {
		sizes[i] = math.Abs(sizes[i])
		relative := o.form == ErrorForm || o.form != ValueForm && e.Unit != Magnitude
		if v = math.Abs(v); relative && !(sizes[i] >= v) {
			sizes[i] = v
		}
	}
}

// perMag is 5/ln 10, the magnitudes in a factor e of distance.
const perMag = 5 / math.Ln10

// blur returns for each row the maximum of D_M up to there over D_M, past the
// equator of a closed model, where it goes back to zero and is known to a part
// of its maximum only; nil if that is nowhere so.
func (s *Scratch) blur(e *Entry, m *model, n int) []float64 {
	if m == nil || math.IsInf(m.antipode, 0) || e.Uses&(cosmo.DM|cosmo.Slope) == 0 {
		return nil
	}
	factors := make([]float64, n)
	for i, dc := range s.base.DC[:n] {
		factors[i] = 1
		if angle := math.Pi * dc / m.antipode; angle > math.Pi/2 {
			factors[i] = 1 / math.Abs(math.Sin(angle))
		}
	}
	return factors
}

// sizeErrors turns sizes of values into those of their errors, which vanish
// where a quantity turns.
func (r *Rows) sizeErrors(sizes []float64) {
	for i, total := range r.sigmas.Total() {
		sizes[i] *= total
	}
}

// redshiftDriftSize is H0 max(1+z, E): the drift is the difference of the two.
func redshiftDriftSize(b *Base, out []float64) {
	for i := range out {
		out[i] = b.Scales.Rate * max(b.X[i], b.E[i])
	}
}

// velocityDriftSize is the same for the velocity drift.
func velocityDriftSize(b *Base, out []float64) {
	for i := range out {
		out[i] = b.Scales.Rate * cosmo.SpeedOfLight * centimetresPerKm * max(1, b.E[i]/b.X[i])
	}
}

// unlike is how far v is from limit, in parts of it.
func unlike(v, limit float64) float64 {
	if math.IsInf(limit, 0) {
		return limit
	}
	return math.Abs(v/limit - 1)
}

// superluminalNowSize and the following are margins of flags.
func superluminalNowSize(b *Base, out []float64) {
	for i := range out {
		out[i] = unlike(b.DC[i], 1)
	}
}

func superluminalAtEmissionSize(b *Base, out []float64) {
	for i := range out {
		out[i] = unlike(b.E[i]*b.DC[i]/b.X[i], 1)
	}
}

func beyondHorizonSize(b *Base, out []float64) {
	for i := range out {
		out[i] = unlike(b.DC[i], b.Scales.Horizon)
	}
}

// cutSize measures the absolute magnitude only: the redshift is not computed.
func cutSize(b *Base, out []float64) {
	limit := b.job.Cuts[b.item].BrighterThan
	for i, v := range b.absoluteOf(b.cutBands[b.item]) {
		out[i] = math.Abs(v-limit) / perMag
	}
}

// rootSize is what an error of a root of w(z) = limit is measured against: z,
// or more where w is so flat that a magnitude is a long way.
func (b *Base) rootSize(i int, z float64) float64 {
	r, size := b.Rows, z
	distance := b.model.At(cosmo.Slope, z) / (b.model.At(cosmo.E, z) * b.model.At(cosmo.DM, z))
	if b.model.At(cosmo.DC, z) > b.model.Antipode() {
		distance = -distance
	}
	q := 1.0
	if r.ObsRatio != nil {
		q = r.ObsRatio[i]
	}
	for _, l := range b.surveyors[b.item].plan.Limits {
		band, template := &r.bands[l.Band], int32(0)
		if band.template != nil && b.Rows.selections[b.item].limits[0].k == nil {
			template = max(band.template[i], 0)
		}
		slope := perMag*(distance+1/(1+z)) + q*l.K.Each[template].Slope(q*(1+z)-1) - band.plan.Evolution.Q
		if wide := perMag / math.Abs(slope); wide > size {
			size = wide
		}
	}
	return size
}

func zMinSize(b *Base, out []float64) {
	for i, z := range b.roots().zMin {
		out[i] = b.rootSize(i, z)
	}
}

func zMaxSize(b *Base, out []float64) {
	for i, z := range b.roots().zMax {
		out[i] = b.rootSize(i, z)
	}
}

// volumeRatio returns what an error of V(z_max) - V(z_min) is measured against,
// over that difference: the volumes themselves, or what the roots leave open.
func (b *Base) volumeRatio(i int) float64 {
	s := b.roots()
	size := 0.0
	for _, z := range []float64{s.zMin[i], s.zMax[i]} {
		if z > 0 {
			dm := b.model.At(cosmo.DM, z)
			element := 4 * math.Pi * dm * dm / b.model.At(cosmo.E, z)
			size = max(size, b.model.At(cosmo.Volume, z), element*b.rootSize(i, z)/3)
		}
	}
	low := 0.0
	if z := s.zMin[i]; z > 0 {
		low = b.model.At(cosmo.Volume, z)
	}
	return size / (b.model.At(cosmo.Volume, s.zMax[i]) - low)
}

// volumeSize is the size of V_max, and of its inverse.
func volumeSize(b *Base, out []float64) {
	for i := range out {
		out[i] *= b.volumeRatio(i)
	}
}

// volumeShareSize is that of V/V_max.
func volumeShareSize(b *Base, out []float64) {
	for i := range out {
		out[i] = b.volumeRatio(i)
	}
}
