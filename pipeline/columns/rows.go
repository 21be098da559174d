package columns

import (
	"math"

	"catenrich/cosmo"
	"catenrich/cosmo/frame"
	"catenrich/cosmo/spread"
	"catenrich/internal/status"
	"catenrich/internal/table"
	"catenrich/pipeline/job"
)

// Rows are a span of rows, whatever the model: their redshifts, and the terms
// that some column reads. A row that cannot have one holds NaN.
type Rows struct {
	ZIn    []float64 // as the catalogue gives it, or from its velocity
	ZFrame []float64 // in the frame of the distances
	ZObs   []float64 // as observed at the Sun
	ZCos   []float64 // of the expansion alone
	ZModel []float64 // the same, NaN where columns of the model are null
	Status []int32   // bits of the row so far

	// ObsRatio is (1+z_obs)/(1+z_cos), FrameRatio (1+z_frame)/(1+z_cos), Shift
	// the magnitudes that they add to the distance modulus. All are nil where
	// all redshifts are the same.
	ObsRatio, FrameRatio, Shift []float64

	// pace is dz_cos/dz_in, paceObs dz_obs/dz_in; of intervals only.
	pace, paceObs []float64

	Toward frame.Vectors // unit vectors, where a column or the frame needs them

	bands                []bandRows
	lines, radios, sizes []valueRows
	selections           []selectionRows
	sigmas               spread.Sigmas

	buffers rowBuffers
}

// rowBuffers are the memory of Rows. The redshifts of Rows are slices of it,
// or of one another where they are the same.
type rowBuffers struct {
	zIn, zFrame, zObs, zCos, zModel []float64
	obsRatio, frameRatio, shift     []float64
	ra, dec, scratch, sigma         []float64
	pace, paceObs                   []float64
}

func (b *rowBuffers) allocate() {
	for _, buffer := range []*[]float64{
		&b.zIn, &b.zFrame, &b.zObs, &b.zCos, &b.zModel, &b.obsRatio, &b.frameRatio, &b.shift, &b.ra, &b.dec, &b.scratch, &b.sigma, &b.pace, &b.paceObs,
	} {
		*buffer = make([]float64, span)
	}
}

// A redshifter turns what the catalogue holds into the redshifts of a row.
type redshifter struct {
	at         int // redshift or velocity
	velocity   bool
	convention frame.Convention
	unit       float64 // km/s in one unit of the velocity
	low, high  float64 // valid range of the redshift as given
	signed     bool    // negative redshifts get their formal continuation
	quality    *quality

	route        *frame.Route
	heliocentric int // column of z_obs, or -1
	peculiar     int // column of the peculiar velocity, or -1
	position     position
	directions   bool // some column needs unit vectors
	shifts       bool // some column needs Rows.Shift
	errors       errorInput
	floor        float64 // scatter of peculiar velocities, km/s
}

func newRedshifter(s *job.Settings, where func(job.Role) int, terms Term) (*redshifter, error) {
	r := &redshifter{
		at: where(job.RoleRedshift), unit: s.Redshift.VelocityUnit, signed: s.Redshift.Signed,
		low: math.Inf(-1), high: math.Inf(1),
		heliocentric: where(job.RoleRedshiftHeliocentric), peculiar: where(job.RolePeculiarVelocity),
		errors: newErrorInput(where), floor: s.Redshift.PeculiarVelocitySigma,
		position: position{ra: where(job.RoleRightAscension), dec: where(job.RoleDeclination)},
	}
	if at := where(job.RoleVelocity); at >= 0 {
		r.at, r.velocity = at, true
		r.convention, _ = frame.ParseConvention(s.Redshift.Convention)
	}
	if valid := s.Redshift.Valid; len(valid) == 2 {
		r.low, r.high = valid[0], valid[1]
	}
	if at := where(job.RoleQuality); at >= 0 {
		r.quality = newQuality(s.Redshift.QualityGood, at)
	}
	from, _ := frame.ParseFrame(s.Redshift.Frame)
	to, _ := frame.ParseFrame(s.Redshift.DistancesIn)
	var err error
	r.route, err = frame.NewRoute(from, to, r.position.ra >= 0)
	r.shifts = terms&(selectionTerm|quantileTerm) != 0
	r.directions = terms&directionTerm != 0 || r.route != nil && r.route.Positions()
	return r, err
}

// plain reports whether all redshifts of a row are the same.
func (z *redshifter) plain() bool {
	return !z.route.Positions() && z.heliocentric < 0 && z.peculiar < 0
}

// fill computes the redshifts of rows lo to hi of the batch.
func (z *redshifter) fill(batch *table.Batch, r *Rows, lo, hi int) {
	n := hi - lo
	b := &r.buffers
	r.ZIn, r.ZModel = b.zIn[:n], b.zModel[:n]
	z.read(&batch.In[z.at], r, lo)
	frame.Valid(r.ZIn, math.Inf(-1), math.Inf(1), r.Status)
	if z.directions {
		z.position.fill(batch, r, lo, hi)
	}
	r.ZFrame, r.ZObs, r.ZCos = r.ZIn, r.ZIn, r.ZIn
	r.ObsRatio, r.FrameRatio, r.Shift = nil, nil, nil
	if !z.plain() {
		z.convert(batch, r, lo, hi)
	}
	z.model(r)
	z.refuse(batch, r, lo)
}

// refuse takes the redshift from rows that the job does not believe: outside
// its valid range, or without a good quality mark. It comes last, so that all
// bits that describe a row are set, whichever comes first.
func (z *redshifter) refuse(batch *table.Batch, r *Rows, lo int) {
	all := math.IsInf(z.low, -1) && math.IsInf(z.high, 1)
	if all && z.quality == nil {
		return
	}
	for i, v := range r.ZIn {
		refused := v < z.low || v > z.high
		if refused {
			r.Status[i] |= status.Range
		}
		if !z.quality.good(batch, lo+i) {
			r.Status[i] |= status.Quality
			refused = true
		}
		if refused {
			r.ZIn[i], r.ZFrame[i], r.ZObs[i], r.ZCos[i], r.ZModel[i] = math.NaN(), math.NaN(), math.NaN(), math.NaN(), math.NaN()
		}
	}
}

// read copies the redshifts as given, and says why a cell has none.
func (z *redshifter) read(in *table.Column, r *Rows, lo int) {
	states := in.State[lo : lo+len(r.ZIn)]
	copy(r.ZIn, in.Float[lo:])
	for i, s := range states {
		switch s {
		case table.Missing:
			r.Status[i] |= status.Missing
		case table.Malformed:
			r.Status[i] |= status.NotNumber
		}
	}
	if z.velocity {
		if z.unit != 1 {
			scale(r.ZIn, r.ZIn, z.unit)
		}
		frame.Redshifts(r.ZIn, r.ZIn, z.convention, r.Status)
	}
}

// convert fills the redshifts that differ from the given one.
func (z *redshifter) convert(batch *table.Batch, r *Rows, lo, hi int) {
	n := hi - lo
	b := &r.buffers
	if z.route.Positions() {
		r.ZFrame, r.ZObs, r.ZCos = b.zFrame[:n], b.zObs[:n], b.zFrame[:n]
		z.route.Apply(r.ZFrame, r.ZObs, r.ZIn, b.scratch[:n], &r.Toward)
	}
	if z.heliocentric >= 0 {
		r.ZObs = b.zObs[:n]
		copy(r.ZObs, batch.In[z.heliocentric].Float[lo:hi])
		for i, v := range r.ZObs {
			if !(v > -1) && r.ZIn[i] == r.ZIn[i] {
				r.Status[i] |= status.Input
				r.ZObs[i] = math.NaN()
			}
		}
	}
	if z.peculiar >= 0 {
		r.ZCos = b.zCos[:n]
		frame.Peculiar(r.ZCos, r.ZFrame, batch.In[z.peculiar].Float[lo:hi], r.Status)
	}
	r.ObsRatio, r.FrameRatio = b.obsRatio[:n], b.frameRatio[:n]
	frame.Ratios(r.ObsRatio, r.FrameRatio, r.ZObs, r.ZFrame, r.ZCos)
	if z.shifts {
		r.Shift = b.shift[:n]
		frame.ModulusShifts(r.Shift, r.ObsRatio, r.FrameRatio)
	}
}

// model decides which rows have columns of the model.
func (z *redshifter) model(r *Rows) {
	for i, v := range r.ZCos {
		r.ZModel[i] = v
		if v > 0 && v <= cosmo.MaxRedshift || v != v {
			continue
		}
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
}

// A position is where the catalogue has the right ascension and declination.
type position struct{ ra, dec int }

// fill computes the unit vectors of rows lo to hi.
func (p position) fill(batch *table.Batch, r *Rows, lo, hi int) {
	ra, dec := r.buffers.ra[:hi-lo], r.buffers.dec[:hi-lo]
	angles(ra, &batch.In[p.ra], lo, frame.RightAscension)
	angles(dec, &batch.In[p.dec], lo, frame.Declination)
	frame.Directions(&r.Toward, ra, dec, r.Status)
}

// angles reads a column of angles in degrees; text may be sexagesimal.
func angles(out []float64, in *table.Column, lo int, parse func([]byte) (float64, bool)) {
	if in.Kind == table.Float {
		copy(out, in.Float[lo:])
		return
	}
	for i := range out {
		v, ok := 0.0, false
		if in.State[lo+i] == table.Good {
			v, ok = parse(in.Bytes[lo+i])
		}
		if !ok {
			v = math.NaN()
		}
		out[i] = v
	}
}

// quality marks the rows that the survey itself calls unusable.
type quality struct {
	at      int
	numbers map[float64]bool
	words   map[string]bool
}

func newQuality(good []any, at int) *quality {
	q := &quality{at: at, numbers: make(map[float64]bool), words: make(map[string]bool)}
	for _, mark := range good {
		switch mark := mark.(type) {
		case float64:
			q.numbers[mark] = true
		case string:
			q.words[mark] = true
		}
	}
	return q
}

// good reports whether a row has a good mark; without marks every row has.
func (q *quality) good(batch *table.Batch, row int) bool {
	if q == nil {
		return true
	}
	column := &batch.In[q.at]
	if column.Kind == table.Float {
		return q.numbers[column.Float[row]]
	}
	return q.words[string(column.Bytes[row])]
}
