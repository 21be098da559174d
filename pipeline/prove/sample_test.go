package prove

import (
	"math"
	"slices"
	"testing"

	"catenrich/internal/publish"
)

func TestSample(t *testing.T) {
	config, output := publish.Digest{1}, publish.Digest{2}
	const n, k = 1000, 37
	a, b := newSample(config, output, n, k).rows, newSample(config, output, n, k).rows
	if len(a) != k || !slices.Equal(a, b) || !slices.IsSorted(a) || a[0] < 0 || a[k-1] >= n || len(slices.Compact(slices.Clone(a))) != k {
		t.Errorf("sample %v, again %v", a, b)
	}
	output[31] ^= 1
	if slices.Equal(a, newSample(config, output, n, k).rows) {
		t.Error("another output has the same sample")
	}
	if s := newSample(config, output, 5, 5); !s.all || !slices.Equal(s.take(3, 2), []int{0, 1}) {
		t.Errorf("a sample of all is %+v", s)
	}
}

// TestSampleIsFair counts how often each row is chosen: a binomial number.
func TestSampleIsFair(t *testing.T) {
	const n, k, times = 20, 5, 4000
	var counts [n]int
	for i := range times {
		for _, row := range newSample(publish.Digest{byte(i), byte(i >> 8)}, publish.Digest{}, n, k).rows {
			counts[row]++
		}
	}
	mean := float64(times*k) / n
	for row, c := range counts {
		if sigma := math.Sqrt(mean * (1 - float64(k)/n)); math.Abs(float64(c)-mean) > 5*sigma {
			t.Errorf("row %d was chosen %d times, want %.0f ± %.0f", row, c, mean, sigma)
		}
	}
}

func TestTakeSpansChunks(t *testing.T) {
	s := &sample{rows: []int64{0, 4, 5, 11}}
	for _, c := range []struct {
		first int64
		rows  int
		want  []int
	}{{0, 5, []int{0, 4}}, {5, 5, []int{0}}, {10, 1, nil}, {11, 9, []int{0}}} {
		if got := s.take(c.first, c.rows); !slices.Equal(got, c.want) {
			t.Errorf("rows %d to %d: %v, want %v", c.first, c.first+int64(c.rows), got, c.want)
		}
	}
}
