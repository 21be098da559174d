package demo

import (
	"math"
	"math/rand/v2"

	"catenrich/internal/exact"
)

// dice are random numbers with the same bits on every machine. Package rand's
// own normal deviates are not: they come from math.Exp and math.Log.
type dice struct {
	source *rand.PCG
	spare  float64 // the second of a pair of normal deviates
	ready  bool
}

func newDice(seed, stream uint64) *dice { return &dice{source: rand.NewPCG(seed, stream)} }

// uniform returns a number in (0, 1), both ends excluded.
func (d *dice) uniform() float64 {
	return (float64(d.source.Uint64()>>12) + 0.5) / (1 << 52)
}

// between returns a number in (low, high).
func (d *dice) between(low, high float64) float64 {
	return low + float64((high-low)*d.uniform())
}

// chance is true with probability p.
func (d *dice) chance(p float64) bool { return d.uniform() < p }

// below returns a whole number from 0 to n-1, 0 < n < 2^32. Its bias, below
// n/2^52, is far under what any survey could see.
func (d *dice) below(n int) int { return int(float64(n) * d.uniform()) }

// gauss returns a normal deviate of mean 0 and width 1 (Box & Muller 1958).
func (d *dice) gauss() float64 {
	if d.ready {
		d.ready = false
		return d.spare
	}
	radius := math.Sqrt(-2 * exact.Log(d.uniform()))
	angle := 2 * math.Pi * d.uniform()
	d.spare, d.ready = radius*exact.Sin(angle), true
	return radius * exact.Cos(angle)
}

// pick returns an index with the probability of its weight; the weights sum to 1.
func (d *dice) pick(weights []float64) int {
	u := d.uniform()
	for i, w := range weights {
		if u < w {
			return i
		}
		u -= w
	}
	return len(weights) - 1
}

// shuffle puts n things in random order (Durstenfeld 1964).
func (d *dice) shuffle(n int, swap func(i, j int)) {
	for i := n - 1; i > 0; i-- {
		swap(i, d.below(i+1))
	}
}
