package columns

import (
	"math"

	"catenrich/cosmo"
	"catenrich/internal/status"
	"catenrich/internal/table"
	"catenrich/pipeline/job"
)

// redshifter turns the catalogue's redshift or velocity into the redshifts of
// a row.
type redshifter struct {
	at         int
	convention string  // "" for a redshift
	unit       float64 // km/s in one unit of the velocity
	low, high  float64 // valid range of the redshift as given
	signed     bool    // negative redshifts get their formal continuation
}

func newRedshifter(s *job.Settings, where map[job.Role]int) redshifter {
	r := redshifter{
		convention: s.Redshift.Convention, unit: s.Redshift.VelocityUnit, signed: s.Redshift.Signed,
		low: math.Inf(-1), high: math.Inf(1),
	}
	if at, ok := where[job.RoleVelocity]; ok {
		r.at = at
	} else {
		r.at = where[job.RoleRedshift]
	}
	if valid := s.Redshift.Valid; len(valid) == 2 {
		r.low, r.high = valid[0], valid[1]
	}
	return r
}

// resize gives the span n rows.
func (r *Rows) resize(n int) {
	r.ZCos, r.ZModel = r.ZCos[:n], r.ZModel[:n]
	r.ZObs, r.XObs = r.ZObs[:n], r.XObs[:n]
}

// drop takes every redshift from row i, for the reason bit.
func (r *Rows) drop(i int, bit int32) {
	r.Status[i] |= bit
	r.ZCos[i], r.ZModel[i] = math.NaN(), math.NaN()
	r.ZObs[i], r.XObs[i] = math.NaN(), math.NaN()
}

// fill computes the redshifts of the rows of the span that starts at lo.
func (z *redshifter) fill(batch *table.Batch, r *Rows, lo int) {
	in := &batch.In[z.at]
	values, states := in.Float[lo:lo+len(r.ZCos)], in.State[lo:lo+len(r.ZCos)]
	for i, v := range values {
		if states[i] != table.Good {
			bit := status.Missing
			if states[i] == table.Malformed {
				bit = status.NotNumber
			}
			r.drop(i, bit)
			continue
		}
		if z.convention != "" {
			v = fromVelocity(z.convention, v*z.unit/cosmo.SpeedOfLight)
		}
		z.set(r, i, v)
	}
}

// set stores the redshift v of row i, or the reason why it has none.
func (z *redshifter) set(r *Rows, i int, v float64) {
	switch {
	case !(v > -1 && v <= math.MaxFloat64):
		r.drop(i, status.Redshift)
		return
	case v < z.low || v > z.high:
		r.drop(i, status.Range)
		return
	}
	r.ZCos[i], r.ZModel[i] = v, v
	r.ZObs[i], r.XObs[i] = v, 1+v
	if v <= 0 {
		r.Status[i] |= status.NotPositive
		if v < 0 && !z.signed {
			r.ZModel[i] = math.NaN()
		}
	}
	if v <= cosmo.MinRedshift || v > cosmo.MaxRedshift {
		r.Status[i] |= status.Range
		r.ZModel[i] = math.NaN()
	}
}

// fromVelocity turns beta = v/c into a redshift by the convention of the
// catalogue. A velocity that the convention does not allow gives NaN.
func fromVelocity(convention string, beta float64) float64 {
	switch convention {
	case "optical": // z = v/c
		return beta
	case "radio": // 1+z = 1/(1-v/c), so z = beta/(1-beta)
		if beta >= 1 {
			return math.NaN()
		}
		return beta / (1 - beta)
	}
	// relativistic: 1+z = sqrt((1+beta)/(1-beta)), written so that a small z
	// keeps its digits: z = 2 beta/(1-beta) / (1 + sqrt((1+beta)/(1-beta)))
	if beta <= -1 || beta >= 1 {
		return math.NaN()
	}
	return 2 * beta / (1 - beta) / (1 + math.Sqrt((1+beta)/(1-beta)))
}
