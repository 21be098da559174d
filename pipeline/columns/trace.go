package columns

import "math"

// A Trace is what a row's columns were made of, whatever the model. A term that
// the row does not have, or that no column reads, is NaN.
type Trace struct {
	ZIn    float64 // as the catalogue gives it, or from its velocity
	ZFrame float64 // in the frame of the distances
	ZObs   float64 // as observed at the Sun
	ZCos   float64 // of the expansion alone
	ZModel float64 // the same, NaN where columns of the model are null
	SigmaZ float64 // standard error of ZIn

	X, Y, Z float64 // unit vector toward the object, ICRS axes

	Bands []BandTrace // as many as the job has
}

// A BandTrace is one band's part of a Trace, in magnitudes.
type BandTrace struct{ Apparent, Extinction, K, Evolution float64 }

// Trace returns what the ith row of the last batch was made of, if that had no
// more rows than one span.
func (s *Scratch) Trace(i int) Trace {
	r := &s.rows
	t := Trace{ZIn: r.ZIn[i], ZFrame: r.ZFrame[i], ZObs: r.ZObs[i], ZCos: r.ZCos[i], ZModel: r.ZModel[i]}
	t.SigmaZ, t.X, t.Y, t.Z = math.NaN(), math.NaN(), math.NaN(), math.NaN()
	if s.bound.terms&errorTerm != 0 {
		t.SigmaZ = r.buffers.sigma[i]
	}
	if s.bound.redshift.directions {
		t.X, t.Y, t.Z = r.Toward.X[i], r.Toward.Y[i], r.Toward.Z[i]
	}
	for k := range r.bands {
		b := &r.bands[k]
		read := func(term Term, v []float64) float64 {
			if b.terms&term == 0 {
				return math.NaN()
			}
			return v[i]
		}
		t.Bands = append(t.Bands, BandTrace{
			read(apparentTerm, b.apparent), read(extinctionTerm, b.extinction), read(kTerm, b.k), read(evolutionTerm, b.evolution),
		})
	}
	return t
}
