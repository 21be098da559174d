package pipeline

import (
	"catenrich/internal/fault"
	"catenrich/internal/table"
	"catenrich/pipeline/columns"
)

// numericSample is how many cells decide whether a text column holds numbers.
const numericSample = 1000

// A numericCheck finds the column that was named by mistake: a text column
// none of whose first cells is a number. A few bad cells among numbers are the
// rows' own fault, and get a status bit.
type numericCheck struct {
	at        int // index into Batch.In
	file      string
	column    string
	setting   string
	seen      int
	malformed int
}

// newNumericChecks returns a check for every column that is text in its file
// and that numbers are wanted of.
func newNumericChecks(schema *table.Schema, b *columns.Bound, needs []columns.Need) []numericCheck {
	var checks []numericCheck
	for i, want := range b.Wants {
		if want.As == table.Float && schema.Fields[want.Field].Type == table.Untyped {
			checks = append(checks, numericCheck{at: i, file: schema.File, column: needs[i].Column, setting: b.Place(needs[i].Setting)})
		}
	}
	return checks
}

// see looks at the next cells in input order.
func (n *numericCheck) see(c *table.Column) error {
	if n.seen >= numericSample {
		return nil
	}
	for _, s := range c.State {
		if s == table.Missing {
			continue
		}
		n.seen++
		if s == table.Malformed {
			n.malformed++
		}
		if n.seen == numericSample {
			return n.end()
		}
	}
	return nil
}

// end judges what was seen.
func (n *numericCheck) end() error {
	if n.malformed == 0 || n.malformed < n.seen {
		return nil
	}
	return fault.Data.Errorf("%s: the column %q (%s) holds no numbers: none of its first %d values is one; name another column", n.file, n.column, n.setting, n.seen)
}
