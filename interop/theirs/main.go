// Command theirs does with other people's libraries what catenrich is compared
// with in bench/: it copies a catalogue and adds twelve columns of cheap
// arithmetic on its redshift, on two threads.
//
//	theirs duckdb IN.parquet OUT.parquet    (or .csv)
//	theirs arrow IN.parquet OUT.parquet
package main

import (
	"database/sql"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	_ "github.com/duckdb/duckdb-go/v2"
)

// redshift is the column that the new ones are made from, and added is how
// many there are.
const (
	redshift = "z_best"
	added    = 12
)

func main() {
	if err := run(os.Args[1:]); err != nil {
		fmt.Fprintln(os.Stderr, "theirs:", err)
		os.Exit(1)
	}
}

func run(args []string) error {
	if len(args) != 3 {
		return fmt.Errorf("want duckdb or arrow, an input and an output")
	}
	switch args[0] {
	case "duckdb":
		return copyByDuckDB(args[1], args[2])
	case "arrow":
		return reencode(args[1], args[2])
	}
	return fmt.Errorf("there is no way %q", args[0])
}

// constants of the k-th expression, sqrt(a+z) (3+az).
func constant(k int) float64 { return 1 + float64(k)/7 }

// copyByDuckDB is one COPY, with the settings that keep the order of rows.
func copyByDuckDB(in, out string) error {
	db, err := sql.Open("duckdb", "")
	if err != nil {
		return err
	}
	defer db.Close()
	db.SetMaxOpenConns(1)
	from, format := fmt.Sprintf("'%s'", in), "FORMAT parquet"
	if filepath.Ext(in) == ".csv" {
		from, format = fmt.Sprintf("read_csv('%s')", in), "FORMAT csv, HEADER"
	}
	var more strings.Builder
	for k := range added {
		fmt.Fprintf(&more, ", sqrt(%g + %s) * (3 + %s * %g) AS new_%02d", constant(k), redshift, redshift, constant(k), k)
	}
	for _, statement := range []string{
		"SET threads = 2", "SET preserve_insertion_order = true",
		fmt.Sprintf("COPY (SELECT *%s FROM %s) TO '%s' (%s)", more.String(), from, out, format),
	} {
		if _, err := db.Exec(statement); err != nil {
			return err
		}
	}
	return nil
}
