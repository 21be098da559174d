package spread

import (
	"math"

	"catenrich/cosmo/photo"
)

// Correction is the partial of K(z_obs): it moves with z_obs, not with z_cos.
// slope is dK/dz of each row, zobs the redshift it is taken at. A K-correction
// that is a column of the catalogue is a constant: nil slope.
func Correction(p *Partial, slope, zobs []float64) {
	for i := range p.Cos {
		p.Cos[i], p.Rest[i] = 0, 0
		if slope != nil {
			p.Rest[i] = slope[i] * (1 + zobs[i])
		}
	}
}

// Evolution is the partial of e = -Q (z_cos - z0). Needs X.
func (n *Inputs) Evolution(p *Partial, e photo.Evolution) {
	p.times(n.Base.X, -e.Q)
}

// AbsoluteMagnitude is the partial of M = m - A - mu - K - e: mu, K and e share
// one redshift, so their derivatives are added with their signs. slope is dK/dz
// at zobs, nil for a K that does not know the redshift. Needs DC, DM, Slope, E.
func (n *Inputs) AbsoluteMagnitude(p *Partial, slope, zobs []float64, e photo.Evolution) {
	x := n.Base.X
	for i, d := range n.distance() {
		p.Cos[i] = float64(e.Q*x[i]) - float64(perMag*(d-1))
		p.Rest[i] = -2 * perMag
	}
	if slope == nil {
		return
	}
	for i := range p.Rest {
		p.Rest[i] -= float64(slope[i] * (1 + zobs[i]))
	}
}

// MagnitudeVariance fills v with σ_m² + σ_A² + (R σ_EBV)², what the catalogue's
// own errors add to the variance of an absolute magnitude; sigmaA and
// sigmaEBV may be nil, sigmaM too for a catalogue without errors.
func MagnitudeVariance(v, sigmaM, sigmaA []float64, r float64, sigmaEBV []float64) {
	clear(v)
	for _, term := range []struct {
		sigma []float64
		scale float64
	}{{sigmaM, 1}, {sigmaA, 1}, {sigmaEBV, r}} {
		if term.sigma == nil {
			continue
		}
		sigma := term.sigma[:len(v)]
		for i := range v {
			s := term.scale * sigma[i]
			v[i] += float64(s * s)
		}
	}
}

// Luminosities fills sl with σ_L = 0.4 ln 10 L σ_M.
func Luminosities(sl, l, sigmaM []float64) {
	l, sigmaM = l[:len(sl)], sigmaM[:len(sl)]
	for i := range sl {
		sl[i] = 0.4 * math.Ln10 * l[i] * sigmaM[i]
	}
}

// LineLuminosity is the partial of L = 4π D_L² F, and of a radio luminosity
// with alpha: L (1+z_obs)^-(1+α). For a line alpha is -1. alphas, if not nil, is
// each row's own. Needs DC, DM, Slope, E.
func (n *Inputs) LineLuminosity(p *Partial, l []float64, alpha float64, alphas []float64) {
	for i, d := range n.distance() {
		a := alpha
		if alphas != nil {
			a = alphas[i]
		}
		p.Cos[i] = 2 * l[i] * (d - 1)
		p.Rest[i] = l[i] * (3 - a)
	}
}

// Size is the partial of a proper size θ D_A: d is the size. Needs DC, DM,
// Slope, E.
func (n *Inputs) Size(p *Partial, d []float64) {
	p.Alone = true
	for i, slope := range n.distance() {
		p.Cos[i] = d[i] * (slope - 1)
	}
}

// Proportional fills v with (x σ_f/f)², the variance that the error of a flux or
// an angle f adds to a quantity x proportional to it. Where f is 0 the unit
// value k = x/f is not known from them, and the result is NaN.
func Proportional(v, x, f, sigmaF []float64) {
	x, f, sigmaF = x[:len(v)], f[:len(v)], sigmaF[:len(v)]
	for i := range v {
		s := x[i] / f[i] * sigmaF[i]
		v[i] = float64(s * s)
	}
}
