package prove

import (
	"crypto/sha256"
	"math/bits"
	"math/rand/v2"
	"slices"

	"catenrich/internal/publish"
)

// A sample is some rows of an output, numbered from 0, in order; or all.
type sample struct {
	rows []int64
	all  bool
}

// take returns the places of the sample's rows among the n rows from first on.
// Calls come in the order of the rows.
func (s *sample) take(first int64, n int) []int {
	var places []int
	if s.all {
		for i := range n {
			places = append(places, i)
		}
		return places
	}
	for len(s.rows) > 0 && s.rows[0] < first+int64(n) {
		places = append(places, int(s.rows[0]-first))
		s.rows = s.rows[1:]
	}
	return places
}

// newSample chooses k of n rows. The
// choice is drawn from ChaCha8 with the seed SHA-256(config hash, output's
// digest): the same every time, and nobody's to make, since whoever changes a
// row changes the choice.
//
// The method is Floyd's (Bentley & Floyd 1987, CACM 30, 754): k draws, no
// rejections, each set of k rows equally likely to within 2^-32.
func newSample(config, output publish.Digest, n, k int64) *sample {
	if k >= n {
		return &sample{all: true}
	}
	source := rand.NewChaCha8(sha256.Sum256(append(config[:], output[:]...)))
	chosen := make(map[int64]bool, k)
	for j := n - k; j < n; j++ {
		high, _ := bits.Mul64(source.Uint64(), uint64(j)+1) // 0 to j
		row := int64(high)
		if chosen[row] {
			row = j
		}
		chosen[row] = true
	}
	rows := make([]int64, 0, k)
	for row := range chosen {
		rows = append(rows, row)
	}
	slices.Sort(rows)
	return &sample{rows: rows}
}
