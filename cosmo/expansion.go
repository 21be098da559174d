package cosmo

import (
	"math"

	"catenrich/internal/exact"
)

// expansion is the right side of the Friedmann equation,
//
//	E^2(x) = O_m x^3 + O_k x^2 + O_r x^4 + sum_i nu_i(x) + O_de f(x),  x = 1+z
//	f(x)   = x^(3(1+w0+wa)) exp(-3 wa (x-1)/x)
//
// with O_r the photons and the massless neutrinos, nu_i the massive ones.
// Sources: Hogg 1999, eq. 14; Chevallier & Polarski 2001 and Linder 2003 for f;
// Komatsu et al. 2011, section 3.3, for the neutrinos.
type expansion struct {
	matter, curvature, radiation, dark float64
	constant                           bool    // f = 1
	power, wa3                         float64 // f = x^power exp(-wa3 (x-1)/x)
	massive                            []species
}

// squared returns E^2 at 1+z = x > 0. It may overflow to +Inf or be negative;
// see scaled for x far from 1.
func (e *expansion) squared(x float64) float64 {
	x2 := float64(x * x)
	sum := float64(x2 * (e.curvature + float64(x*(e.matter+float64(x*e.radiation)))))
	for i := range e.massive {
		sum += e.massive[i].density(x)
	}
	if e.constant {
		return sum + e.dark
	}
	return sum + float64(e.dark*exact.Exp(e.logDark(x)))
}

// logDark returns ln f.
func (e *expansion) logDark(x float64) float64 {
	return float64(e.power*exact.Log(x)) - float64(e.wa3*((x-1)/x))
}

// rise returns E^2(a+d) - E^2(a) without cancellation, for a and a+d positive.
func (e *expansion) rise(a, d float64) float64 {
	b := a + d
	squares := float64(d * (a + b))
	cubes := float64(d * (float64(b*b) + float64(a*b) + float64(a*a)))
	fourths := float64(squares * (float64(b*b) + float64(a*a)))
	sum := float64(e.curvature*squares) + float64(e.matter*cubes) + float64(e.radiation*fourths)
	for i := range e.massive {
		sum += e.massive[i].rise(a, d)
	}
	if e.constant {
		return sum
	}
	fa := 1.0
	if a != 1 {
		fa = exact.Exp(e.logDark(a))
	}
	// ln f(b)/f(a)
	ratio := float64(e.power*exact.Log1p(d/a)) - float64(e.wa3*(d/a/b))
	return sum + float64(e.dark*fa*exact.Expm1(ratio))
}

// scaled returns E^2(e^u) = e^m s for any u, with s of moderate size: neither
// part overflows where E^2 or 1/E^2 would.
func (e *expansion) scaled(u float64) (m, s float64) {
	var power, factor [8]float64
	n := 0
	add := func(p, f float64) {
		if f != 0 {
			power[n], factor[n] = p, f
			n++
		}
	}
	add(float64(2*u), e.curvature)
	add(float64(3*u), e.matter)
	add(float64(4*u), e.radiation)
	switch {
	case e.constant:
		add(0, e.dark)
	case e.wa3 == 0:
		add(float64(e.power*u), e.dark)
	default:
		// -(x-1)/x = e^-u - 1
		add(float64(e.power*u)+float64(e.wa3*exact.Expm1(-u)), e.dark)
	}
	nu, p := 0.0, 3.0
	for i := range e.massive {
		q, v := e.massive[i].stretched(u)
		p, nu = q, nu+v
	}
	add(float64(p*u), nu)
	if n == 0 {
		return 0, 0
	}
	m = power[0]
	for _, p := range power[1:n] {
		m = max(m, p)
	}
	if math.IsInf(m, 1) {
		m = math.MaxFloat64
	}
	for i := range n {
		s += float64(factor[i] * exact.Exp(min(power[i], m)-m))
	}
	return m, s
}

// distanceIntegrand is dD_C/du / D_H = x/E at u = ln x.
func (e *expansion) distanceIntegrand(u float64) float64 {
	m, s := e.scaled(u)
	return exact.Exp(u-float64(0.5*m)) / math.Sqrt(s)
}

// timeIntegrand is |dt/du| / t_H = 1/E at u = ln x.
func (e *expansion) timeIntegrand(u float64) float64 {
	m, s := e.scaled(u)
	return exact.Exp(float64(-0.5*m)) / math.Sqrt(s)
}
