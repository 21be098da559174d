package ledger

import (
	"encoding/json"
	"fmt"
	"math"
)

// A Histogram counts numbers over one [Axis], or pairs of them over two. Only
// histograms over equal axes can be merged, and merging is addition: the order
// does not matter. NaN, alone or in a pair, is counted nowhere.
//
// In JSON it is {"axes": [...], "cells": [[key, count], ...]}, with a key for
// each axis, as [Axis] defines them, in ascending order; cells with nothing in
// them are left out.
type Histogram struct {
	axes   []Axis
	counts []int64 // the last axis runs fastest; each has a place below and one above

	// A histogram that was read has only its cells, by their places,
	// until one counts with it: a release may have a hundred thousand, each
	// nearly empty.
	sparse []place

	edges [2][]float64 // for Add alone
	at    [2][]int32
}

// A place is one of the counts.
type place struct {
	at    int
	count int64
}

// histogramBatch is how many numbers are placed before they are counted.
const histogramBatch = 512

// NewHistogram returns an empty histogram over one or two axes. Axes that
// cannot be are a mistake of the caller, and panic.
func NewHistogram(axes ...Axis) *Histogram {
	h, err := newHistogram(axes)
	if err != nil {
		panic("ledger: " + err.Error())
	}
	return h
}

func newHistogram(axes []Axis) (*Histogram, error) {
	if err := validAxes(axes); err != nil {
		return nil, err
	}
	h := &Histogram{axes: axes}
	h.unfold()
	return h, nil
}

// validAxes refuses what no histogram has.
func validAxes(axes []Axis) error {
	if len(axes) < 1 || len(axes) > 2 {
		return fmt.Errorf("a histogram over %d axes", len(axes))
	}
	size := int64(1)
	for i := range axes {
		if err := axes[i].validate(); err != nil {
			return err
		}
		if size *= axes[i].bins() + 2; size > maxBins {
			return fmt.Errorf("a histogram of more than %d cells", maxBins)
		}
	}
	return nil
}

// unfold makes the counts of a histogram that has only cells.
func (h *Histogram) unfold() {
	if h.counts != nil {
		return
	}
	size := int64(1)
	for i := range h.axes {
		size *= h.axes[i].bins() + 2
	}
	h.counts = make([]int64, size)
	for _, p := range h.sparse {
		h.counts[p.at] += p.count
	}
	h.sparse = nil
}

// ready makes what placing numbers needs.
func (h *Histogram) ready() {
	h.unfold()
	for i := range h.axes {
		if h.at[i] == nil {
			h.edges[i] = h.axes[i].edges()
			h.at[i] = make([]int32, histogramBatch)
		}
	}
}

// Axes returns what the histogram counts over.
func (h *Histogram) Axes() []Axis { return h.axes }

// Add counts every number of v, in a histogram over one axis.
func (h *Histogram) Add(v []float64) {
	if len(h.axes) != 1 {
		panic("ledger: Add to a histogram over two axes")
	}
	if h.axes[0].Scale == "binary" {
		h.unfold()
		h.addBinary(v)
		return
	}
	h.ready()
	for len(v) > 0 {
		n := min(len(v), histogramBatch)
		at := h.at[0][:n]
		h.axes[0].places(v[:n], h.edges[0], at)
		for _, k := range at {
			if k >= 0 {
				h.counts[k]++
			}
		}
		v = v[n:]
	}
}

// addBinary counts every number of v over a binary axis. The bits of positive
// float64s are in the order of the numbers: one comparison finds those in the
// range, and what is not among them (negative, too far, NaN) goes the long way.
func (h *Histogram) addBinary(v []float64) {
	a := &h.axes[0]
	plus, shift := a.Plus, fractionBits-a.Bits
	first, end := a.edgeOfX(a.First), a.edgeOfX(a.End)
	base := math.Float64bits(first) >> shift
	counts := h.counts[1 : len(h.counts)-1]
	for _, x := range v {
		t := x + plus
		if k := math.Float64bits(t)>>shift - base; k < uint64(len(counts)) {
			counts[k]++
		} else if place := a.outside(t, first, end); place >= 0 {
			h.counts[place]++
		}
	}
}

// AddPairs counts every pair x[i], y[i], in a histogram over two axes.
func (h *Histogram) AddPairs(x, y []float64) {
	if len(h.axes) != 2 || len(x) != len(y) {
		panic("ledger: AddPairs of slices of unequal length, or over one axis")
	}
	h.ready()
	stride := int32(h.axes[1].bins() + 2)
	for len(x) > 0 {
		n := min(len(x), histogramBatch)
		a, b := h.at[0][:n], h.at[1][:n]
		h.axes[0].places(x[:n], h.edges[0], a)
		h.axes[1].places(y[:n], h.edges[1], b)
		for i := range a {
			if a[i] >= 0 && b[i] >= 0 {
				h.counts[a[i]*stride+b[i]]++
			}
		}
		x, y = x[n:], y[n:]
	}
}

// Merge adds the counts of o, which must have equal axes.
func (h *Histogram) Merge(o *Histogram) error {
	if len(h.axes) != len(o.axes) {
		return fmt.Errorf("histograms over %d and %d axes cannot be added", len(h.axes), len(o.axes))
	}
	for i := range h.axes {
		if h.axes[i] != o.axes[i] {
			return fmt.Errorf("histograms over different axes cannot be added: %+v and %+v", h.axes[i], o.axes[i])
		}
	}
	h.unfold()
	for i, n := range o.counts {
		h.counts[i] += n
	}
	for _, p := range o.sparse {
		h.counts[p.at] += p.count
	}
	return nil
}

// A Cell is one place of a histogram with something in it.
type Cell struct {
	Keys  [2]int64 // of the axes; the second is 0 if there is but one
	Count int64
}

// Cells calls yield for every cell with something in it, in ascending order
// of keys. It can be ranged over.
func (h *Histogram) Cells(yield func(Cell) bool) {
	h.unfold()
	stride := 1
	if len(h.axes) == 2 {
		stride = int(h.axes[1].bins() + 2)
	}
	for i, n := range h.counts {
		if n == 0 {
			continue
		}
		c := Cell{Count: n}
		c.Keys[0] = int64(i/stride) + h.axes[0].First - 1
		if len(h.axes) == 2 {
			c.Keys[1] = int64(i%stride) + h.axes[1].First - 1
		}
		if !yield(c) {
			return
		}
	}
}

// histogramJSON is a Histogram in a manifest.
type histogramJSON struct {
	Axes  []Axis    `json:"axes"`
	Cells [][]int64 `json:"cells"`
}

// MarshalJSON implements [json.Marshaler].
func (h *Histogram) MarshalJSON() ([]byte, error) {
	j := histogramJSON{Axes: h.axes, Cells: [][]int64{}}
	for c := range h.Cells {
		j.Cells = append(j.Cells, append(c.Keys[:len(h.axes):len(h.axes)], c.Count))
	}
	return json.Marshal(j)
}

// UnmarshalJSON implements [json.Unmarshaler].
func (h *Histogram) UnmarshalJSON(text []byte) error {
	var j histogramJSON
	if err := json.Unmarshal(text, &j); err != nil {
		return err
	}
	if err := validAxes(j.Axes); err != nil {
		return err
	}
	fresh := &Histogram{axes: j.Axes}
	for _, c := range j.Cells {
		if len(c) != len(j.Axes)+1 || c[len(c)-1] <= 0 {
			return fmt.Errorf("a histogram cell %v over %d axes", c, len(j.Axes))
		}
		at := int64(0)
		for i := range j.Axes {
			a := &j.Axes[i]
			place := c[i] - a.First + 1
			if place < 0 || place > a.bins()+1 {
				return fmt.Errorf("a histogram cell with the key %d outside its axis %q", c[i], a.Name)
			}
			at = at*(a.bins()+2) + place
		}
		fresh.sparse = append(fresh.sparse, place{int(at), c[len(c)-1]})
	}
	*h = *fresh
	return nil
}
