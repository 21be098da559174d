package prove

import (
	"math"
	"slices"
	"strconv"
	"sync"

	"catenrich/internal/status"
	"catenrich/internal/table"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/job"
)

// Tolerance is how far a stored value may be from the recomputed one, in parts
// of its size (see columns.Bound.Judge), beside what its rounding explains.
const Tolerance = 1e-9

// A Mismatch is a cell that is not what its row makes it.
type Mismatch struct {
	Row        int64  `json:"row"` // from 1
	Column     string `json:"column"`
	Stored     string `json:"stored"`
	Recomputed string `json:"recomputed"`

	at int // of the column
}

// maxMismatches is how many a report names.
const maxMismatches = 10

// A judge compares stored cells with recomputed ones. Any number of goroutines
// may use it at once.
type judge struct {
	output *opened
	round  rounding
	lost   []bool // columns that cannot be recomputed
	unsure int32  // status bits that such columns may have set
	pool   sync.Pool

	mu    sync.Mutex
	wrong int64
	first []Mismatch // by row and column
}

func newJudge(o *opened, w *workshop) *judge {
	j := &judge{output: o, round: newRounding(&w.job.Settings), lost: make([]bool, len(o.added))}
	j.pool.New = func() any { return new(columns.Scratch) }
	for i := range o.added {
		if j.lost[i] = w.kernel.NeedsFile(i); j.lost[i] {
			j.unsure = status.Coverage | status.Selection | status.NoSuch | status.Input
		}
	}
	return j
}

// compare recomputes the rows of a batch, whose numbers are given from 0, and
// compares them with what is stored.
func (j *judge) compare(batch *table.Batch, stored []table.Column, rows []int64) {
	scratch := j.pool.Get().(*columns.Scratch)
	sizes := j.output.bound.Judge(batch, scratch)
	j.pool.Put(scratch)
	var wrong []Mismatch
	for c := range batch.Out {
		if j.lost[c] {
			continue
		}
		for i := range rows {
			if !j.same(&batch.Out[c], &stored[c], sizes[c], i) {
				wrong = append(wrong, Mismatch{
					Row: rows[i] + 1, Column: j.output.added[c].Name, Stored: shown(&stored[c], i), Recomputed: shown(&batch.Out[c], i), at: c,
				})
			}
		}
	}
	j.add(wrong)
}

// add counts mismatches and keeps the first.
func (j *judge) add(wrong []Mismatch) {
	if len(wrong) == 0 {
		return
	}
	j.mu.Lock()
	defer j.mu.Unlock()
	j.wrong += int64(len(wrong))
	j.first = append(j.first, wrong...)
	slices.SortFunc(j.first, func(a, b Mismatch) int {
		if a.Row != b.Row {
			return int(min(max(a.Row-b.Row, -1), 1))
		}
		return a.at - b.at
	})
	j.first = j.first[:min(len(j.first), maxMismatches)]
}

// same reports whether a stored cell is the recomputed one.
func (j *judge) same(computed, stored *table.Column, sizes []float64, i int) bool {
	switch computed.Kind {
	case table.Int:
		return stored.State[i] == table.Good && (int32(stored.Float[i])^computed.Int[i])&^j.unsure == 0 && stored.Float[i] == math.Trunc(stored.Float[i])
	case table.Flag:
		flag, ok := flagOf(stored, i)
		return ok && (flag == computed.Flag[i] || flag != table.Null && computed.Flag[i] != table.Null && sizes[i] <= Tolerance)
	}
	want := computed.Float[i]
	switch stored.State[i] {
	case table.Missing:
		return want != want
	case table.Malformed:
		return j.round.overflows(want)
	}
	return math.Abs(stored.Float[i]-want) <= Tolerance*sizes[i]+j.round.of(want)
}

// flagOf reads a stored flag; ok is false for anything else.
func flagOf(c *table.Column, i int) (flag uint8, ok bool) {
	if c.State[i] == table.Missing {
		return table.Null, true
	}
	switch string(c.Bytes[i]) {
	case "true":
		return table.True, true
	case "false":
		return table.False, true
	case "nan": // between blanks a null has to be something
		return table.Null, true
	}
	return table.Null, false
}

// shown is a cell as messages have it.
func shown(c *table.Column, i int) string {
	switch {
	case c.State != nil && c.State[i] == table.Missing:
		return "null"
	case c.State != nil && c.State[i] == table.Malformed:
		return "not a number"
	case c.Kind == table.Bytes:
		return string(c.Bytes[i][:min(len(c.Bytes[i]), 80)])
	case c.Kind == table.Int:
		return strconv.Itoa(int(c.Int[i]))
	case c.Kind == table.Flag:
		return [...]string{"false", "true", "null"}[c.Flag[i]]
	case c.Float[i] != c.Float[i]:
		return "null"
	}
	return strconv.FormatFloat(c.Float[i], 'g', -1, 64)
}

// A rounding is what writing does to a value.
type rounding struct {
	digits int // significant digits in text; 0: all that are needed
	narrow bool
}

func newRounding(s *job.Settings) rounding {
	return rounding{digits: s.Output.Digits, narrow: s.Output.Float == 32}
}

// of returns how far the stored value can be from v by rounding alone: half a
// unit in the last place.
func (r rounding) of(v float64) float64 {
	room := 0.0
	if r.narrow { // twice that of a float32, whose shortest text is read as a float64
		room = math.Abs(v)*0x1p-23 + 0x1p-149
	}
	if r.digits > 0 && v != 0 {
		decimal := math.Floor(math.Log10(math.Abs(v)))
		room += 0.5 * math.Pow(10, decimal-float64(r.digits)+1) * (1 + 1e-12)
	}
	return room
}

// overflows reports whether v is stored as an infinity, which reads as no
// number.
func (r rounding) overflows(v float64) bool { return r.narrow && math.Abs(v) > math.MaxFloat32 }
