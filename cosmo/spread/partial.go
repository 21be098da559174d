package spread

import (
	"math"

	"catenrich/cosmo"
)

// A Partial holds, for each row, the derivatives of a quantity by logarithms of
// 1+z, in the quantity's unit.
type Partial struct {
	Cos  []float64 // by ln(1+z_cos), z_obs and z_frame fixed
	Rest []float64 // by ln(1+z_obs) and ln(1+z_frame) together, z_cos fixed

	// Alone says that the quantity knows z_cos only: Rest is 0, and not filled.
	Alone bool
}

// Resize gives the partial n rows, keeping its memory.
func (p *Partial) Resize(n int) {
	if cap(p.Cos) < n {
		p.Cos, p.Rest = make([]float64, n), make([]float64, n)
	}
	p.Cos, p.Rest, p.Alone = p.Cos[:n], p.Rest[:n], false
}

// Inputs are what partials are made of: a model's scalars, and what a batch
// already knows of its rows. Base must hold X and the quantities that a
// function names.
type Inputs struct {
	HubbleDistance float64 // in the length unit of the columns
	HubbleTime     float64 // Gyr
	H0             float64 // km/s/Mpc
	Antipode       float64 // D_C/D_H, see cosmo.Model.Antipode
	Base           *cosmo.Base

	// ObsRatio is (1+z_obs)/(1+z_cos), FrameRatio (1+z_frame)/(1+z_cos); nil: 1.
	ObsRatio, FrameRatio []float64

	// LogSlopeE is d ln E/d ln(1+z); needed by VolumeElement,
	// VelocityAtEmission, RedshiftDrift and VelocityDrift.
	LogSlopeE []float64

	strides, distances shared
}

// A shared slice is what several partials are made of, computed once a batch.
type shared struct {
	v    []float64
	done bool
}

// ask returns the slice, n long, and whether it has been filled; from now on it
// counts as filled.
func (s *shared) ask(n int) (v []float64, filled bool) {
	if cap(s.v) < n {
		s.v = make([]float64, n)
	}
	filled, s.done = s.done, true
	s.v = s.v[:n]
	return s.v, filled
}

// Begin makes the inputs ready for another batch.
func (n *Inputs) Begin() { n.strides.done, n.distances.done = false, false }

// NewInputs returns the inputs of a model with lengths in Mpc.
func NewInputs(m *cosmo.Model, b *cosmo.Base) *Inputs {
	return &Inputs{HubbleDistance: m.HubbleDistance(), HubbleTime: m.HubbleTime(), H0: m.Params().H0, Antipode: m.Antipode(), Base: b}
}

// slope returns dD_M/dD_C of row i with the sign that |D_M| has past the
// antipode of a closed model. It needs DC and Slope.
func (n *Inputs) slope(i int) float64 {
	if n.Base.DC[i] > n.Antipode {
		return -n.Base.Slope[i]
	}
	return n.Base.Slope[i]
}

// stride returns (1+z)/E, d(D_C/D_H)/d ln(1+z). It needs E.
func (n *Inputs) stride() []float64 {
	e := n.Base.E
	v, filled := n.strides.ask(len(e))
	if !filled {
		x := n.Base.X[:len(v)]
		for i := range v {
			v[i] = x[i] / e[i]
		}
	}
	return v
}

// distance returns d ln D_M/d ln(1+z): Slope (1+z)/(E D_M). It needs DC, DM,
// Slope and E.
func (n *Inputs) distance() []float64 {
	dm := n.Base.DM
	v, filled := n.distances.ask(len(dm))
	if !filled {
		for i, d := range n.stride() {
			v[i] = n.slope(i) * d / dm[i]
		}
	}
	return v
}

// times fills p with v times k, a derivative by ln(1+z_cos) of a quantity that
// does not know the other redshifts.
func (p *Partial) times(v []float64, k float64) {
	p.Alone = true
	v = v[:len(p.Cos)]
	for i := range p.Cos {
		p.Cos[i] = v[i] * k
	}
}

// ComovingDistance: D_H (1+z)/E. Needs E.
func (n *Inputs) ComovingDistance(p *Partial) { p.times(n.stride(), n.HubbleDistance) }

// TransverseDistance: D_H Slope (1+z)/E. Needs DC, Slope, E.
func (n *Inputs) TransverseDistance(p *Partial) {
	p.Alone = true
	for i, d := range n.stride() {
		p.Cos[i] = n.HubbleDistance * n.slope(i) * d
	}
}

// AngularDiameterDistance: D_A = D_M (1+z_frame)/[(1+z_cos)(1+z_obs)], so D_A
// moves with D_M/(1+z_cos) only, the other two cancelling. Needs DC, DM, Slope, E.
func (n *Inputs) AngularDiameterDistance(p *Partial) {
	p.Alone = true
	dm, x := n.Base.DM, n.Base.X
	for i, d := range n.stride() {
		p.Cos[i] = n.HubbleDistance * (float64(n.slope(i)*d) - dm[i]) / x[i]
	}
	if n.ObsRatio != nil {
		for i := range p.Cos {
			p.Cos[i] *= n.FrameRatio[i] / n.ObsRatio[i]
		}
	}
}

// LuminosityDistance: D_L = D_M (1+z_frame)(1+z_obs)/(1+z_cos). Needs DC, DM,
// Slope, E.
func (n *Inputs) LuminosityDistance(p *Partial) {
	dm, x := n.Base.DM, n.Base.X
	for i, d := range n.stride() {
		scale := n.HubbleDistance * x[i] // D_L/D_M
		if n.ObsRatio != nil {
			scale *= n.FrameRatio[i] * n.ObsRatio[i]
		}
		p.Cos[i] = scale * (float64(n.slope(i)*d) - dm[i])
		p.Rest[i] = 2 * scale * dm[i]
	}
}

// DistanceModulus: (5/ln 10) d ln D_L. Needs DC, DM, Slope, E.
func (n *Inputs) DistanceModulus(p *Partial) {
	for i, d := range n.distance() {
		p.Cos[i] = perMag * (d - 1)
		p.Rest[i] = 2 * perMag
	}
}

// perMag is 5/ln 10, the magnitudes in a factor e of distance.
const perMag = 5 / math.Ln10

// EmissionDistance: D_C/(1+z_cos). Needs DC, E.
func (n *Inputs) EmissionDistance(p *Partial) {
	p.Alone = true
	dc, x := n.Base.DC, n.Base.X
	for i, d := range n.stride() {
		p.Cos[i] = n.HubbleDistance * (d - dc[i]) / x[i]
	}
}

// Lookback: t_H/E. Needs E.
func (n *Inputs) Lookback(p *Partial) {
	p.Alone = true
	for i, e := range n.Base.E {
		p.Cos[i] = n.HubbleTime / e
	}
}

// Age: -t_H/E. Needs E.
func (n *Inputs) Age(p *Partial) {
	p.Alone = true
	for i, e := range n.Base.E {
		p.Cos[i] = -n.HubbleTime / e
	}
}

// ContactLost: the age t(z_x) at which D_C(z_x) = D_C(z) - D_EH, so
// dt = -t_H (1+z)/[E (1+z_x)] d ln(1+z). exit is 1+z_x of each row. Needs E.
func (n *Inputs) ContactLost(p *Partial, exit []float64) {
	p.Alone = true
	for i, d := range n.stride() {
		p.Cos[i] = -n.HubbleTime * d / exit[i]
	}
}

// Volume: 4π D_M² D_H (1+z)/E, the whole sky; 0 past the antipode. Needs DC,
// DM, E.
func (n *Inputs) Volume(p *Partial) {
	p.Alone = true
	unit := 4 * math.Pi * n.HubbleDistance * n.HubbleDistance * n.HubbleDistance
	dc, dm := n.Base.DC, n.Base.DM
	for i, d := range n.stride() {
		p.Cos[i] = unit * dm[i] * dm[i] * d
		if dc[i] > n.Antipode {
			p.Cos[i] = 0
		}
	}
}

// VolumeElement: D_H D_M²/E, a steradian and unit z. Needs DC, DM, Slope, E,
// LogSlopeE.
func (n *Inputs) VolumeElement(p *Partial) {
	p.Alone = true
	unit := n.HubbleDistance * n.HubbleDistance * n.HubbleDistance
	dm, e := n.Base.DM, n.Base.E
	for i, d := range n.stride() {
		p.Cos[i] = unit * dm[i] / e[i] * (float64(2*n.slope(i)*d) - float64(dm[i]*n.LogSlopeE[i]))
	}
}

// VelocityNow: c (1+z)/E, in km/s. Needs E.
func (n *Inputs) VelocityNow(p *Partial) { p.times(n.stride(), cosmo.SpeedOfLight) }

// VelocityAtEmission: v = c E D_C/[D_H (1+z)], in km/s. Needs DC, E, LogSlopeE.
func (n *Inputs) VelocityAtEmission(p *Partial) {
	p.Alone = true
	dc := n.Base.DC
	for i, d := range n.stride() {
		p.Cos[i] = cosmo.SpeedOfLight * (1 + float64(dc[i]*(n.LogSlopeE[i]-1)/d))
	}
}

// RedshiftDrift: H0 (1+z - E), in 1/yr. Needs E, LogSlopeE.
func (n *Inputs) RedshiftDrift(p *Partial) {
	p.Alone = true
	perYear := 1e-9 / n.HubbleTime
	x := n.Base.X
	for i, e := range n.Base.E {
		p.Cos[i] = perYear * (x[i] - float64(e*n.LogSlopeE[i]))
	}
}

// VelocityDrift: c H0 (1 - E/(1+z)), in cm/s/yr. Needs E, LogSlopeE.
func (n *Inputs) VelocityDrift(p *Partial) {
	p.Alone = true
	unit := 1e5 * cosmo.SpeedOfLight * 1e-9 / n.HubbleTime
	for i, d := range n.stride() {
		p.Cos[i] = unit * (1 - n.LogSlopeE[i]) / d
	}
}

// CosmologicalRedshift: 1+z_cos.
func (n *Inputs) CosmologicalRedshift(p *Partial) { p.times(n.Base.X, 1) }

// Dimming: 10 log10(1+z_obs), in mag.
func (n *Inputs) Dimming(p *Partial) {
	for i := range p.Cos {
		p.Cos[i], p.Rest[i] = 0, 2*perMag
	}
}

// Position: a component of the comoving position, D_C times that of a unit
// vector. Needs E.
func (n *Inputs) Position(p *Partial, component []float64) {
	p.Alone = true
	for i, d := range n.stride() {
		p.Cos[i] = component[i] * n.HubbleDistance * d
	}
}
