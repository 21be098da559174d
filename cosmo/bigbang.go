package cosmo

import (
	"math"

	"catenrich/internal/exact"
)

// signs tells where E^2 is positive, by branch and bound over u = ln(1+z). E^2
// is divided by x^lead; each term is then monotone between known places, so its
// values at the ends of an interval bound it within.
type signs struct {
	e    *expansion
	lead float64
	left int // intervals that may still be looked at
}

// A bound is a range of values.
type bound struct{ low, high float64 }

func (b bound) plus(c bound) bound { return bound{b.low + c.low, b.high + c.high} }

func (b bound) times(k float64) bound {
	x, y := float64(k*b.low), float64(k*b.high)
	return bound{min(x, y), max(x, y)}
}

func ends(x, y float64) bound { return bound{min(x, y), max(x, y)} }

// newSigns prepares a search toward u = +Inf (past) or -Inf. There the leading
// power is the largest, or the smallest, of those present, so that no power
// law grows; only f, with wa not 0, can.
func newSigns(e *expansion, past bool) *signs {
	s := &signs{e: e, left: 1 << 19}
	pick, start := math.Min, math.Inf(1)
	if past {
		pick, start = math.Max, math.Inf(-1)
	}
	s.lead = start
	for _, t := range []struct {
		present bool
		power   float64
	}{
		{e.curvature != 0, 2}, {e.matter != 0, 3}, {e.radiation != 0, 4},
		{len(e.massive) > 0, 3}, {len(e.massive) > 0, 4},
		{e.dark != 0 && (past || e.wa3 == 0), e.power},
	} {
		if t.present {
			s.lead = pick(s.lead, t.power)
		}
	}
	if math.IsInf(s.lead, 0) {
		s.lead = 0
	}
	return s
}

// power returns x^(p-lead) at u, which may be +Inf.
func (s *signs) power(p, u float64) float64 {
	if p == s.lead {
		return 1
	}
	return exact.Exp((p - s.lead) * u)
}

// dark returns f/x^lead at u; largest keeps it finite.
func (s *signs) dark(u float64) float64 {
	const largest = 600
	exponent := 0.0
	if s.e.power != s.lead {
		exponent = float64((s.e.power - s.lead) * u)
	}
	if s.e.wa3 != 0 {
		exponent += float64(s.e.wa3 * exact.Expm1(-u))
	}
	return exact.Exp(min(exponent, largest))
}

// neutrinos returns the massive species' density over x^lead: monotone,
// because it rises faster than x^3 and slower than x^4, and lead is no number
// between them.
func (s *signs) neutrinos(u float64) float64 {
	sum := 0.0
	for i := range s.e.massive {
		if math.IsInf(u, 1) {
			sum += float64(s.e.massive[i].omega * s.power(4, u))
			continue
		}
		p, v := s.e.massive[i].stretched(u)
		sum += float64(v * s.power(p, u))
	}
	return sum
}

// over returns bounds of E^2/x^lead for a <= u <= b.
func (s *signs) over(a, b float64) bound {
	e, sum := s.e, bound{}
	for _, t := range [...]struct{ factor, power float64 }{{e.curvature, 2}, {e.matter, 3}, {e.radiation, 4}} {
		if t.factor != 0 {
			sum = sum.plus(ends(s.power(t.power, a), s.power(t.power, b)).times(t.factor))
		}
	}
	if len(e.massive) > 0 {
		sum = sum.plus(ends(s.neutrinos(a), s.neutrinos(b)))
	}
	if e.dark == 0 {
		return sum
	}
	f := ends(s.dark(a), s.dark(b))
	// f/x^lead turns where power - lead = wa3 e^-u
	if r := (e.power - s.lead) / e.wa3; r > 0 && !math.IsInf(r, 0) {
		if turn := -exact.Log(r); a < turn && turn < b {
			v := s.dark(turn)
			f = bound{min(f.low, v), max(f.high, v)}
		}
	}
	return sum.plus(f.times(e.dark))
}

// first returns the place closest to near, between it and far, where E^2
// cannot be shown to be positive to 1e-12 in u; false if there is none. near is
// finite; far may be +Inf.
func (s *signs) first(near, far float64) (u float64, found bool) {
	const closest, farthest = 1e-12, 1e6
	if s.over(min(near, far), max(near, far)).low > 0 {
		return 0, false
	}
	s.left--
	if math.Abs(far-near) <= closest*max(1, math.Abs(near)) || s.left < 0 || near > farthest {
		return near, true
	}
	middle := 0.5 * (near + far)
	if math.IsInf(far, 1) {
		middle = float64(2*near) + 1
	}
	if u, found = s.first(near, middle); found {
		return u, true
	}
	return s.first(middle, far)
}
