package pipeline

import (
	"cmp"
	"container/heap"
	"slices"
)

// unitCost is what a unit costs beside its bytes, in bytes: opening, syncing
// and renaming take about as long as reading this much. It keeps thousands of
// tiny files from all going to one share.
const unitCost = 1 << 20

// A Share is one of several parts of a plan.
type Share struct {
	Units []int // indexes into Plan.Units, ascending
	Bytes int64 // of input
}

// load is what a share is balanced by.
func (s *Share) load() int64 { return s.Bytes + int64(len(s.Units))*unitCost }

// Shares deals the units to n shares, n ≥ 1: the largest unit first, each to
// the share that has least so far; among equals the unit with the lower id, and
// the share with the lower number. So everyone who sees the same files makes
// the same shares. No share takes longer than 4/3 - 1/(3n) times the best
// possible split (Graham 1969, SIAM J. Appl. Math. 17, 416).
func (p *Plan) Shares(n int) []Share {
	order := make([]int, len(p.Units))
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(a, b int) int { return cmp.Compare(p.Units[b].Size, p.Units[a].Size) })
	shares := make([]Share, n)
	least := make(lightest, n)
	for i := range least {
		least[i] = slot{i, &shares[i]}
	}
	for _, u := range order {
		s := least[0].share
		s.Units = append(s.Units, u)
		s.Bytes += p.Units[u].Size
		heap.Fix(&least, 0)
	}
	for i := range shares {
		slices.Sort(shares[i].Units)
	}
	return shares
}

// Share is the plan of share i of n, from 1. It has the config hash of the
// whole, and its run makes no report and no release manifest: it has not seen
// all units.
func (p *Plan) Share(i, n int) *Plan {
	share := *p
	share.Units, share.partial = nil, true
	for _, u := range p.Shares(n)[i-1].Units {
		share.Units = append(share.Units, p.Units[u])
	}
	return &share
}

// lightest is a heap of shares, the one to get the next unit on top.
type lightest []slot

type slot struct {
	number int
	share  *Share
}

func (l lightest) Len() int { return len(l) }
func (l lightest) Less(i, j int) bool {
	a, b := l[i].share.load(), l[j].share.load()
	return a < b || a == b && l[i].number < l[j].number
}
func (l lightest) Swap(i, j int) { l[i], l[j] = l[j], l[i] }
func (l *lightest) Push(x any)   { *l = append(*l, x.(slot)) }
func (l *lightest) Pop() any {
	last := (*l)[len(*l)-1]
	*l = (*l)[:len(*l)-1]
	return last
}
