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
}

// Resize gives the partial n rows, keeping its memory.
func (p *Partial) Resize(n int) {
	if cap(p.Cos) < n {
		p.Cos, p.Rest = make([]float64, n), make([]float64, n)
	}
	p.Cos, p.Rest = p.Cos[:n], p.Rest[:n]
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
}

// NewInputs returns the inputs of a model with lengths in Mpc.
func NewInputs(m *cosmo.Model, b *cosmo.Base) *Inputs {
	return &Inputs{HubbleDistance: m.HubbleDistance(), HubbleTime: m.HubbleTime(), H0: m.Params().H0, Antipode: m.Antipode(), Base: b}
}

func at(r []float64, i int) float64 {
	if r == nil {
		return 1
	}
	return r[i]
}

// slope returns dD_M/dD_C of row i with the sign that |D_M| has past the
// antipode of a closed model. It needs DC and Slope.
func (n *Inputs) slope(i int) float64 {
	if n.Base.DC[i] > n.Antipode {
		return -n.Base.Slope[i]
	}
	return n.Base.Slope[i]
}

// distance returns d ln D_M/d ln(1+z): Slope (1+z)/(E D_M). It needs DC, DM,
// Slope and E.
func (n *Inputs) distance(i int) float64 {
	b := n.Base
	return n.slope(i) * b.X[i] / (b.E[i] * b.DM[i])
}

// each fills p from a function that gives a row's derivative by ln(1+z_cos),
// for quantities that do not know the other redshifts.
func (n *Inputs) each(p *Partial, cos func(i int, x, e float64) float64) {
	for i := range p.Cos {
		p.Cos[i], p.Rest[i] = cos(i, n.Base.X[i], n.Base.E[i]), 0
	}
}

// ComovingDistance: D_H (1+z)/E. Needs E.
func (n *Inputs) ComovingDistance(p *Partial) {
	n.each(p, func(_ int, x, e float64) float64 { return n.HubbleDistance * x / e })
}

// TransverseDistance: D_H Slope (1+z)/E. Needs DC, Slope, E.
func (n *Inputs) TransverseDistance(p *Partial) {
	n.each(p, func(i int, x, e float64) float64 { return n.HubbleDistance * n.slope(i) * x / e })
}

// AngularDiameterDistance: D_A = D_M (1+z_frame)/[(1+z_cos)(1+z_obs)], so D_A
// moves with D_M/(1+z_cos) only, the other two cancelling. Needs DC, DM, Slope, E.
func (n *Inputs) AngularDiameterDistance(p *Partial) {
	n.each(p, func(i int, x, e float64) float64 {
		scale := n.HubbleDistance * at(n.FrameRatio, i) / at(n.ObsRatio, i)
		return scale * (n.slope(i)/e - n.Base.DM[i]/x)
	})
}

// LuminosityDistance: D_L = D_M (1+z_frame)(1+z_obs)/(1+z_cos). Needs DC, DM,
// Slope, E.
func (n *Inputs) LuminosityDistance(p *Partial) {
	for i := range p.Cos {
		x := n.Base.X[i]
		scale := float64(n.HubbleDistance * x * at(n.FrameRatio, i) * at(n.ObsRatio, i)) // D_L/D_M
		p.Cos[i] = scale * (float64(n.slope(i)*x/n.Base.E[i]) - n.Base.DM[i])
		p.Rest[i] = 2 * scale * n.Base.DM[i]
	}
}

// DistanceModulus: (5/ln 10) d ln D_L. Needs DC, DM, Slope, E.
func (n *Inputs) DistanceModulus(p *Partial) {
	for i := range p.Cos {
		p.Cos[i] = perMag * (n.distance(i) - 1)
		p.Rest[i] = 2 * perMag
	}
}

// perMag is 5/ln 10, the magnitudes in a factor e of distance.
const perMag = 5 / math.Ln10

// EmissionDistance: D_C/(1+z_cos). Needs DC, E.
func (n *Inputs) EmissionDistance(p *Partial) {
	n.each(p, func(i int, x, e float64) float64 { return n.HubbleDistance * (1/e - n.Base.DC[i]/x) })
}

// Lookback: t_H/E. Needs E.
func (n *Inputs) Lookback(p *Partial) {
	n.each(p, func(_ int, _, e float64) float64 { return n.HubbleTime / e })
}

// Age: -t_H/E. Needs E.
func (n *Inputs) Age(p *Partial) {
	n.each(p, func(_ int, _, e float64) float64 { return -n.HubbleTime / e })
}

// ContactLost: the age t(z_x) at which D_C(z_x) = D_C(z) - D_EH, so
// dt = -t_H (1+z)/[E (1+z_x)] d ln(1+z). exit is 1+z_x of each row. Needs E.
func (n *Inputs) ContactLost(p *Partial, exit []float64) {
	n.each(p, func(i int, x, e float64) float64 { return -n.HubbleTime * x / (e * exit[i]) })
}

// Volume: 4π D_M² D_H (1+z)/E, the whole sky; 0 past the antipode. Needs DC,
// DM, E.
func (n *Inputs) Volume(p *Partial) {
	unit := 4 * math.Pi * n.HubbleDistance * n.HubbleDistance * n.HubbleDistance
	n.each(p, func(i int, x, e float64) float64 {
		if n.Base.DC[i] > n.Antipode {
			return 0
		}
		d := n.Base.DM[i]
		return unit * d * d * x / e
	})
}

// VolumeElement: D_H D_M²/E, a steradian and unit z. Needs DC, DM, Slope, E,
// LogSlopeE.
func (n *Inputs) VolumeElement(p *Partial) {
	unit := n.HubbleDistance * n.HubbleDistance * n.HubbleDistance
	n.each(p, func(i int, x, e float64) float64 {
		d := n.Base.DM[i]
		return unit * d / e * (float64(2*n.slope(i)*x/e) - float64(d*n.LogSlopeE[i]))
	})
}

// VelocityNow: c (1+z)/E, in km/s. Needs E.
func (n *Inputs) VelocityNow(p *Partial) {
	n.each(p, func(_ int, x, e float64) float64 { return cosmo.SpeedOfLight * x / e })
}

// VelocityAtEmission: v = c E D_C/[D_H (1+z)], in km/s. Needs DC, E, LogSlopeE.
func (n *Inputs) VelocityAtEmission(p *Partial) {
	n.each(p, func(i int, x, e float64) float64 {
		return cosmo.SpeedOfLight * (1 + float64(e/x*n.Base.DC[i]*(n.LogSlopeE[i]-1)))
	})
}

// RedshiftDrift: H0 (1+z - E), in 1/yr. Needs E, LogSlopeE.
func (n *Inputs) RedshiftDrift(p *Partial) {
	perYear := 1e-9 / n.HubbleTime
	n.each(p, func(i int, x, e float64) float64 { return perYear * (x - float64(e*n.LogSlopeE[i])) })
}

// VelocityDrift: c H0 (1 - E/(1+z)), in cm/s/yr. Needs E, LogSlopeE.
func (n *Inputs) VelocityDrift(p *Partial) {
	unit := 1e5 * cosmo.SpeedOfLight * 1e-9 / n.HubbleTime
	n.each(p, func(i int, x, e float64) float64 { return unit * (e / x) * (1 - n.LogSlopeE[i]) })
}

// CosmologicalRedshift: 1+z_cos.
func (n *Inputs) CosmologicalRedshift(p *Partial) {
	for i := range p.Cos {
		p.Cos[i], p.Rest[i] = n.Base.X[i], 0
	}
}

// Dimming: 10 log10(1+z_obs), in mag.
func (n *Inputs) Dimming(p *Partial) {
	for i := range p.Cos {
		p.Cos[i], p.Rest[i] = 0, 2*perMag
	}
}

// Position: a component of the comoving position, D_C times that of a unit
// vector. Needs E.
func (n *Inputs) Position(p *Partial, component []float64) {
	n.each(p, func(i int, x, e float64) float64 { return component[i] * n.HubbleDistance * x / e })
}

// Times makes p the partial of the quantity times a constant, the angular scale
// from D_A, for one.
func (p *Partial) Times(k float64) {
	for i := range p.Cos {
		p.Cos[i] *= k
		p.Rest[i] *= k
	}
}
