package cosmo

import (
	"math"
	"testing"
	"time"
)

// Any finite numbers are either refused or served: no panic, no hang.
func TestHostileParams(t *testing.T) {
	size := []float64{-1e300, -40, 0, 1e-300, 0.3, 50, 1e300}
	if testing.Short() {
		size = []float64{-40, 0, 0.3, 1e300}
	}
	z := []float64{-0.98, -1e-300, 5e-324, 1e-9, 0.5, 1e4}
	start, accepted := time.Now(), 0
	try := func(p Params) {
		began := time.Now()
		m, err := New(p)
		if err == nil {
			accepted++
			var b Base
			m.Fill(&b, everything, z)
			m.EventHorizon()
			m.HubbleSphereRedshift()
		}
		if d := time.Since(began); d > 20*time.Second {
			t.Errorf("%+v took %v", p, d)
		}
	}
	for _, w0 := range size {
		for _, wa := range size {
			for _, de := range []float64{-1, 0.7} {
				try(Params{H0: 70, OmegaM: 0.3, OmegaDE: de, W0: w0, Wa: wa})
			}
		}
	}
	for _, v := range size {
		try(Params{H0: 70, OmegaM: math.Abs(v), Flat: true, W0: -1})
		try(Params{H0: math.Abs(v), OmegaM: 0.3, OmegaDE: 0.7, W0: -1, TCMB: 2.7, Neff: 3})
		try(Params{H0: 70, OmegaM: 0.3, OmegaDE: 0.7, W0: -1, TCMB: 2.7, Neff: math.Abs(v), NeutrinoMasses: []float64{1e-300, 0.1, 1e10}})
	}
	// within 1e-11 of a bounce
	c := math.Cosh(math.Acosh(0.7/0.3) / 3)
	for _, off := range []float64{1e-8, 1e-10, 1e-11, 1e-12, 1e-13} {
		try(Params{H0: 70, OmegaM: 0.3, OmegaDE: 1.2 * c * c * c * (1 - off), W0: -1})
	}
	if accepted == 0 {
		t.Error("every model was refused")
	}
	t.Logf("%d models accepted in %v", accepted, time.Since(start))
}
