package frame

import (
	"math"
	"math/rand/v2"
	"testing"
)

// With a frame and peculiar velocities both on, D_L = (1+z_obs)² D_A to 1e-14,
// and both are what Davis et al. 2011 write down.
func TestReciprocity(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 4))
	const n = 1000
	s := func() []float64 { return make([]float64, n) }
	ra, dec, zin, v, dm := s(), s(), s(), s(), s()
	zframe, zobs, zcos, scratch, obs, fr, da, dl, shift := s(), s(), s(), s(), s(), s(), s(), s(), s()
	for i := range n {
		ra[i], dec[i] = 360*rng.Float64(), 180*rng.Float64()-90
		zin[i], v[i], dm[i] = math.Pow(10, -2+3*rng.Float64()), 600*rng.NormFloat64(), 4000*rng.Float64()
	}
	st := make([]int32, n)
	var u Vectors
	Directions(&u, ra, dec, st)
	r, err := NewRoute(Heliocentric, CMB, true)
	if err != nil {
		t.Fatal(err)
	}
	r.Apply(zframe, zobs, zin, scratch, &u)
	Peculiar(zcos, zframe, v, st)
	Ratios(obs, fr, zobs, zframe, zcos)
	AngularDiameterDistances(da, dm, zcos, obs, fr)
	LuminosityDistances(dl, dm, zcos, obs, fr)
	ModulusShifts(shift, obs, fr)
	for i := range n {
		if st[i] != 0 {
			t.Fatalf("row %d: status %d", i, st[i])
		}
		want := (1 + zobs[i]) * (1 + zobs[i]) * da[i]
		near(t, "D_L", dl[i], want, 1e-14*want, "Etherington 1933")
		want = dm[i] * (1 + zframe[i]) / ((1 + zcos[i]) * (1 + zobs[i]))
		near(t, "D_A", da[i], want, 1e-14*want, "Davis et al. 2011")
		want = 5 * math.Log10(dl[i]/(dm[i]*(1+zcos[i])))
		near(t, "modulus shift", shift[i], want, 1e-14, "definition")
	}

	// Without velocities D_A = D_M/(1+z_obs) and D_L = (1+z_obs) D_M (Calcino & Davis 2017).
	Ratios(obs, fr, zobs, zframe, zframe)
	AngularDiameterDistances(da, dm, zframe, obs, fr)
	LuminosityDistances(dl, dm, zframe, obs, fr)
	for i := range n {
		near(t, "D_A without v_p", da[i], dm[i]/(1+zobs[i]), 1e-14*da[i], "Calcino & Davis 2017")
		near(t, "D_L without v_p", dl[i], dm[i]*(1+zobs[i]), 1e-14*dl[i], "Calcino & Davis 2017")
	}

	// With nothing but z the ratios are 1, bit for bit.
	Ratios(obs, fr, zin, zin, zin)
	for i := range n {
		if obs[i] != 1 || fr[i] != 1 {
			t.Fatalf("ratios %v, %v of equal redshifts", obs[i], fr[i])
		}
	}
}
