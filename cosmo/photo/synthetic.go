package photo

import (
	"math"

	"catenrich/cosmo"
	"catenrich/internal/exact"
	"catenrich/internal/fault"
	"catenrich/internal/status"
)

// A Synthesis says which synthetic K-correction a band needs. SED and Band are
// required; the rest may be zero.
type Synthesis struct {
	SED  *Spectrum
	Band *Bandpass // in which the object is observed

	// RestBand is the band that the absolute magnitude is in; nil: the same.
	RestBand *Bandpass

	// RestRedshift is z_r, to which the rest band is shifted: its photon
	// efficiency at λ is that of the band at (1+z_r) λ.
	RestRedshift float64

	// ZeroPoint is the SED of magnitude zero in every band; nil: AB, a constant
	// flux per unit frequency. It cancels for the same band unshifted.
	ZeroPoint *Spectrum
}

// A Synthetic is the K-correction of an SED observed through a bandpass,
//
//	K(z) = -2.5 log10 [ 1/(1+z) ∫λ L(λ/(1+z)) R(λ)dλ / ∫λ g(λ) R(λ)dλ · ∫λ g(λ) Q(λ)dλ / ∫λ L(λ) Q(λ)dλ ]
//
// with R the observed band, Q the rest band, L the SED and g the zero point
// (Hogg et al. 2002, arXiv:astro-ph/0210394, eq. 13, from memory; the
// integrals count photons). It is tabulated when it is made: a piecewise cubic
// in 1+z that has the value and the slope of the integral at the ends of each
// piece. Pieces are halved until the cubic agrees with the integral at three
// points inside each to 2e-7 mag, or, where that takes more than 16 pieces to
// 1/64 octave, to 2e-5 mag (TestSyntheticAccuracy tries points in between).
type Synthetic struct {
	lo, hi float64 // range of x = 1+z
	first  uint64  // number of the first cell
	cells  []kCell
	coef   [][4]float64
	worst  float64 // largest difference seen while tabulating, mag
}

// A kCell is a run of equal pieces that fill one step of cellOf.
type kCell struct {
	start, scale float64 // x at its begin, pieces a unit of x
	off, n       int32   // its pieces in coef
}

// cellBits of the mantissa of x and its exponent number the cells, so that no
// logarithm is needed to find one.
const cellBits = 6

func cellOf(x float64) uint64    { return math.Float64bits(x) >> (52 - cellBits) }
func cellStart(c uint64) float64 { return math.Float64frombits(c << (52 - cellBits)) }

const (
	goodEnough = 2e-7 // mag
	atWorst    = 2e-5 // mag, where goodEnough takes too many pieces
	manyPieces = 16
	maxPieces  = 8192
	maxTotal   = 1 << 18 // 8 MB

	// faintest is a K beyond which the SED has, to say it plainly, no flux in
	// the band: the range ends there.
	faintest = 20 // mag
)

// synthesis is a Synthesis with its constants.
type synthesis struct {
	Synthesis
	constant float64 // mag, added to -2.5 log10(I(x)/x)
}

// NewSynthetic tabulates a synthetic K-correction over all redshifts at which
// the SED covers the band and the model answers. An SED that does not cover the
// rest band, or the observed band at any z > 0, is a fault.Config error.
func NewSynthetic(s Synthesis) (*Synthetic, error) {
	if s.RestBand == nil {
		s.RestBand = s.Band
	}
	direct := &synthesis{Synthesis: s}
	if err := direct.calibrate(); err != nil {
		return nil, err
	}
	lo, hi, err := direct.coverage()
	if err != nil {
		return nil, err
	}
	k := &Synthetic{lo: lo, hi: hi, first: cellOf(lo)}
	pieces := direct.startPieces()
	for c := k.first; c <= cellOf(hi); c++ {
		from, to := max(cellStart(c), lo), min(cellStart(c+1), hi)
		if !(to > from) {
			break
		}
		if err := k.tabulate(direct, from, to, pieces); err != nil {
			return nil, err
		}
	}
	return k, nil
}

// calibrate checks that the spectra cover the rest band and computes the part
// of K that does not depend on z.
func (s *synthesis) calibrate() error {
	xr := 1 + s.RestRedshift
	if !(xr > 0 && xr <= 1+cosmo.MaxRedshift) {
		return fault.Config.Errorf("rest_band_redshift is %v, want a redshift above -1", s.RestRedshift)
	}
	rest, err := restPhotons(s.RestBand, s.SED, xr, "SED")
	if err != nil {
		return err
	}
	s.constant = 2.5 * exact.Log10(rest)
	if s.RestBand == s.Band && (s.RestRedshift == 0 || s.ZeroPoint == nil) {
		return nil // the zero point cancels
	}
	observed, shifted := s.Band.abPhotons(), s.RestBand.abPhotons()
	if s.ZeroPoint != nil {
		if observed, err = restPhotons(s.Band, s.ZeroPoint, 1, "zero_point_sed"); err != nil {
			return err
		}
		if shifted, err = restPhotons(s.RestBand, s.ZeroPoint, xr, "zero_point_sed"); err != nil {
			return err
		}
	}
	s.constant += float64(2.5 * exact.Log10(observed/shifted))
	return nil
}

// restPhotons is the photon count of a spectrum in the band shifted to x-1.
func restPhotons(b *Bandpass, s *Spectrum, x float64, what string) (float64, error) {
	if lo, hi := b.covers(s); x < lo || x > hi {
		return 0, fault.Config.Errorf("%s: the %s reaches from %.6g to %.6g Angstrom, but the rest band (%s) needs %.6g to %.6g: use an SED that covers it",
			s.Name, what, s.wave[0], s.wave[len(s.wave)-1], b.Name, b.wave[0]/x, b.wave[len(b.wave)-1]/x)
	}
	v, _ := b.integral(s, x)
	if !(v > 0) {
		return 0, fault.Config.Errorf("%s: the %s has no flux in the rest band (%s)", s.Name, what, b.Name)
	}
	return v / (x * x), nil
}

// abPhotons is the photon count of a source of constant flux per unit
// frequency, g ~ λ^-2, in the band; it does not change when the band is shifted.
func (b *Bandpass) abPhotons() float64 {
	sum := 0.0
	for j := 1; j < len(b.wave); j++ {
		left, right := b.wave[j-1], b.wave[j]
		slope := (b.resp[j] - b.resp[j-1]) / (right - left)
		at0 := b.resp[j-1] - float64(slope*left) // the response line at λ = 0
		log := exact.Log1p((right - left) / left)
		if b.energy {
			sum += float64(at0*((right-left)/(left*right))) + float64(slope*log)
		} else {
			sum += float64(at0*log) + float64(slope*(right-left))
		}
	}
	return sum
}

// direct is K and dK/dx at x = 1+z by the integral.
func (s *synthesis) direct(x float64) (k, slope float64) {
	v, d := s.Band.integral(s.SED, x)
	k = s.constant - float64(2.5*exact.Log10(v/x))
	return k, -pogson * (d/v - 1) / x
}

// coverage returns the range of x in which K can be had: where the SED covers
// the band and has flux in it, from the cell of the rest band outward.
func (s *synthesis) coverage() (lo, hi float64, err error) {
	lo, hi = s.Band.covers(s.SED)
	lo, hi = max(lo, 1+cosmo.MinRedshift), min(hi, 1+cosmo.MaxRedshift)
	if !(hi > 1) || !(hi > lo) {
		return 0, 0, fault.Config.Errorf("%s: the SED reaches from %.6g to %.6g Angstrom, so the bandpass %s (%.6g to %.6g) is not covered at any redshift above 0",
			s.SED.Name, s.SED.wave[0], s.SED.wave[len(s.SED.wave)-1], s.Band.Name, s.Band.wave[0], s.Band.wave[len(s.Band.wave)-1])
	}
	from := min(max(1+s.RestRedshift, lo), hi)
	return s.reach(from, lo), s.reach(from, hi), nil
}

// reach steps from x toward end and returns end, or the last step at which K
// still is brighter than faintest.
func (s *synthesis) reach(x, end float64) float64 {
	step := 1 + 1.0/512
	if end < x {
		step = 1 / step
	}
	for x != end {
		next := x * step
		if (next > end) == (step > 1) {
			next = end
		}
		if k, _ := s.direct(next); !(k < faintest && k > -faintest) {
			return x
		}
		x = next
	}
	return x
}

// startPieces returns into how many pieces a cell is cut at least, so that no
// line of the SED passes an edge of the band between two points that are
// compared.
func (s *synthesis) startPieces() int {
	b := s.Band.wave
	step := min(minStep(s.SED.wave), (b[len(b)-1]-b[0])/b[0]/8)
	n := 1
	for n < 16 && 1/float64(n<<cellBits) > step {
		n *= 2
	}
	return n
}

// tabulate appends the cell from x = from to x = to.
func (k *Synthetic) tabulate(s *synthesis, from, to float64, pieces int) error {
	off := len(k.coef)
	for n := pieces; ; n *= 2 {
		k.coef = k.coef[:off]
		worst := k.cubics(s, from, to, n)
		if worst <= goodEnough || n >= manyPieces && worst <= atWorst {
			k.worst = max(k.worst, worst)
			k.cells = append(k.cells, kCell{from, float64(n) / (to - from), int32(off), int32(n)})
			return nil
		}
		if n >= maxPieces || off+2*n > maxTotal {
			return fault.Config.Errorf("%s: the K-correction through %s changes too fast near z = %.4g to be tabulated to %g mag: smooth the SED, or give a finer bandpass",
				s.SED.Name, s.Band.Name, from-1, float64(atWorst))
		}
	}
}

// cubics appends n cubics, each in the local variable 0 ≤ u ≤ 1, and returns
// their largest difference from the integral.
func (k *Synthetic) cubics(s *synthesis, from, to float64, n int) (worst float64) {
	h := (to - from) / float64(n)
	left, dl := s.direct(from)
	for i := range n {
		x := from + float64(float64(i)*h)
		end := x + h
		if i == n-1 {
			end = to
		}
		right, dr := s.direct(end)
		a, b, d := float64(dl*h), float64(dr*h), right-left
		c := [4]float64{left, a, float64(3*d) - float64(2*a) - b, a + b - float64(2*d)}
		for _, u := range [3]float64{0.25, 0.5, 0.75} {
			want, _ := s.direct(x + float64(u*h))
			worst = max(worst, math.Abs(cubic(&c, u)-want))
		}
		k.coef = append(k.coef, c)
		left, dl = right, dr
	}
	return worst
}

func cubic(c *[4]float64, u float64) float64 {
	v := float64(c[3]*u) + c[2]
	v = float64(v*u) + c[1]
	return float64(v*u) + c[0]
}

// piece finds the cubic for z, its local variable, and pieces a unit of x; nil
// outside the range.
func (k *Synthetic) piece(z float64) (c *[4]float64, u, scale float64) {
	x := 1 + z
	if !(x >= k.lo && x <= k.hi) {
		return nil, 0, 0
	}
	cell := &k.cells[min(cellOf(x)-k.first, uint64(len(k.cells)-1))]
	t := float64((x - cell.start) * cell.scale)
	i := min(int32(t), cell.n-1)
	return &k.coef[cell.off+i], t - float64(i), cell.scale
}

// Value is K at z, NaN where the SED does not cover the band.
func (k *Synthetic) Value(z float64) float64 {
	c, u, _ := k.piece(z)
	if c == nil {
		return math.NaN()
	}
	return cubic(c, u)
}

// Slope is dK/dz of the table.
func (k *Synthetic) Slope(z float64) float64 {
	_, slope := k.At(z)
	return slope
}

// At is both Value and Slope, for the price of one.
func (k *Synthetic) At(z float64) (value, slope float64) {
	c, u, scale := k.piece(z)
	if c == nil {
		return math.NaN(), math.NaN()
	}
	v := float64(3*c[3]*u) + float64(2*c[2])
	return cubic(c, u), float64((float64(v*u) + c[1]) * scale)
}

// fill is [Set.Fill] for a band without templates: At, written out because the
// compiler does not inline it.
func (k *Synthetic) fill(value, slope, z []float64, st []int32) {
	last := uint64(len(k.cells) - 1)
	for i, v := range z {
		x := 1 + v
		if !(x >= k.lo && x <= k.hi) {
			if v == v {
				st[i] |= status.Coverage
			}
			value[i] = math.NaN()
			if slope != nil {
				slope[i] = math.NaN()
			}
			continue
		}
		cell := &k.cells[min(cellOf(x)-k.first, last)]
		t := float64((x - cell.start) * cell.scale)
		j := min(int32(t), cell.n-1)
		c, u := &k.coef[cell.off+j], t-float64(j)
		value[i] = cubic(c, u)
		if slope != nil {
			s := float64(3*c[3]*u) + float64(2*c[2])
			slope[i] = float64((float64(s*u) + c[1]) * cell.scale)
		}
	}
}

// Range is where the SED covers the band and has flux in it.
func (k *Synthetic) Range() (lo, hi float64) { return k.lo - 1, k.hi - 1 }

// Scale is unknown unless q is 1.
func (k *Synthetic) Scale(q float64) (float64, bool) { return 0, q == 1 }

// Worst returns the largest difference between table and integral, in
// magnitudes, at the points where they were compared.
func (k *Synthetic) Worst() float64 { return k.worst }
