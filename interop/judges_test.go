package interop

import (
	"database/sql"
	"fmt"
	"math"
)

// A judge reads input and output by one library and returns what differs. An
// input that the library itself cannot read is no verdict: errCannot.
type judge struct {
	name  string
	judge func(db *sql.DB, in, out string) error
}

type errCannot struct{ err error }

func (e errCannot) Error() string { return e.err.Error() }

var judges = []judge{{"duckdb", judgeDuck}, {"arrow-go", judgeArrow}, {"parquet-go", judgeParquetGo}, {"xitongsys", judgeXitongsys}}

// caught turns a panic of a library into an error.
func caught(f func() error) (err error) {
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("panic: %v", r)
		}
	}()
	return f()
}

func same(a, b float64) bool { return math.Float64bits(a) == math.Float64bits(b) || a != a && b != b }

// check compares a row of the grafted columns with what it must be.
func check(row int64, v float64, flag, hasFlag bool, status int32) error {
	f := wantFlag(row)
	if !same(v, wantValue(row)) || hasFlag != (f != 2) || hasFlag && flag != (f == 1) || status != wantStatus(row) {
		return fmt.Errorf("row %d: %v, %v (%v), %d", row, v, flag, hasFlag, status)
	}
	return nil
}
