package ledger

import (
	"encoding/json"
	"fmt"
	"math/bits"
	"strconv"
)

// Bits counts how often each bit of a status was set. In JSON it is an object
// from the bit's value, in decimal, to its count; bits that never occurred are
// left out.
type Bits [32]int64

// Add counts the bits of one status.
func (b *Bits) Add(status int32) {
	for s := uint32(status); s != 0; s &= s - 1 {
		b[bits.TrailingZeros32(s)]++
	}
}

// Merge adds the counts of o.
func (b *Bits) Merge(o *Bits) {
	for i := range b {
		b[i] += o[i]
	}
}

// MarshalJSON implements [json.Marshaler].
func (b Bits) MarshalJSON() ([]byte, error) {
	counts := map[string]int64{}
	for i, n := range b {
		if n != 0 {
			counts[strconv.FormatUint(1<<i, 10)] = n
		}
	}
	return json.Marshal(counts)
}

// UnmarshalJSON implements [json.Unmarshaler].
func (b *Bits) UnmarshalJSON(text []byte) error {
	var counts map[uint32]int64
	if err := json.Unmarshal(text, &counts); err != nil {
		return err
	}
	*b = Bits{}
	for bit, n := range counts {
		if bits.OnesCount32(bit) != 1 || n < 0 {
			return fmt.Errorf("a count of %d for the status bit %d", n, bit)
		}
		b[bits.TrailingZeros32(bit)] = n
	}
	return nil
}
