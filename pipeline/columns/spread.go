package columns

import (
	"math"

	"catenrich/cosmo"
	"catenrich/cosmo/frame"
	"catenrich/cosmo/photo"
	"catenrich/cosmo/spread"
	"catenrich/internal/status"
	"catenrich/internal/table"
	"catenrich/pipeline/job"
)

// A Form is what is asked of a column: its value, its standard error, or an
// end of its interval.
type Form uint8

const (
	ValueForm Form = iota
	ErrorForm
	LowForm
	HighForm
)

// suffix is what the form adds to the column's name.
func (f Form) suffix() string { return [...]string{"", "_error", "_lo", "_hi"}[f] }

// describe is the form's description of a column that is doc.
func (f Form) describe(doc string) string {
	switch f {
	case ErrorForm:
		return "standard error, to first order, of: " + doc + "; it vanishes where the quantity turns"
	case LowForm:
		return "lower end, while the redshift lies between its quantiles, of: " + doc + "; the range, where the quantity turns in between"
	case HighForm:
		return "upper end, while the redshift lies between its quantiles, of: " + doc + "; the range, where the quantity turns in between"
	}
	return doc
}

// A spreadRule says how a column is uncertain.
type spreadRule struct {
	// Uses are the quantities that the error reads, besides those of the value.
	Uses cosmo.Quantity

	// Error fills out with standard errors; nil: the column has none.
	Error func(b *Base, out []float64)

	// Interval says that the column has an interval from redshift quantiles.
	Interval bool

	// Displace gives what turns the column at rest (all redshifts the same, no
	// apparent magnitude) into the row's: a scale, and then a shift. Nil: 1, 0.
	Displace func(b *Base, scale, shift []float64)
}

// linear is the error of a column that comes from the redshift alone.
func linear(uses cosmo.Quantity, partial func(*spread.Inputs, *spread.Partial)) spreadRule {
	return spreadRule{
		Uses: uses | cosmo.E, Interval: true,
		Error: func(b *Base, out []float64) {
			partial(&b.inputs, b.partials(len(out)))
			b.Rows.sigmas.Fill(out, &b.partial)
		},
	}
}

// displaced adds what frames do to a column.
func (s spreadRule) displaced(by func(b *Base, scale, shift []float64)) spreadRule {
	s.Displace = by
	return s
}

// sloped is linear for columns that need the slope of E.
func sloped(uses cosmo.Quantity, partial func(*spread.Inputs, *spread.Partial)) spreadRule {
	rule := linear(uses, partial)
	plain := rule.Error
	rule.Error = func(b *Base, out []float64) {
		b.needLogSlope()
		plain(b, out)
	}
	return rule
}

// distanceUses are what the partials of distances read.
const distanceUses = cosmo.DC | cosmo.DM | cosmo.Slope | cosmo.E

// angularDisplaced is what frames do to an angular diameter distance.
func angularDisplaced(b *Base, scale, _ []float64) {
	for i := range scale {
		scale[i] = b.Rows.FrameRatio[i] / b.Rows.ObsRatio[i]
	}
}

// luminosityDisplaced is what frames do to a luminosity distance.
func luminosityDisplaced(b *Base, scale, _ []float64) {
	for i := range scale {
		scale[i] = b.Rows.FrameRatio[i] * b.Rows.ObsRatio[i]
	}
}

// modulusDisplaced is what frames do to a distance modulus.
func modulusDisplaced(b *Base, _, shift []float64) {
	for i := range shift {
		shift[i] = b.Rows.Shift[i]
	}
}

// contactLostError is the error of the contact-lost age.
func contactLostError(b *Base, out []float64) {
	p := b.partials(len(out))
	b.model.ContactLostSlope(p.Cos, &b.Base)
	p.Alone = true
	scale(p.Cos, p.Cos, b.Scales.Time)
	b.Rows.sigmas.Fill(out, p)
}

// absoluteError is the error of an absolute magnitude: mu, K and e share one
// redshift, so their derivatives are added with signs before squaring.
func absoluteError(b *Base, out []float64) { copy(out, b.sigmaAbsolute()) }

// sigmaAbsolute returns these errors for the band at hand, which those of
// luminosities come from too.
func (b *Base) sigmaAbsolute() []float64 {
	band := b.band()
	v, filled := b.sigmaMemo[b.item].ask(len(b.Rows.ZModel))
	if !filled {
		b.inputs.AbsoluteMagnitude(b.partials(len(v)), band.slopes(), b.Rows.ZObs, band.plan.Evolution)
		b.Rows.sigmas.FillWith(v, &b.partial, band.variance)
	}
	return v
}

func luminosityError(b *Base, out []float64) {
	copy(out, b.sigmaAbsolute())
	values := b.spare[:len(out)]
	photo.Luminosity(values, b.absolute(), b.band().sun)
	spread.Luminosities(out, values, out)
}

func extinctionError(b *Base, out []float64) {
	band := b.band()
	clear(out)
	spread.MagnitudeVariance(out, nil, band.sigmaA, band.plan.PerEBV, band.sigmaEBV)
	for i := range out {
		out[i] = math.Sqrt(out[i])
	}
}

func kError(b *Base, out []float64) {
	spread.Correction(b.partials(len(out)), b.band().slopes(), b.Rows.ZObs)
	b.Rows.sigmas.Fill(out, &b.partial)
}

func evolutionError(b *Base, out []float64) {
	p := b.partials(len(out))
	p.Alone = true
	for i := range p.Cos {
		p.Cos[i] = -b.band().plan.Q * (1 + b.Rows.ZCos[i])
	}
	b.Rows.sigmas.Fill(out, p)
}

// lineError, radioError and sizeError are the errors of what is proportional
// to a measured flux or angle.
func lineError(b *Base, out []float64) {
	lineLuminosity(b, b.spare[:len(out)])
	b.inputs.LineLuminosity(b.partials(len(out)), b.spare, -1, nil)
	b.proportionalError(out, &b.Rows.lines[b.item])
}

func radioError(b *Base, out []float64) {
	radioLuminosity(b, b.spare[:len(out)])
	b.inputs.LineLuminosity(b.partials(len(out)), b.spare, b.job.Radios[b.item].Alpha, nil)
	b.proportionalError(out, &b.Rows.radios[b.item])
}

func sizeError(b *Base, out []float64) {
	physicalSize(b, b.spare[:len(out)])
	b.inputs.Size(b.partials(len(out)), b.spare)
	b.proportionalError(out, &b.Rows.sizes[b.item])
}

// proportionalError fills out from the partials, and from the error of the
// value that the quantity in b.spare is proportional to.
func (b *Base) proportionalError(out []float64, v *valueRows) {
	variance := b.spare2[:len(out)]
	clear(variance)
	if v.sigma != nil {
		spread.Proportional(variance, b.spare, v.value, v.sigma)
	}
	b.Rows.sigmas.FillWith(out, &b.partial, variance)
}

// partials returns the base's partial with n rows.
func (b *Base) partials(n int) *spread.Partial {
	b.partial.Resize(n)
	return &b.partial
}

// needLogSlope computes d ln E/d ln(1+z) once a model and span.
func (b *Base) needLogSlope() {
	v, filled := b.logSlopeMemo.ask(len(b.Rows.ZModel))
	if !filled {
		b.model.LogSlopeE(v, &b.Base)
	}
	b.inputs.LogSlopeE = v
}

// errorInput is where the redshift's error and quantiles are; -1 for none.
type errorInput struct {
	sigma, low, high int
	velocity         bool // sigma is of a velocity
}

func newErrorInput(where func(job.Role) int) errorInput {
	in := errorInput{sigma: where(job.RoleRedshiftError), low: where(job.RoleRedshiftLower), high: where(job.RoleRedshiftUpper)}
	if at := where(job.RoleVelocityError); at >= 0 {
		in.sigma, in.velocity = at, true
	}
	return in
}

// fillSigmas takes the errors of the redshifts of rows lo to hi.
func (r *Rows) fillSigmas(z *redshifter, batch *table.Batch, lo, hi int) {
	s := r.buffers.sigma[:hi-lo]
	z.sigmas(s, batch, r, lo, hi)
	r.sigmas.Set(s, r.ZIn, z.floor, nil)
}

// sigmas fills s with the errors of the redshifts as given, 0 where the
// catalogue has no column of them.
func (z *redshifter) sigmas(s []float64, batch *table.Batch, r *Rows, lo, hi int) {
	if z.errors.sigma < 0 {
		clear(s)
		return
	}
	copy(s, batch.In[z.errors.sigma].Float[lo:hi])
	photo.Nonnegative(s, r.Status)
	if z.errors.velocity {
		v := r.buffers.scratch[:hi-lo]
		scale(v, batch.In[z.at].Float[lo:hi], z.unit)
		scale(s, s, z.unit)
		frame.RedshiftErrors(s, s, v, z.convention)
	}
}

// A rim is one end of the redshift's interval: the rows as they would be if
// their redshift were the quantile, and their base.
type rim struct {
	rows Rows
	base Base
}

func newRim(b *Bound) *rim {
	r := new(rim)
	r.rows.buffers.allocate()
	for i := range b.job.Bands {
		r.rows.bands = append(r.rows.bands, newBandRows(&b.job.Bands[i], b.where, b.bandTerms[i]))
	}
	r.base = newBase(&r.rows, b.Kernel)
	return r
}

// fillRims computes both rims. A quantile that is missing, on the wrong side of
// the redshift, or where the model has no value makes both ends NaN.
func (s *Scratch) fillRims(z *redshifter, batch *table.Batch, lo, hi int) {
	r, n := &s.rows, hi-lo
	low, high := s.low.rows.buffers.zIn[:n], s.high.rows.buffers.zIn[:n]
	copy(low, batch.In[z.errors.low].Float[lo:hi])
	copy(high, batch.In[z.errors.high].Float[lo:hi])
	r.findPaces()
	for i, pace := range r.pace {
		z0, in := r.ZCos[i], r.ZIn[i]
		if !z.models(moved(z0, low[i]-in, pace)) || !z.models(moved(z0, high[i]-in, pace)) {
			low[i] = math.NaN()
		}
	}
	spread.Quantiles(low, r.ZIn, high, r.Status)
	s.low.rows.moveTo(r, low)
	s.high.rows.moveTo(r, high)
}

// findPaces computes how fast z_cos and z_obs move with the redshift as given:
// at fixed position and peculiar velocity, all 1+z are proportional.
func (r *Rows) findPaces() {
	n, b := len(r.ZIn), &r.buffers
	r.pace, r.paceObs = b.pace[:n], b.paceObs[:n]
	for i, z := range r.ZIn {
		r.pace[i], r.paceObs[i] = (1+r.ZCos[i])/(1+z), (1+r.ZObs[i])/(1+z)
	}
}

// moved is a redshift at pace when the redshift as given has moved by d.
func moved(z, d, pace float64) float64 { return z + float64(d*pace) }

// models reports whether the model's columns have values at a redshift.
func (z *redshifter) models(v float64) bool {
	return v <= cosmo.MaxRedshift && (v >= 0 || z.signed && v > cosmo.MinRedshift)
}

// moveTo makes r the rows of o with other redshifts as given.
func (r *Rows) moveTo(o *Rows, z []float64) {
	n, b := len(z), &r.buffers
	r.ZIn, r.ZModel, r.ZObs = z, b.zModel[:n], b.zObs[:n]
	r.ZCos, r.ZFrame = r.ZModel, r.ZModel
	r.Status, r.Toward, r.ObsRatio, r.FrameRatio, r.Shift = o.Status, o.Toward, o.ObsRatio, o.FrameRatio, o.Shift
	for i, v := range z {
		d := v - o.ZIn[i]
		r.ZModel[i], r.ZObs[i] = moved(o.ZCos[i], d, o.pace[i]), moved(o.ZObs[i], d, o.paceObs[i])
	}
	for i := range r.bands {
		r.bands[i].moveTo(r, &o.bands[i])
	}
}

// interval fills one end of a column's interval. The other end comes next, if
// it is asked for, and is computed with it.
func (s *Scratch) interval(o output, m *model, out []float64) {
	n := len(out)
	low, high := s.ends[0][:n], s.ends[1][:n]
	if at := (place{m, o.entry, o.item}); s.intervalOf != at {
		s.intervalOf = at
		s.fillInterval(o, m, low, high)
	}
	if o.form == LowForm {
		copy(out, low)
	} else {
		copy(out, high)
	}
}

// place names a column of a model.
type place struct {
	model *model
	entry *Entry
	item  int
}

// fillInterval fills both ends of a column's interval.
func (s *Scratch) fillInterval(o output, m *model, low, high []float64) {
	n := len(low)
	v := spread.Interval{Zlo: s.low.rows.ZModel, Zhi: s.high.rows.ZModel, Xlo: low, Xhi: high, X: s.ends[2][:n]}
	for i, base := range []*Base{&s.low.base, &s.high.base, &s.base} {
		base.item = o.item
		o.entry.Eval(base, s.ends[i][:n])
	}
	if o.entry.Spread.Displace != nil && (s.rows.ObsRatio != nil || o.entry.Family == PerBand) {
		v.Scale, v.Shift = s.ends[3][:n], s.ends[4][:n]
		for i := range v.Scale {
			v.Scale[i], v.Shift[i] = 1, 0
		}
		o.entry.Spread.Displace(&s.base, v.Scale, v.Shift)
	}
	v.Fill(low, high, m.turns[o.at])
}

// findTurns finds where a column of a model turns, at rest.
func (k *Kernel) findTurns(m *model, o output) spread.Turns {
	var rows Rows
	rows.ZModel = make([]float64, 1)
	rows.ZIn, rows.ZCos, rows.ZObs, rows.ZFrame = rows.ZModel, rows.ZModel, rows.ZModel, rows.ZModel
	rows.Status = make([]int32, 1)
	for i := range k.job.Bands {
		rows.bands = append(rows.bands, restingBand(&k.job.Bands[i]))
	}
	base := newBase(&rows, k)
	base.item = o.item
	out := make([]float64, 1)
	low := 0.0
	if k.job.Settings.Redshift.Signed {
		low = cosmo.MinRedshift
	}
	at := func(path Model, z float64) float64 {
		rows.ZModel[0] = z
		for i := range rows.bands {
			rows.bands[i].rest(z)
		}
		path.Fill(&base.Base, o.entry.Uses, rows.ZModel)
		base.begin(m)
		o.entry.Eval(&base, out)
		return out[0]
	}
	turns := spread.FindTurns(func(z float64) float64 { return at(m.cells, z) }, low, cosmo.MaxRedshift)
	if k.direct { // where it turns moves the value there by nothing: the cells will do
		for i, z := range turns.Z {
			turns.X[i] = at(m.Model, z)
		}
	}
	return turns
}

// blameSpread gives the reason for an error or an interval that is null where
// the row's bits do not: the column itself is null, or has no value at an end
// of the interval.
func (r *Rows) blameSpread(o output, i int) {
	switch {
	case o.form == ErrorForm && r.Status[i]&status.Error != 0:
	case o.form != ErrorForm && r.ZModel[i] == r.ZModel[i]:
		r.Status[i] |= status.Quantiles
	default:
		r.blame(o.entry, i)
	}
}
