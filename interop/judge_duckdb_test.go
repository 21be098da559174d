package interop

import (
	"database/sql"
	"fmt"
	"math"
	"strings"
)

func judgeDuck(db *sql.DB, in, out string) error {
	if _, err := db.Exec(fmt.Sprintf("CREATE OR REPLACE TEMP TABLE read_once AS SELECT * FROM '%s'", in)); err != nil {
		return errCannot{err}
	}
	rows, err := db.Query(fmt.Sprintf("SELECT column_name FROM (DESCRIBE SELECT * FROM '%s')", in))
	if err != nil {
		return errCannot{err}
	}
	var differ []string
	for rows.Next() {
		var name string
		if err := rows.Scan(&name); err != nil {
			return err
		}
		q := `"` + strings.ReplaceAll(name, `"`, `""`) + `"`
		differ = append(differ, fmt.Sprintf("a.%s::VARCHAR IS DISTINCT FROM b.%s::VARCHAR", q, q))
	}
	if err := rows.Err(); err != nil {
		return err
	}
	var n, total, before int64
	err = db.QueryRow(fmt.Sprintf(`SELECT count(*) FILTER (%s), count(*), (SELECT count(*) FROM '%s')
		FROM read_parquet('%s', file_row_number = true) a JOIN read_parquet('%s', file_row_number = true) b USING (file_row_number)`,
		strings.Join(differ, " OR "), in, in, out)).Scan(&n, &total, &before)
	if err != nil {
		return err
	}
	if n != 0 || total != before {
		return fmt.Errorf("%d of %d rows differ, the input has %d", n, total, before)
	}
	return duckGrafted(db, out, total)
}

func duckGrafted(db *sql.DB, out string, total int64) error {
	rows, err := db.Query(fmt.Sprintf("SELECT file_row_number, grafted_value, grafted_flag, grafted_status FROM read_parquet('%s', file_row_number = true) ORDER BY 1", out))
	if err != nil {
		return err
	}
	defer rows.Close()
	n, above := int64(0), int64(0)
	for ; rows.Next(); n++ {
		var row int64
		var v sql.NullFloat64
		var flag sql.NullBool
		var status int32
		if err := rows.Scan(&row, &v, &flag, &status); err != nil {
			return err
		}
		if !v.Valid {
			v.Float64 = math.NaN()
		}
		if err := check(row, v.Float64, flag.Bool, flag.Valid, status); err != nil {
			return err
		}
		if v.Float64 > 50 {
			above++
		}
	}
	if n != total {
		return fmt.Errorf("%d rows of %d", n, total)
	}
	var pruned int64 // by the statistics, if they are wrong too many
	if err := db.QueryRow(fmt.Sprintf("SELECT count(*) FROM '%s' WHERE grafted_value > 50", out)).Scan(&pruned); err != nil {
		return err
	}
	if pruned != above {
		return fmt.Errorf("a filter finds %d rows, there are %d", pruned, above)
	}
	return rows.Err()
}
