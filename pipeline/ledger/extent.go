package ledger

import (
	"encoding/json"
	"errors"
	"math"
)

// An Extent is the range of the numbers it was given. Its zero value has seen
// none. NaN and the infinities are passed over and not counted.
type Extent struct {
	count    int64
	min, max float64
}

// Add widens the extent by every number of v, and returns how many cells of v
// hold none.
func (e *Extent) Add(v []float64) (skipped int) {
	low, high := math.Inf(1), math.Inf(-1)
	if e.count > 0 {
		low, high = e.min, e.max
	}
	for _, x := range v {
		if x >= low && x <= high { // nearly always; never a NaN
			continue
		}
		if !(math.Abs(x) <= math.MaxFloat64) {
			skipped++
			continue
		}
		if x < low {
			low = x
		}
		if x > high {
			high = x
		}
	}
	if n := len(v) - skipped; n > 0 {
		e.count, e.min, e.max = e.count+int64(n), low, high
	}
	return skipped
}

// Merge widens e by what o has seen.
func (e *Extent) Merge(o *Extent) {
	switch {
	case o.count == 0:
		return
	case e.count == 0:
		*e = *o
		return
	}
	e.count, e.min, e.max = e.count+o.count, min(e.min, o.min), max(e.max, o.max)
}

// Count returns how many numbers were added.
func (e *Extent) Count() int64 { return e.count }

// Range returns the least and the greatest number, NaN if there is none. A
// zero is +0, whichever zeros were seen.
func (e *Extent) Range() (low, high float64) {
	if e.count == 0 {
		return math.NaN(), math.NaN()
	}
	return e.min + 0, e.max + 0
}

// extentJSON is an Extent in a manifest.
type extentJSON struct {
	Count int64    `json:"count"`
	Min   *float64 `json:"min,omitempty"`
	Max   *float64 `json:"max,omitempty"`
}

// MarshalJSON implements [json.Marshaler].
func (e *Extent) MarshalJSON() ([]byte, error) {
	j := extentJSON{Count: e.count}
	if e.count > 0 {
		low, high := e.Range()
		j.Min, j.Max = &low, &high
	}
	return json.Marshal(j)
}

// UnmarshalJSON implements [json.Unmarshaler].
func (e *Extent) UnmarshalJSON(text []byte) error {
	var j extentJSON
	if err := json.Unmarshal(text, &j); err != nil {
		return err
	}
	*e = Extent{count: j.Count}
	switch {
	case j.Count == 0 && j.Min == nil && j.Max == nil:
		return nil
	case j.Count <= 0 || j.Min == nil || j.Max == nil || *j.Min > *j.Max:
		return errors.New("an extent whose count, min and max do not belong together")
	}
	e.min, e.max = *j.Min, *j.Max
	return nil
}
