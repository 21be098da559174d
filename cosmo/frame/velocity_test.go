package frame

import (
	"math"
	"math/big"
	"testing"

	"catenrich/internal/status"
)

// bigRedshift is 1+z - 1 in 300-bit arithmetic.
func bigRedshift(v float64, c Convention) float64 {
	f := func(x float64) *big.Float { return new(big.Float).SetPrec(300).SetFloat64(x) }
	op := func() *big.Float { return new(big.Float).SetPrec(300) }
	b := op().Quo(f(v), f(speedOfLight))
	var x *big.Float
	switch c {
	case Optical:
		x = op().Add(f(1), b)
	case Radio:
		x = op().Quo(f(1), op().Sub(f(1), b))
	case Relativistic:
		x = op().Sqrt(op().Quo(op().Add(f(1), b), op().Sub(f(1), b)))
	}
	z, _ := op().Sub(x, f(1)).Float64()
	return z
}

func TestConventions(t *testing.T) {
	for _, c := range []Convention{Optical, Radio, Relativistic} {
		for _, v := range []float64{0, 1e-6, 1, -300, 12345, 149000, -149000, 151000, -200000, 290000} {
			z, st := []float64{0}, []int32{0}
			Redshifts(z, []float64{v}, c, st)
			want := bigRedshift(v, c)
			// β is rounded once, and near c that moves 1-β by more than its own rounding.
			cond := 1 / (1 - math.Abs(v)/speedOfLight)
			near(t, c.String(), z[0], want, 6e-16*cond*math.Abs(want), "math/big")
		}
		if p, ok := ParseConvention(c.String()); p != c || !ok {
			t.Errorf("ParseConvention(%q) = %v, %v", c, p, ok)
		}
	}
}

func TestForbiddenVelocities(t *testing.T) {
	const c = speedOfLight
	for _, w := range []struct {
		c   Convention
		v   float64
		bit int32
	}{
		{Optical, -c, status.Redshift}, {Optical, 2 * c, 0}, {Optical, math.Inf(1), status.Redshift},
		{Radio, c, status.Redshift}, {Radio, -2 * c, 0}, {Radio, math.Inf(-1), status.Redshift},
		{Relativistic, c, status.Redshift}, {Relativistic, -c, status.Redshift}, {Relativistic, math.NaN(), 0},
	} {
		z, st := []float64{0}, []int32{0}
		Redshifts(z, []float64{w.v}, w.c, st)
		if st[0] != w.bit || (w.bit != 0 && z[0] == z[0]) {
			t.Errorf("%v, v = %v: z %v, status %d, want %d", w.c, w.v, z[0], st[0], w.bit)
		}
	}
}

// The slope against a central difference of the redshift itself.
func TestRedshiftErrors(t *testing.T) {
	for _, c := range []Convention{Optical, Radio, Relativistic} {
		for _, v := range []float64{-50000, 0, 3000, 200000} {
			s := []float64{0}
			RedshiftErrors(s, []float64{20}, []float64{v}, c)
			want := 20 * (bigRedshift(v+1, c) - bigRedshift(v-1, c)) / 2
			near(t, c.String()+" σ_z", s[0], want, 1e-8*want, "difference quotient, 300 bits")
		}
	}
}

func TestValid(t *testing.T) {
	z := []float64{0.5, -1, -2, 13, -0.5, math.Inf(1), math.NaN()}
	st := make([]int32, len(z))
	Valid(z, 0, 12, st)
	for i, want := range []int32{0, 4, 4, 16, 16, 2, 0} {
		if st[i] != want {
			t.Errorf("row %d: status %d, want %d", i, st[i], want)
		}
		if (z[i] == z[i]) != (i == 0) {
			t.Errorf("row %d: z = %v", i, z[i])
		}
	}
}
