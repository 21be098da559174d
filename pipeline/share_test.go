package pipeline

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// sized is a plan of units of the given sizes, whose ids are in their order.
func sized(sizes []int64) *Plan {
	p := new(Plan)
	for i, size := range sizes {
		p.Units = append(p.Units, Unit{ID: fmt.Sprintf("unit-%06d", i), Size: size})
	}
	return p
}

// skewed are invented sizes of a survey's files, in bytes: n of them, whose
// logarithms are normal with the given spread (1 is a factor e), or that follow
// the power law of a few giants and many dwarfs.
func skewed(r *rand.Rand, n int, spread float64, giants bool) []int64 {
	sizes := make([]int64, n)
	for i := range sizes {
		x := math.Exp(spread * r.NormFloat64())
		if giants {
			x = math.Pow(1-r.Float64(), -1/1.3)
		}
		sizes[i] = int64(50e6 * x)
	}
	return sizes
}

// TestSharesDealAll: every unit is in exactly one share, and the shares are the
// same each time, whatever the number.
func TestSharesDealAll(t *testing.T) {
	p := sized(append(skewed(rand.New(rand.NewPCG(1, 1)), 500, 1.5, false), 0, 0, 0, 7, 7))
	for _, n := range []int{1, 2, 3, 8, 505, 600} {
		dealt := make([]int, len(p.Units))
		shares := p.Shares(n)
		for i, s := range shares {
			part := p.Share(i+1, n)
			if !part.partial || len(part.Units) != len(s.Units) {
				t.Errorf("share %d/%d has %d units, its plan %d (partial: %v)", i+1, n, len(s.Units), len(part.Units), part.partial)
			}
			bytes := int64(0)
			for k, u := range s.Units {
				dealt[u]++
				bytes += p.Units[u].Size
				if part.Units[k].ID != p.Units[u].ID {
					t.Errorf("share %d/%d: unit %d is %s, in its plan %s", i+1, n, k, p.Units[u].ID, part.Units[k].ID)
				}
			}
			if bytes != s.Bytes || !slices.IsSorted(s.Units) {
				t.Errorf("share %d/%d says %d bytes and has %d, in the order %v", i+1, n, s.Bytes, bytes, s.Units)
			}
		}
		for i, times := range dealt {
			if times != 1 {
				t.Errorf("%d shares: unit %d was dealt %d times", n, i, times)
			}
		}
		for i, s := range p.Shares(n) {
			if !slices.Equal(s.Units, shares[i].Units) {
				t.Errorf("share %d/%d is another the second time", i+1, n)
			}
		}
	}
}

// TestSharesOrder: longest first to the least loaded; ties by id, then by the
// share's number.
func TestSharesOrder(t *testing.T) {
	const mb = 1 << 20
	p := sized([]int64{3 * mb, 5 * mb, 3 * mb, 5 * mb, 9 * mb, 0})
	got := p.Shares(3)
	// By hand, with 1 MiB a unit: 9→1 (10). 5→2 (6). 5→3 (6). 3→2 (10). 3→3 (10). 0→1 (11).
	want := [][]int{{4, 5}, {0, 1}, {2, 3}}
	for i := range want {
		if !slices.Equal(got[i].Units, want[i]) {
			t.Errorf("share %d/3 has the units %v, want %v", i+1, got[i].Units, want[i])
		}
	}
}

// TestSharesBalance: the balance for 2 to 512 shares of simulated surveys. The
// bound is Graham's (1969): the busiest share is within 4/3 of the best
// possible, which is at least the mean and the largest unit.
func TestSharesBalance(t *testing.T) {
	for _, survey := range []struct {
		name   string
		units  int
		spread float64
		giants bool
	}{
		{"64 files, spread 1", 64, 1, false},
		{"10000 files, spread 1", 10_000, 1, false},
		{"10000 files, spread 2", 10_000, 2, false},
		{"10000 files, giants", 10_000, 0, true},
		{"100000 files, spread 1", 100_000, 1, false},
	} {
		p := sized(skewed(rand.New(rand.NewPCG(7, uint64(survey.units))), survey.units, survey.spread, survey.giants))
		largest := int64(0)
		for i := range p.Units {
			largest = max(largest, p.Units[i].Size)
		}
		for n := 2; n <= 512; n *= 2 {
			most, total := int64(0), int64(0)
			for _, s := range p.Shares(n) {
				most, total = max(most, s.load()), total+s.load()
			}
			mean := float64(total) / float64(n)
			best := max(mean, float64(largest+unitCost))
			t.Logf("%-24s %3d shares: busiest %.4f of the mean, %.4f of the best possible", survey.name, n, float64(most)/mean, float64(most)/best)
			bound := 4.0/3 - 1/(3*float64(n))
			if survey.units >= 10_000 && 32*n <= survey.units { // small units level out what large ones leave
				bound = 1.001
			}
			if ratio := float64(most) / best; ratio > bound {
				t.Errorf("%s, %d shares: the busiest has %.4f of the best possible, want at most %.4f", survey.name, n, ratio, bound)
			}
		}
	}
}
