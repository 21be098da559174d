package pipeline

import (
	"strings"
	"testing"

	"catenrich/internal/fault"
	"catenrich/internal/table"
)

func TestNumericCheck(t *testing.T) {
	const good, bad, missing = table.Good, table.Malformed, table.Missing
	repeat := func(n int, s table.State) []table.State {
		states := make([]table.State, n)
		for i := range states {
			states[i] = s
		}
		return states
	}
	for _, c := range []struct {
		name   string
		chunks [][]table.State
		fails  bool
		after  int // chunks seen when it fails; len(chunks) is the end
	}{
		{"numbers", [][]table.State{repeat(10, good)}, false, 0},
		{"nothing", nil, false, 0},
		{"only missing", [][]table.State{repeat(5000, missing)}, false, 0},
		{"one word", [][]table.State{repeat(1, bad)}, true, 1},
		{"words, in the end", [][]table.State{repeat(400, bad), repeat(400, bad)}, true, 2},
		{"a thousand words at once", [][]table.State{repeat(1000, bad), repeat(1, good)}, true, 0},
		{"a thousand words in parts", [][]table.State{repeat(600, bad), repeat(400, bad), repeat(1, good)}, true, 1},
		{"a number after 999 words", [][]table.State{repeat(999, bad), repeat(1, good), repeat(5000, bad)}, false, 0},
		{"a number after 1000 words", [][]table.State{append(repeat(1000, bad), good)}, true, 0},
		{"missing cells do not count", [][]table.State{append(append(repeat(999, bad), repeat(5000, missing)...), good)}, false, 0},
		{"words after a thousand numbers", [][]table.State{repeat(1000, good), repeat(5000, bad)}, false, 0},
	} {
		n := numericCheck{file: "in.csv", column: "z", setting: "--redshift"}
		var err error
		after := 0
		for i, states := range c.chunks {
			if after, err = i, n.see(&table.Column{State: states}); err != nil {
				break
			}
		}
		if err == nil {
			after, err = len(c.chunks), n.end()
		}
		if (err != nil) != c.fails || c.fails && after != c.after {
			t.Errorf("%s: error %v after %d chunks", c.name, err, after)
		}
		if err != nil && (fault.Of(err) != fault.Data || !strings.Contains(err.Error(), `"z" (--redshift)`)) {
			t.Errorf("%s: %v", c.name, err)
		}
	}
}
