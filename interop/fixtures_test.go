package interop

import (
	"database/sql"
	"fmt"
	"os"
	"path/filepath"
	"testing"

	pq "github.com/parquet-go/parquet-go"
)

// TestMakeFixtures writes testdata/small/*.parquet, with which the main
// module's tests run without this one. It does so only when asked to, as
// FIXTURES=1 go test -run MakeFixtures, for DuckDB's files differ each time.
func TestMakeFixtures(t *testing.T) {
	if os.Getenv("FIXTURES") == "" {
		t.Skip("set FIXTURES=1 to rewrite the files")
	}
	db := duck(t)
	rows := fmt.Sprintf(rich, 300)
	fixture := func(name string, m maker) {
		path := filepath.Join("..", "testdata", "small", name+".parquet")
		if err := m.make(t, db, path); err != nil {
			t.Fatal(err)
		}
		if info, err := os.Stat(path); err != nil || info.Size() > 100_000 {
			t.Errorf("%s has %d bytes, want at most 100 kB (%v)", name, info.Size(), err)
		}
	}
	fixture("duckdb-snappy-v1", duckMaker("", rows, ", CODEC 'snappy', PARQUET_VERSION V1"))
	fixture("duckdb-zstd-v2", duckMaker("", rows, ", CODEC 'zstd', PARQUET_VERSION V2"))
	fixture("duckdb-lz4raw-v1", duckMaker("", rows, ", CODEC 'lz4_raw', PARQUET_VERSION V1"))
	fixture("duckdb-no-rows", duckMaker("", fmt.Sprintf(rich, 0), ""))
	fixture("duckdb-variant", duckMaker("", "SELECT i::DOUBLE AS z, (CASE WHEN i % 2 = 0 THEN {'a': i}::VARIANT ELSE 'text'::VARIANT END) AS v FROM range(100) t(i)", ""))
	fixture("parquet-go-gzip-v1", parquetGoMaker("", []int{100, 1, 150}, pq.Compression(&pq.Gzip), pq.DataPageVersion(1)))
	fixture("parquet-go-brotli-v2", parquetGoMaker("", []int{100, 1, 150}, pq.Compression(&pq.Brotli), pq.DataPageVersion(2)))
	fixture("parquet-go-small-pages", parquetGoMaker("", []int{400}, pq.PageBufferSize(512), pq.DataPageStatistics(true)))
	fixture("parquet-go-bloom", parquetGoMaker("", []int{50, 50}, pq.BloomFilters(pq.SplitBlockFilter(10, "delta"), pq.SplitBlockFilter(10, "dict"))))
	fixture("parquet-go-no-groups", parquetGoMaker("", nil))
	fixture("duckdb-odd-names", maker{"", func(_ testing.TB, db *sql.DB, path string) error {
		_, err := db.Exec(fmt.Sprintf(`COPY (SELECT i AS "a.b", i AS "with space", i AS "ünïcode 星", {'x y': i, 'ä.ö': i} AS "s.t" FROM range(20) t(i)) TO '%s' (FORMAT parquet)`, path))
		return err
	}})
}
