package selection

import (
	"math"

	"catenrich/internal/status"
)

// Rows are a batch of objects. Z, Apparent and Offset are required.
type Rows struct {
	Z        []float64 // z_cos
	Apparent []float64 // m - A for limits on corrected magnitudes, m for observed ones
	Offset   []float64 // mu + K + e of the row itself, D_L in Mpc, K the selection's own

	// What frame.Ratios and frame.ModulusShifts make of the row's redshifts; both
	// nil where z_obs = z_frame = z_cos.
	ObsRatio []float64 // (1+z_obs)/(1+z_cos)
	Shift    []float64 // 5 log10 of it and of (1+z_frame)/(1+z_cos), mag

	Template []int32 // index of the row's K-correction, -1 for none; nil: the only one

	Faint, Bright []float64 // limits of each row, in place of the selection's; may be nil

	Work *Work // nil: memory for this call alone
}

// Roots fills zmin and zmax with the redshifts between which each object would
// have been selected: outward from its own, the first at which
//
//	m_lim = M + A + mu(z) + K(z) + e(z)
//
// cut to the selection's redshift limits. At its own z the right side is its own
// magnitude.
//
// An object outside the selection gets NaN and status.Selection. Where K is not
// known far enough to say whether there is a root, the cell is NaN with
// status.Coverage; without a limit in that direction (bright for zmin, faint for
// zmax) K is not asked, and the redshift limit stands. A missing limit of the
// row is status.Input. Other NaN stay NaN without a bit: who made them has said
// why.
func (s *Selection) Roots(zmin, zmax []float64, r *Rows, st []int32) {
	w := r.Work
	if w == nil {
		w = new(Work)
	}
	w.begin()
	var o object
	for i := range zmin {
		if !s.object(&o, r, i, st) {
			zmin[i], zmax[i] = math.NaN(), math.NaN()
			continue
		}
		w.row = i
		if zmax[i] = o.outward(w); zmax[i] != zmax[i] {
			st[i] |= status.Coverage
		}
		if zmin[i] = o.inward(w); zmin[i] != zmin[i] {
			st[i] |= status.Coverage
		}
	}
	w.finish(s.m, zmin, zmax)
}

// An object is one row with its limits turned into limits on w.
type object struct {
	c             *curve
	l             *Limits
	z, q          float64
	bright, faint float64 // limits on w at q
	lo, hi        float64 // where w is known
}

// object sets o up for a row; false if it has no roots.
func (s *Selection) object(o *object, r *Rows, i int, st []int32) bool {
	bright, faint := s.limits.Bright, s.limits.Faint
	if r.Bright != nil {
		bright = r.Bright[i]
	}
	if r.Faint != nil {
		faint = r.Faint[i]
	}
	if bright != bright || faint != faint {
		st[i] |= status.Input
		return false
	}
	z, m, w := r.Z[i], r.Apparent[i], r.Offset[i]
	if !(z > 0) || m != m || w != w {
		return false
	}
	if !(z >= s.limits.Zmin && z <= s.limits.Zmax && m >= bright && m <= faint) {
		st[i] |= status.Selection
		return false
	}
	t := int32(0)
	if r.Template != nil {
		if t = r.Template[i]; t < 0 {
			return false
		}
	}
	c := s.curves[t]
	o.c, o.l, o.z, o.q, o.lo, o.hi = c, &s.limits, z, 1, c.zlo, c.zhi
	if r.ObsRatio != nil {
		o.q = r.ObsRatio[i]
		w -= r.Shift[i] // in mu for every z alike
	}
	if o.q != 1 {
		if k, same := c.k.Scale(o.q); same {
			w -= k
			o.q = 1
		} else if !c.everywhere || math.Abs(o.q-1) > near {
			o.lo, o.hi = c.covered(&s.limits, o.q)
		}
	}
	o.bright, o.faint = w+(bright-m), w+(faint-m)
	if len(c.pieces) == 0 {
		st[i] |= status.Coverage
		return false
	}
	return true
}

// outward finds zmax: from z up, the first place where w leaves [bright, faint].
func (o *object) outward(work *Work) float64 {
	c, from, last := o.c, o.z, len(o.c.pieces)-1
	for i := c.pieceAt(o.z); i <= last; i++ {
		p := &c.pieces[i]
		way := way{fainter: p.whi > p.wlo, end: p.zhi, w: p.whi}
		if i == last || p.zhi > o.hi {
			o.endAt(&way, o.hi)
		} else {
			o.turnNear(&way)
		}
		if limit, ok := o.crossed(&way); ok {
			return o.root(work, p, limit, from, max(way.end, from), false)
		}
		from = max(way.end, from)
	}
	if o.hi < o.l.Zmax && o.faint <= math.MaxFloat64 {
		return math.NaN() // K ends before the sample does
	}
	return o.l.Zmax
}

// inward finds zmin: from z down, the first place where w leaves [bright, faint].
func (o *object) inward(work *Work) float64 {
	c, from := o.c, o.z
	if o.bright < -math.MaxFloat64 && len(c.pieces) == 1 && c.pieces[0].whi > c.pieces[0].wlo {
		return o.l.Zmin // nearer is brighter, and there is no bright limit
	}
	for i := c.pieceAt(o.z); i >= 0; i-- {
		p := &c.pieces[i]
		way := way{fainter: p.wlo > p.whi, end: p.zlo, w: p.wlo}
		if i == 0 || p.zlo < o.lo {
			o.endAt(&way, o.lo)
		} else {
			o.turnNear(&way)
		}
		if limit, ok := o.crossed(&way); ok {
			return o.root(work, p, limit, from, min(way.end, from), true)
		}
		from = min(way.end, from)
	}
	if o.lo > max(o.l.Zmin, least) && o.bright >= -math.MaxFloat64 {
		return math.NaN()
	}
	return o.l.Zmin
}

// A way leads to end, growing fainter or brighter throughout; there w is w.
type way struct {
	fainter bool
	end, w  float64
}

// limit is the one that a way can cross.
func (o *object) limit(v *way) float64 {
	if v.fainter {
		return o.faint
	}
	return o.bright
}

// undecided reports whether the limit is so close to w at rest that w of an
// object with another q has to be computed.
func (o *object) undecided(v *way) bool {
	return o.q != 1 && math.Abs(o.limit(v)-v.w) <= float64(2*o.c.steep*math.Abs(o.q-1))+1e-9
}

// endAt ends a way at the end of what is known.
func (o *object) endAt(v *way, end float64) {
	moved := end != v.end
	v.end = end
	if o.q != 1 && (moved || o.undecided(v)) {
		v.w = o.c.at(end, o.q)
	}
}

// turnNear ends a way where w of this object turns: at another place than at
// rest, if K makes it turn.
func (o *object) turnNear(v *way) {
	if !o.undecided(v) {
		return
	}
	d := float64(2 * math.Abs(o.q-1) * (1 + v.end))
	v.end = o.c.turn(max(v.end-d, o.lo), min(v.end+d, o.hi), v.fainter, o.q)
	v.w = o.c.at(v.end, o.q)
}

// crossed returns the limit that is crossed on a way, if there is one.
func (o *object) crossed(v *way) (limit float64, ok bool) {
	limit = o.limit(v)
	if limit-limit != 0 {
		return limit, false
	}
	if v.fainter {
		return limit, v.w > limit
	}
	return limit, v.w < limit
}

// root finds where w is equal to limit, between from and end, nearer than the
// object or farther. Where the inverse is not sure it leaves a task instead.
func (o *object) root(work *Work, p *piece, limit, from, end float64, near bool) float64 {
	var z float64
	if o.q == 1 {
		var sure bool
		z, sure = p.inverse.at(limit)
		lo, hi := min(from, end), max(from, end)
		if sure && z >= lo-float64(rounding*lo) && z <= hi+float64(rounding*hi) {
			return min(max(z, lo), hi)
		}
	} else {
		z = p.inverse.guess(limit, o.q-1)
	}
	work.add(o, limit, from, end, z, near)
	return o.z
}
