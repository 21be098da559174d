package prove

import (
	"fmt"

	"catenrich/internal/table"
	"catenrich/pipeline/ledger"
)

// counts are what a manifest's tally says of all rows, counted again.
type counts struct {
	added []table.Field
	rows  int64
	nulls []int64 // of each column
	trues []int64
	bits  ledger.Bits
}

func newCounts(added []table.Field) *counts {
	return &counts{added: added, nulls: make([]int64, len(added)), trues: make([]int64, len(added))}
}

// add counts the stored cells of a batch.
func (c *counts) add(stored []table.Column, rows int) {
	c.rows += int64(rows)
	last := len(c.added) - 1
	for i := range stored {
		for row, state := range stored[i].State {
			switch {
			case state == table.Missing:
				c.nulls[i]++
			case c.added[i].Kind == table.Flag && state == table.Good:
				switch flag, _ := flagOf(&stored[i], row); flag {
				case table.True:
					c.trues[i]++
				case table.Null:
					c.nulls[i]++
				}
			case i == last && state == table.Good:
				c.bits.Add(int32(stored[i].Float[row]))
			}
		}
	}
}

// compare returns what differs from a manifest's tally.
func (c *counts) compare(t *ledger.Tally) error {
	if len(t.Columns) != len(c.added) {
		return fmt.Errorf("%d columns are counted in the manifest, and %d were added", len(t.Columns), len(c.added))
	}
	for i, column := range t.Columns {
		switch name := c.added[i].Name; {
		case column.Name != name:
			return fmt.Errorf("the manifest counts %q where the settings add %q", column.Name, name)
		case column.Nulls != c.nulls[i]:
			return fmt.Errorf("column %q has %d nulls, not %d as recorded", name, c.nulls[i], column.Nulls)
		case column.True != c.trues[i]:
			return fmt.Errorf("column %q is true %d times, not %d as recorded", name, c.trues[i], column.True)
		}
	}
	for i := range c.bits {
		if c.bits[i] != t.Status[i] {
			return fmt.Errorf("%d rows have the status bit %d, not %d as recorded", c.bits[i], uint32(1)<<i, t.Status[i])
		}
	}
	return nil
}
