//go:build unix

package selection

import (
	"encoding/binary"
	"hash/fnv"
	"math"
	"math/rand/v2"
	"testing"

	"catenrich/cosmo"
	"catenrich/cosmo/frame"
	"catenrich/cosmo/photo"
	"catenrich/cosmo/spread"
	"catenrich/internal/exact"
)

// A survey is a batch of 2048 rows with all that a job can ask for: heliocentric
// redshifts and positions, distances in the CMB frame, two bands with fluxes,
// extinction, K and evolution, errors, quantiles, and a selection in both bands.
type survey struct {
	m                          *cosmo.Model
	base, lowBase, highBase    cosmo.Base
	u                          frame.Vectors
	route                      *frame.Route
	ra, dec, zin, sz, zlo, zhi []float64
	zf, zo, scratch, obs, fr   []float64
	dl, da, mu, shift          []float64
	lo, hi, xlo, xhi           []float64
	st                         []int32
	partial                    spread.Partial
	inputs                     *spread.Inputs
	sigmas                     spread.Sigmas
	turns                      spread.Turns
	work                       Work
	bands                      [2]band
}

type band struct {
	p                                               photo.Photometer
	flux, ivar, ebv, ext, m, sm, k, slope, e, abs   []float64
	corrected, offset, lum, v, sabs, slum, zlo, zhi []float64
	set                                             *photo.Set
	evolution                                       photo.Evolution
	sel                                             *Selection
	vol                                             Volumes
}

// template is an SED of some thousand points, and band a ragged bandpass.
func template(b testing.TB, from, to float64) *photo.Synthetic {
	var sed, pass []byte
	for w := 1000.0; w < 12000; w *= 1.001 {
		f := math.Pow(w/5000, -0.5) * (1 + 0.05*math.Sin(w/40)) // bands
		if w < 4000 {
			f *= 0.5 // a break
		}
		f += 0.6 * math.Exp(-math.Pow((w-5000)/15, 2)) // a line
		sed = appendRow(sed, w, f)
	}
	for w := from; w <= to; w += (to - from) / 80 {
		pass = appendRow(pass, w, math.Sin((w-from)/(to-from)*math.Pi)+1e-3)
	}
	s, err := photo.ParseSpectrum("sed", sed, photo.Angstrom)
	if err != nil {
		b.Fatal(err)
	}
	r, err := photo.ParseBandpass("band", pass, photo.Angstrom, false)
	if err != nil {
		b.Fatal(err)
	}
	k, err := photo.NewSynthetic(photo.Synthesis{SED: s, Band: r})
	if err != nil {
		b.Fatal(err)
	}
	return k
}

const batch = 2048

func newSurvey(b testing.TB) *survey {
	s := &survey{m: models(b)["flat"], st: make([]int32, batch)}
	f := func() []float64 { return make([]float64, batch) }
	for _, p := range []*[]float64{&s.ra, &s.dec, &s.zin, &s.sz, &s.zlo, &s.zhi, &s.zf, &s.zo, &s.scratch, &s.obs, &s.fr,
		&s.dl, &s.da, &s.mu, &s.shift, &s.lo, &s.hi, &s.xlo, &s.xhi} {
		*p = f()
	}
	s.inputs = spread.NewInputs(s.m, &s.base)
	s.route, _ = frame.NewRoute(frame.Heliocentric, frame.CMB, true)
	rng := rand.New(rand.NewPCG(9, 9))
	for i := range batch {
		s.ra[i], s.dec[i] = 360*rng.Float64(), float64(180*rng.Float64())-90
		s.zin[i] = float64(float32(math.Pow(10, -1.7+1.4*rng.Float64()))) // the same on every machine
		s.sz[i], s.zlo[i], s.zhi[i] = 0.01, s.zin[i]-0.005, s.zin[i]+0.005
	}
	s.turns = spread.FindTurns(func(z float64) float64 { return s.m.At(cosmo.DM, z) / (1 + z) }, 1e-6, 1e4)
	for j := range s.bands {
		d := &s.bands[j]
		for _, p := range []*[]float64{&d.flux, &d.ivar, &d.ebv, &d.ext, &d.m, &d.sm, &d.k, &d.slope, &d.e, &d.abs, &d.corrected, &d.offset,
			&d.lum, &d.v, &d.sabs, &d.slum, &d.zlo, &d.zhi, &d.vol.Vmax, &d.vol.OverVmax, &d.vol.Weight} {
			*p = f()
		}
		d.p = photo.Photometer{Measure: photo.Flux, ZeroPoint: 22.5}
		d.evolution = photo.Evolution{Q: 1, Z0: 0.1}
		d.set = photo.Single(template(b, 5500+1500*float64(j), 7000+1500*float64(j)))
		d.sel = New(s.m, d.set, d.evolution, Limits{Bright: 13, Faint: 20, Zmin: 0.005, Zmax: 1})
		for i := range batch {
			d.flux[i], d.ivar[i], d.ebv[i] = float64(float32(math.Pow(10, 1.5+1.5*rng.Float64()))), 4, 0.1*rng.Float64()
		}
	}
	return s
}

// redshifts: section 3.
func (s *survey) redshifts() {
	frame.Directions(&s.u, s.ra, s.dec, s.st)
	s.route.Apply(s.zf, s.zo, s.zin, s.scratch, &s.u)
	frame.Ratios(s.obs, s.fr, s.zo, s.zf, s.zf)
	frame.ModulusShifts(s.shift, s.obs, s.fr)
}

// distances: the base and what section 2 makes of it.
func (s *survey) distances() {
	s.m.Fill(&s.base, cosmo.DC|cosmo.DM|cosmo.Slope|cosmo.E|cosmo.Lookback|cosmo.Age|cosmo.Volume|cosmo.Drift, s.zf)
	frame.AngularDiameterDistances(s.da, s.base.DM, s.zf, s.obs, s.fr)
	frame.LuminosityDistances(s.dl, s.base.DM, s.zf, s.obs, s.fr)
	modulus(s.mu, s.dl, s.m)
}

func modulus(mu, dl []float64, m *cosmo.Model) {
	exact.Log10Slice(mu, dl)
	zero := 25 + float64(5*exact.Log10(m.HubbleDistance()))
	for i := range mu {
		mu[i] = float64(5*mu[i]) + zero
	}
}

// photometry: section 4.
func (s *survey) photometry() {
	for j := range s.bands {
		d := &s.bands[j]
		d.p.Magnitudes(d.m, d.flux, s.st)
		photo.Extinction(d.ext, 2.285, d.ebv, s.st)
		d.set.Fill(d.k, d.slope, s.zo, nil, s.st)
		d.evolution.Fill(d.e, s.zf)
		t := photo.Terms{Apparent: d.m, Extinction: d.ext, Modulus: s.mu, K: d.k, Evolution: d.e}
		t.Absolute(d.abs)
		t.Offset(d.offset)
		photo.Luminosity(d.lum, d.abs, 4.65)
	}
}

// errors: section 5, of distances and of both bands.
func (s *survey) errors() {
	n, sig := s.inputs, &s.sigmas
	n.Begin()
	n.ObsRatio, n.FrameRatio = s.obs, s.fr
	sig.Set(s.sz, s.zin, 250, nil)
	for _, fill := range []func(*spread.Partial){n.ComovingDistance, n.LuminosityDistance, n.AngularDiameterDistance, n.DistanceModulus, n.Age} {
		s.partial.Resize(batch)
		fill(&s.partial)
		sig.Fill(s.scratch, &s.partial)
	}
	for j := range s.bands {
		d := &s.bands[j]
		d.p.Errors(d.sm, d.flux, d.ivar, photo.FluxIvar, s.st)
		s.partial.Resize(batch)
		n.AbsoluteMagnitude(&s.partial, d.slope, s.zo, d.evolution)
		spread.MagnitudeVariance(d.v, d.sm, nil, 2.285, s.scratch)
		sig.FillWith(d.sabs, &s.partial, d.v)
		spread.Luminosities(d.slum, d.lum, d.sabs)
	}
}

// intervals: D_A and mu between two quantiles.
func (s *survey) intervals() {
	s.m.Fill(&s.lowBase, cosmo.DM, s.zlo)
	s.m.Fill(&s.highBase, cosmo.DM, s.zhi)
	frame.AngularDiameterDistances(s.xlo, s.lowBase.DM, s.zlo, s.obs, s.fr)
	frame.AngularDiameterDistances(s.xhi, s.highBase.DM, s.zhi, s.obs, s.fr)
	v := spread.Interval{Zlo: s.zlo, Zhi: s.zhi, Xlo: s.xlo, Xhi: s.xhi, X: s.da}
	v.Fill(s.lo, s.hi, s.turns)
	frame.LuminosityDistances(s.xlo, s.lowBase.DM, s.zlo, s.obs, s.fr)
	frame.LuminosityDistances(s.xhi, s.highBase.DM, s.zhi, s.obs, s.fr)
	modulus(s.xlo, s.xlo, s.m)
	modulus(s.xhi, s.xhi, s.m)
	v.X = s.mu
	v.Fill(s.lo, s.hi, spread.Turns{})
}

// selections: section 6, both bands and their intersection.
func (s *survey) selections() {
	for j := range s.bands {
		d := &s.bands[j]
		for i := range d.corrected {
			d.corrected[i] = d.m[i] - d.ext[i]
		}
		d.sel.Roots(d.zlo, d.zhi, &Rows{Z: s.zf, Apparent: d.corrected, Offset: d.offset, ObsRatio: s.obs, Shift: s.shift, Work: &s.work}, s.st)
	}
	a, b := &s.bands[0], &s.bands[1]
	Intersect(a.zlo, a.zhi, b.zlo, b.zhi)
	Shells(s.xlo, s.xhi, s.m, a.zlo, a.zhi, &s.work, s.st)
	(&Survey{Area: 1200}).Fill(&a.vol, s.m.HubbleDistance(), s.base.Volume, s.xlo, s.xhi, s.st)
}

// M comes back from m(z) with A, K and e to 1e-9 mag, and no row of the survey
// has a status.
func TestMagnitudesRecovered(t *testing.T) {
	s := newSurvey(t)
	s.redshifts()
	s.distances()
	for j := range s.bands {
		d := &s.bands[j]
		truth := make([]float64, batch)
		for i := range truth {
			truth[i] = -18 - 5*float64(i)/batch
			m := truth[i] + 2.285*d.ebv[i] + w(s.m, d.set.Each[0], d.evolution, s.zf[i], s.obs[i], s.fr[i])
			d.flux[i] = math.Pow(10, -0.4*(m-22.5))
		}
		s.photometry()
		for i := range truth {
			if !(math.Abs(d.abs[i]-truth[i]) <= 1e-9) {
				t.Fatalf("band %d, row %d: M = %.12f, want %.12f", j, i, d.abs[i], truth[i])
			}
		}
	}
	for i, bits := range s.st {
		if bits != 0 {
			t.Fatalf("row %d: status %d", i, bits)
		}
	}
}

// Every output of the batch, to the last bit, whatever the machine: run it with
// GOAMD64=v1 and v3, GODEBUG=cpu.fma=off, and on arm64. The sum moves when a
// formula does.
func TestSameBits(t *testing.T) {
	s := newSurvey(t)
	s.redshifts()
	s.distances()
	s.photometry()
	s.errors()
	s.intervals()
	s.selections()
	h := fnv.New64a()
	for _, v := range [][]float64{s.zf, s.zo, s.obs, s.fr, s.shift, s.da, s.dl, s.mu, s.lo, s.hi} {
		binary.Write(h, binary.LittleEndian, v)
	}
	for j := range s.bands {
		d := &s.bands[j]
		for _, v := range [][]float64{d.m, d.sm, d.ext, d.k, d.slope, d.e, d.abs, d.lum, d.sabs, d.slum, d.zlo, d.zhi} {
			binary.Write(h, binary.LittleEndian, v)
		}
	}
	v := &s.bands[0].vol
	for _, v := range [][]float64{v.Vmax, v.OverVmax, v.Weight} {
		binary.Write(h, binary.LittleEndian, v)
	}
	const want = 0x120a4adfdc534d0f
	if got := h.Sum64(); got != want {
		t.Errorf("outputs sum to %#x, want %#x", got, uint64(want))
	}
}

func TestBatchesDoNotAllocate(t *testing.T) {
	s := newSurvey(t)
	all := func() {
		s.redshifts()
		s.distances()
		s.photometry()
		s.intervals()
		s.selections()
	}
	all()
	if n := testing.AllocsPerRun(3, all); n > 8 { // a few headers a batch, nothing a row
		t.Errorf("%v allocations a batch of %d rows", n, batch)
	}
}

func BenchmarkSurvey(b *testing.B) {
	s := newSurvey(b)
	s.redshifts()
	s.distances()
	s.photometry()
	for _, g := range []struct {
		name string
		f    func()
	}{
		{"redshifts", s.redshifts}, {"distances", s.distances}, {"photometry", s.photometry}, {"errors", s.errors},
		{"intervals", s.intervals}, {"selections", s.selections}, {"selections, no bright limit", func() {
			for j := range s.bands {
				s.bands[j].sel.limits.Bright = math.Inf(-1)
			}
			s.selections()
		}},
		{"everything, no bright limit", func() {
			s.redshifts()
			s.distances()
			s.photometry()
			s.errors()
			s.intervals()
			s.selections()
		}},
	} {
		b.Run(g.name, func(b *testing.B) {
			report := cpu(b, batch)
			for b.Loop() {
				g.f()
			}
			report()
		})
	}
}
