package interop

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"testing"
	"time"

	"catenrich/internal/publish"
	"catenrich/internal/table"
	"catenrich/readers"
	"catenrich/writers"
	"catenrich/writers/writertest"
)

// TestCompareWithDuckDB times the graft of twelve columns, with digest and
// fsync, against DuckDB's COPY of the file with twelve cheap expressions, both
// on two threads, in turn. It runs when it is asked to:
//
//	COMPARE_ROWS=2500000 COMPARE_COLUMNS=60 go test -run Compare -v .
func TestCompareWithDuckDB(t *testing.T) {
	rows, err := strconv.Atoi(os.Getenv("COMPARE_ROWS"))
	if err != nil {
		t.Skip("set COMPARE_ROWS and COMPARE_COLUMNS")
	}
	columns, err := strconv.Atoi(os.Getenv("COMPARE_COLUMNS"))
	if err != nil {
		columns = 8
	}
	db := duck(t)
	dir := t.TempDir()
	in, theirs := filepath.Join(dir, "in.parquet"), filepath.Join(dir, "theirs.parquet")
	query, more := "SELECT ", ""
	for i := range columns {
		query += fmt.Sprintf("random() * 3 AS c%02d, ", i)
	}
	for k := range 12 {
		more += fmt.Sprintf(", sqrt(%g + c00) * (3 + c00 * %g) AS new_%02d", 1+float64(k)/7, 1+float64(k)/7, k)
	}
	if _, err := db.Exec(fmt.Sprintf("COPY (%s FROM range(%d)) TO '%s' (FORMAT parquet)", query[:len(query)-2], rows, in)); err != nil {
		t.Fatal(err)
	}
	var ours, duckdb []time.Duration
	for range 3 {
		start := time.Now()
		publishGraft(t, in, filepath.Join(dir, "ours.parquet"))
		ours = append(ours, time.Since(start))
		start = time.Now()
		if _, err := db.Exec(fmt.Sprintf("COPY (SELECT *%s FROM '%s') TO '%s' (FORMAT parquet)", more, in, theirs)); err != nil {
			t.Fatal(err)
		}
		duckdb = append(duckdb, time.Since(start))
	}
	slices.Sort(ours)
	slices.Sort(duckdb)
	t.Logf("%d rows, %d columns: graft %v, DuckDB %v, ratio %.2f (medians of 3)", rows, columns, ours[1], duckdb[1], float64(duckdb[1])/float64(ours[1]))
}

// publishGraft makes an output with its manifest.
func publishGraft(t *testing.T, in, out string) {
	t.Helper()
	src, err := readers.OpenParquet(in)
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	var fields []table.Field
	for k := range 12 {
		fields = append(fields, table.Field{Name: fmt.Sprintf("new_%02d", k)})
	}
	sink, err := writers.NewParquet(src, table.Spec{Added: fields})
	if err != nil {
		t.Fatal(err)
	}
	wants := []table.Want{{Field: 0, As: table.Float}}
	if err := src.Select(wants, fields); err != nil {
		t.Fatal(err)
	}
	disk := publish.OS
	release, err := publish.Begin(disk, out, publish.Options{Replace: true})
	if err != nil {
		t.Fatal(err)
	}
	defer release.Abort()
	file, err := release.Create("")
	if err != nil {
		t.Fatal(err)
	}
	kernel := func(b *table.Batch, _ int64) {
		for k := range 12 {
			a := 1 + float64(k)/7
			for i, z := range b.In[0].Float {
				b.Out[k].Float[i] = math.Sqrt(a+z) * (3 + float64(z*a))
			}
		}
	}
	if err := sink.Begin(file); err != nil {
		t.Fatal(err)
	}
	if err := writertest.Pump(src, sink, wants, fields, 2, kernel); err != nil {
		t.Fatal(err)
	}
	if err := sink.Finish(); err != nil {
		t.Fatal(err)
	}
	err = release.Commit(func(r publish.Record) ([]byte, error) {
		return json.Marshal(r)
	})
	if err != nil {
		t.Fatal(err)
	}
}
