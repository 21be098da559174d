package report

import (
	"math"
	"sort"

	"catenrich/internal/status"
	"catenrich/pipeline/ledger"
)

// A reason is one status bit, with how many rows have it.
type reason struct {
	Bit         int64
	Meaning     string
	Rows        string
	Share       string
	Change      string // against the previous release; "" without one
	Width       float64
	ForTheWorse bool
}

// statusRows lists the bits that some row has, now or in the previous release.
func statusRows(r, before *Release) (list []reason) {
	for i := range status.Count {
		n, then := r.Tally.Status[i], int64(0)
		if before != nil {
			then = before.Tally.Status[i]
		}
		if n == 0 && then == 0 {
			continue
		}
		line := reason{Bit: 1 << i, Meaning: status.Describe(i), Rows: count(n), Share: share(n, r.Tally.Rows)}
		line.Width = float64(math.Round(1000*float64(n)/float64(max(r.Tally.Rows, 1)))) / 10
		if before != nil {
			line.Change = change(n - then)
			line.ForTheWorse = n > then
		}
		list = append(list, line)
	}
	return list
}

// A nullGroup is columns that are empty in equally many rows for equal reasons.
type nullGroup struct {
	Columns []string
	Empty   string
	Share   string
	Width   float64  // per cent of the rows
	Reasons []reason // the commonest
	Rarer   int      // how many more there are
	nulls   int64
	bits    ledger.Bits
}

// nullGroups lists the added columns by how they are empty, in their order.
func nullGroups(r *Release) (groups []nullGroup) {
next:
	for _, c := range r.Tally.Columns {
		for i := range groups {
			if groups[i].nulls == c.Nulls && groups[i].bits == c.Reasons {
				groups[i].Columns = append(groups[i].Columns, c.Name)
				continue next
			}
		}
		g := nullGroup{Columns: []string{c.Name}, Empty: count(c.Nulls), Share: share(c.Nulls, r.Tally.Rows), nulls: c.Nulls, bits: c.Reasons}
		g.Width = float64(math.Round(1000*float64(c.Nulls)/float64(max(r.Tally.Rows, 1)))) / 10
		g.Reasons, g.Rarer = commonest(&c.Reasons)
		groups = append(groups, g)
	}
	return groups
}

// commonest lists the most frequent bits, the first of equals first, and how
// many others there are.
func commonest(bits *ledger.Bits) (list []reason, rarer int) {
	const listed = 5
	var order []int
	for i := range status.Count {
		if bits[i] > 0 {
			order = append(order, i)
		}
	}
	sort.SliceStable(order, func(a, b int) bool { return bits[order[a]] > bits[order[b]] })
	for _, i := range order[:min(len(order), listed)] {
		list = append(list, reason{Bit: 1 << i, Meaning: status.Describe(i), Rows: count(bits[i])})
	}
	return list, max(len(order)-listed, 0)
}
