package selection

import (
	"math"
	"math/rand/v2"
	"testing"

	"catenrich/cosmo"
	"catenrich/cosmo/photo"
	"catenrich/internal/status"
	"catenrich/internal/table"
)

// A Schechter function (Schechter 1976, ApJ 203, 297) in magnitudes,
// Phi* 0.4 ln10 10^(0.4(α+1)(M*-M)) exp(-10^(0.4(M*-M))), with invented numbers.
const (
	mStar    = -20.8
	faintEnd = -1.05
	bright   = -24.0
	faint    = -17.5
)

func schechter(mag float64) float64 {
	x := math.Pow(10, 0.4*(mStar-mag))
	return 0.4 * math.Ln10 * math.Pow(x, faintEnd+1) * math.Exp(-x)
}

// simulate draws n objects that a survey of the limits detects: M from the
// Schechter function, z from the comoving volume, kept if m is within the
// limits. It returns how many it drew for that.
func simulate(m *cosmo.Model, k photo.Correction, lim Limits, n int, rng *rand.Rand) (r *Rows, mags []float64, drawn int) {
	grid := make([]float64, 4001) // z at equal steps of volume, by interpolation
	all := m.At(cosmo.Volume, lim.Zmax)
	const fine = 20000
	for i, j := 0, 0; i <= fine; i++ {
		z := lim.Zmax * float64(i) / fine
		v := 0.0
		if z > 0 {
			v = m.At(cosmo.Volume, z) / all
		}
		for ; j < len(grid) && float64(j)/float64(len(grid)-1) <= v; j++ {
			grid[j] = z
		}
	}
	grid[len(grid)-1] = lim.Zmax
	// Where already the near end of a step is too faint, w rising, NaN stands for z.
	drawZ := func(mag float64) float64 {
		// Within a step the volume is refined by bisection: the sample must be exact.
		u := rng.Float64()
		i := int(u * float64(len(grid)-1))
		lo, hi := math.Max(grid[max(i-1, 0)], 1e-9), grid[min(i+2, len(grid)-1)]
		if mag+w(m, k, photo.Evolution{}, lo, 1, 1) > lim.Faint {
			return math.NaN()
		}
		for range 40 {
			mid := 0.5 * (lo + hi)
			if m.At(cosmo.Volume, mid) < u*all {
				lo = mid
			} else {
				hi = mid
			}
		}
		return 0.5 * (lo + hi)
	}
	peak := schechter(faint) // it falls toward the bright end
	r = &Rows{}
	for len(mags) < n {
		mag := bright + (faint-bright)*rng.Float64()
		if rng.Float64()*peak > schechter(mag) {
			continue
		}
		drawn++
		z := drawZ(mag)
		offset := w(m, k, photo.Evolution{}, z, 1, 1)
		if app := mag + offset; app >= lim.Bright && app <= lim.Faint {
			mags = append(mags, mag)
			r.Z, r.Apparent, r.Offset = append(r.Z, z), append(r.Apparent, app), append(r.Offset, offset)
		}
	}
	return r, mags, drawn
}

func vOverVmax(m *cosmo.Model, k photo.Correction, lim Limits, r *Rows, t *testing.T) (mean float64, v Volumes) {
	n := len(r.Z)
	zmin, zmax, st := make([]float64, n), make([]float64, n), make([]int32, n)
	New(m, photo.Single(k), photo.Evolution{}, lim).Roots(zmin, zmax, r, st)
	v = Volumes{Vmax: make([]float64, n), OverVmax: make([]float64, n), Weight: make([]float64, n)}
	fillVolumes(&Survey{Area: 1200}, &v, m, r.Z, zmin, zmax, st)
	for i, x := range v.OverVmax {
		if st[i] != 0 || !(x >= 0 && x <= 1) {
			t.Fatalf("row %d: z %v, [%v, %v]: V/Vmax %v, status %d", i, r.Z[i], zmin[i], zmax[i], x, st[i])
		}
		mean += x / float64(n)
	}
	return mean, v
}

// A complete, unevolving sample has <V/Vmax> = 0.5 ± 1/sqrt(12 N) (Schmidt 1968),
// and its weights give the luminosity function back. The same sample without
// some of its faint objects must fail.
func TestSimulatedSample(t *testing.T) {
	m := models(t)["flat"]
	k := photo.PowerLaw{Alpha: -2}
	lim := Limits{Bright: 14.5, Faint: 19.5, Zmin: 0.01, Zmax: 0.35}
	rng := rand.New(rand.NewPCG(2026, 1))
	const n = 100000
	// Objects are drawn from z = 0 on; those nearer than Zmin are none of the sample.
	all, mags, drawn := simulate(m, k, lim, n, rng)
	r := &Rows{}
	var kept []float64
	for i, z := range all.Z {
		if z >= lim.Zmin {
			r.Z, r.Apparent, r.Offset = append(r.Z, z), append(r.Apparent, all.Apparent[i]), append(r.Offset, all.Offset[i])
			kept = append(kept, mags[i])
		}
	}
	tolerance := func(n int) float64 { return 3 / math.Sqrt(12*float64(n)) }
	mean, v := vOverVmax(m, k, lim, r, t)
	if math.Abs(mean-0.5) > tolerance(len(r.Z)) {
		t.Errorf("<V/Vmax> = %.5f of %d, want 0.5 ± %.5f", mean, len(r.Z), tolerance(len(r.Z)))
	}

	// drawn objects fill V_C(zmax) with the Schechter shape between bright and faint.
	norm, steps := 0.0, 20000
	for i := range steps {
		norm += schechter(bright+(faint-bright)*(float64(i)+0.5)/float64(steps)) * (faint - bright) / float64(steps)
	}
	dh := m.HubbleDistance()
	density := float64(drawn) / (m.At(cosmo.Volume, lim.Zmax) * dh * dh * dh) / norm // of Phi = density * schechter, whole sky
	const bins = 12
	var phi, square, want [bins]float64
	width := (faint - bright) / bins
	for i, mag := range kept {
		b := int((mag - bright) / width)
		weight := v.Weight[i] * 1200 / WholeSky // the sample is of the whole sky
		phi[b] += weight / width
		square[b] += weight * weight / (width * width)
	}
	chi2, used := 0.0, 0
	for b := range bins {
		for i := range 200 {
			want[b] += density * schechter(bright+width*(float64(b)+(float64(i)+0.5)/200)) / 200
		}
		if sigma := math.Sqrt(square[b]); phi[b] > 0 && sigma < 0.2*phi[b] {
			d := (phi[b] - want[b]) / sigma
			if math.Abs(d) > 4 {
				t.Errorf("Phi(%.2f) = %.4g, want %.4g: %.1f σ", bright+width*(float64(b)+0.5), phi[b], want[b], d)
			}
			chi2, used = chi2+d*d, used+1
		}
	}
	if used < 8 || chi2 > float64(used)+4*math.Sqrt(2*float64(used)) {
		t.Errorf("the Schechter function: chi2 = %.1f in %d bins", chi2, used)
	}

	// A third of what is within 0.75 mag of the limit was never found.
	part := &Rows{}
	for i := range r.Z {
		if r.Apparent[i] > lim.Faint-0.75 && rng.Float64() < 1.0/3 {
			continue
		}
		part.Z, part.Apparent, part.Offset = append(part.Z, r.Z[i]), append(part.Apparent, r.Apparent[i]), append(part.Offset, r.Offset[i])
	}
	if mean, _ := vOverVmax(m, k, lim, part, t); math.Abs(mean-0.5) <= tolerance(len(part.Z)) {
		t.Errorf("<V/Vmax> = %.5f of an incomplete sample passes as complete", mean)
	}
}

// As z → 0 an object 1 mag above the limit has V/Vmax = 10^-0.6 = 0.25119
// (analytic; Schmidt 1968), to 1e-3 at z = 1e-4.
func TestNearbyVolume(t *testing.T) {
	m := models(t)["flat"]
	const z = 1e-4
	r := &Rows{Z: []float64{z}, Apparent: []float64{18.5}, Offset: []float64{w(m, photo.None{}, photo.Evolution{}, z, 1, 1)}}
	mean, v := vOverVmax(m, photo.None{}, Limits{Bright: math.Inf(-1), Faint: 19.5, Zmax: 1}, r, t)
	if math.Abs(mean-0.25119) > 1e-3 {
		t.Errorf("V/Vmax = %.6f, want 0.25119 ± 0.001", mean)
	}
	// The volume of the sky's fraction within D_C, 4π/3 D³ at this z.
	zmax := z * math.Pow(10, 0.2)
	d := m.HubbleDistance() * zmax
	if want := 1200 / 41252.96 * 4 * math.Pi / 3 * d * d * d; math.Abs(v.Vmax[0]-want) > 1e-3*want {
		t.Errorf("Vmax = %v, want %v", v.Vmax[0], want)
	}
	if got := v.Weight[0] * v.Vmax[0]; math.Abs(got-1) > 1e-15 {
		t.Errorf("weight times Vmax = %v, want 1", got)
	}
}

func TestIntersect(t *testing.T) {
	zmin, zmax := []float64{0.1, 0.1, math.NaN()}, []float64{0.5, 0.5, 0.5}
	Intersect(zmin, zmax, []float64{0.2, math.NaN(), 0.1}, []float64{0.9, 0.2, 0.2})
	if zmin[0] != 0.2 || zmax[0] != 0.5 || zmin[1] == zmin[1] || zmin[2] == zmin[2] {
		t.Errorf("[%v, %v]", zmin, zmax)
	}
}

func TestVolumesStatus(t *testing.T) {
	m := models(t)["flat"]
	z, lo, hi := []float64{0.1, 0.1, 0.1, 0.1, math.NaN()}, []float64{0, 0, 0, 0.1, 0}, []float64{0.3, 0.3, 0.3, 0.1, 0.3}
	s := &Survey{Per: []float64{100, 0, 100, 100, 100}, Completeness: []float64{0.5, 1, 0, 1, 1}}
	v := Volumes{Vmax: make([]float64, 5), OverVmax: make([]float64, 5), Weight: make([]float64, 5)}
	st := make([]int32, 5)
	fillVolumes(s, &v, m, z, lo, hi, st)
	for i, want := range []int32{0, status.Input, status.Input, status.Selection, 0} {
		if st[i] != want {
			t.Errorf("row %d: status %d, want %d", i, st[i], want)
		}
	}
	if math.Abs(v.Weight[0]*v.Vmax[0]-2) > 1e-15 || v.Vmax[1] == v.Vmax[1] || v.Weight[2] == v.Weight[2] || v.OverVmax[3] == v.OverVmax[3] || v.OverVmax[4] == v.OverVmax[4] {
		t.Errorf("%+v", v)
	}
}

func TestCut(t *testing.T) {
	if Out != table.False || In != table.True || Unknown != table.Null {
		t.Error("flags are not those of internal/table")
	}
	in := make([]uint8, 5)
	c := Cut{Brightest: math.Inf(-1), Faintest: -20, Zmin: 0.02, Zmax: 0.1}
	c.Flags(in, []float64{0.05, 0.05, 0.2, math.NaN(), 0.05}, []float64{-21, -19, -21, -21, math.NaN()})
	for i, want := range []uint8{In, Out, Out, Unknown, Unknown} {
		if in[i] != want {
			t.Errorf("row %d: %d, want %d", i, in[i], want)
		}
	}
}

func TestLimitsAreChecked(t *testing.T) {
	inf := math.Inf(1)
	for _, l := range []Limits{
		{Bright: 20, Faint: 19, Zmax: 1}, {Bright: math.NaN(), Zmax: 1}, {Faint: 19, Zmin: -0.1, Zmax: 1},
		{Faint: 19, Zmin: 1, Zmax: 1}, {Faint: 19, Zmax: 1e5}, {Faint: 19, Zmax: math.NaN()},
	} {
		if l.Validate("main") == nil {
			t.Errorf("%+v passes", l)
		}
	}
	if err := (Limits{Bright: -inf, Faint: 19, Zmax: 1}).Validate("main"); err != nil {
		t.Error(err)
	}
	for _, a := range []float64{0, -1, 41254, math.NaN()} {
		if ValidateArea("main", a) == nil {
			t.Errorf("area %v passes", a)
		}
	}
	if math.Abs(WholeSky-4*math.Pi*(180/math.Pi)*(180/math.Pi)) > 1e-11 {
		t.Error("the sky is not whole")
	}
}

// fillVolumes takes the steps from roots to volumes.
func fillVolumes(s *Survey, v *Volumes, m *cosmo.Model, z, zmin, zmax []float64, st []int32) {
	var own cosmo.Base
	m.Fill(&own, cosmo.Volume, z)
	low, all := make([]float64, len(z)), make([]float64, len(z))
	Shells(low, all, m, zmin, zmax, new(Work), st)
	s.Fill(v, m.HubbleDistance(), own.Volume, low, all, st)
}
