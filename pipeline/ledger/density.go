package ledger

import (
	"encoding/json"
	"fmt"
)

// A Density adds up weights over the bins of an [Axis]: for each bin how many,
// and the exact sums of the weights and of their squares. With 1/V_max for the
// weight and the absolute magnitude on the axis it is a luminosity function
// and its errors. Memory is taken for the bins that are met only.
//
// In JSON it is {"axis": ..., "cells": [{"key": k, "weights": Sum, "squares":
// Sum}, ...]}, in ascending order of keys.
type Density struct {
	axis  Axis
	edges []float64
	at    []int32
	cells []*densityCell // the first is what lies below, the last what lies above
}

type densityCell struct {
	weights, squares Sum
	waiting          [densityBatch]float64
	n                int
}

// densityBatch is how many weights of a bin are added at a time.
const densityBatch = 64

// NewDensity returns an empty density over an axis. An axis that cannot be is
// a mistake of the caller, and panics.
func NewDensity(axis Axis) *Density {
	d, err := newDensity(axis)
	if err != nil {
		panic("ledger: " + err.Error())
	}
	return d
}

// maxDensityBins bounds what a manifest can make a density allocate.
const maxDensityBins = 1024

func newDensity(axis Axis) (*Density, error) {
	if err := axis.validate(); err != nil {
		return nil, err
	}
	if axis.bins() > maxDensityBins {
		return nil, fmt.Errorf("a density of more than %d bins", maxDensityBins)
	}
	return &Density{axis: axis, edges: axis.edges(), at: make([]int32, histogramBatch), cells: make([]*densityCell, axis.bins()+2)}, nil
}

// Axis returns what the density is over.
func (d *Density) Axis() Axis { return d.axis }

// Add adds the weight w[i] at x[i]. A pair with NaN is counted nowhere.
func (d *Density) Add(x, w []float64) {
	if len(x) != len(w) {
		panic("ledger: Density.Add of slices of unequal length")
	}
	for len(x) > 0 {
		n := min(len(x), histogramBatch)
		at := d.at[:n]
		d.axis.places(x[:n], d.edges, at)
		for i, k := range at {
			if k >= 0 && w[i] == w[i] {
				d.cell(k).add(w[i])
			}
		}
		x, w = x[n:], w[n:]
	}
}

func (d *Density) cell(k int32) *densityCell {
	if d.cells[k] == nil {
		d.cells[k] = new(densityCell)
	}
	return d.cells[k]
}

func (c *densityCell) add(w float64) {
	c.waiting[c.n] = w
	if c.n++; c.n == densityBatch {
		c.flush()
	}
}

// flush adds what waits to the sums. The square is rounded to a float64 before
// it is added, so the sum is that of the same numbers on every machine.
func (c *densityCell) flush() {
	waiting := c.waiting[:c.n]
	c.weights.Add(waiting)
	for i, w := range waiting {
		waiting[i] = w * w
	}
	c.squares.Add(waiting)
	c.n = 0
}

// Merge adds what o holds, which must be over an equal axis.
func (d *Density) Merge(o *Density) error {
	if d.axis != o.axis {
		return fmt.Errorf("densities over different axes cannot be added: %+v and %+v", d.axis, o.axis)
	}
	for k, c := range o.cells {
		if c != nil {
			c.flush()
			mine := d.cell(int32(k))
			mine.weights.Merge(&c.weights)
			mine.squares.Merge(&c.squares)
		}
	}
	return nil
}

// A DensityCell is one bin of a density with something in it.
type DensityCell struct {
	Key              int64
	Count            int64
	Weights, Squares float64 // the sums, each rounded once
}

// Cells calls yield for every bin with something in it, in ascending order of
// keys. It can be ranged over.
func (d *Density) Cells(yield func(DensityCell) bool) {
	for k, c := range d.cells {
		if c == nil {
			continue
		}
		c.flush()
		if !yield(DensityCell{int64(k) + d.axis.First - 1, c.weights.Count(), c.weights.Float64(), c.squares.Float64()}) {
			return
		}
	}
}

type densityJSON struct {
	Axis  Axis              `json:"axis"`
	Cells []densityCellJSON `json:"cells"`
}

type densityCellJSON struct {
	Key     int64 `json:"key"`
	Weights *Sum  `json:"weights"`
	Squares *Sum  `json:"squares"`
}

// MarshalJSON implements [json.Marshaler].
func (d *Density) MarshalJSON() ([]byte, error) {
	j := densityJSON{Axis: d.axis, Cells: []densityCellJSON{}}
	for k, c := range d.cells {
		if c != nil {
			c.flush()
			j.Cells = append(j.Cells, densityCellJSON{int64(k) + d.axis.First - 1, &c.weights, &c.squares})
		}
	}
	return json.Marshal(j)
}

// UnmarshalJSON implements [json.Unmarshaler].
func (d *Density) UnmarshalJSON(text []byte) error {
	var j densityJSON
	if err := json.Unmarshal(text, &j); err != nil {
		return err
	}
	fresh, err := newDensity(j.Axis)
	if err != nil {
		return err
	}
	for _, c := range j.Cells {
		place := c.Key - fresh.axis.First + 1
		if place < 0 || place >= int64(len(fresh.cells)) || c.Weights == nil || c.Squares == nil {
			return fmt.Errorf("a density cell with the key %d, outside its axis %q or without its sums", c.Key, j.Axis.Name)
		}
		mine := fresh.cell(int32(place))
		mine.weights.Merge(c.Weights)
		mine.squares.Merge(c.Squares)
	}
	*d = *fresh
	return nil
}
