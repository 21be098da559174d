package interop

import (
	"database/sql"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	_ "github.com/duckdb/duckdb-go/v2"
	"github.com/google/uuid"
	pq "github.com/parquet-go/parquet-go"
	"github.com/parquet-go/parquet-go/compress"
)

// duck is a DuckDB in memory, with one connection.
func duck(t testing.TB) *sql.DB {
	t.Helper()
	db, err := sql.Open("duckdb", "")
	if err != nil {
		t.Fatal(err)
	}
	db.SetMaxOpenConns(1)
	t.Cleanup(func() { db.Close() })
	for _, s := range []string{"SET threads = 2", "SET preserve_insertion_order = true"} {
		if _, err := db.Exec(s); err != nil {
			t.Fatal(err)
		}
	}
	return db
}

// A maker makes one file of the matrix.
type maker struct {
	name string
	make func(t testing.TB, db *sql.DB, path string) error
}

// rich is a table of every type that DuckDB writes, with nulls.
const rich = `SELECT
	CASE WHEN i %% 17 = 3 THEN NULL ELSE (i * 0.0001)::DOUBLE END AS z,
	(i / 3.0)::FLOAT AS f32, (i %% 100)::TINYINT AS i8, (i %% 30000)::SMALLINT AS i16, i::INTEGER AS i32, i::BIGINT * 1000000007 AS i64,
	(i %% 200)::UTINYINT AS u8, (i %% 60000)::USMALLINT AS u16, i::UINTEGER AS u32, (i::UBIGINT * 1000000007) AS u64,
	(i / 1000.0)::DECIMAL(9,3) AS d9, (i / 1000.0)::DECIMAL(18,6) AS d18, (i / 1000.0)::DECIMAL(38,10) AS d38,
	i %% 2 = 0 AS flag, 'object ' || (i %% 50) AS name, 'unique ' || i AS label,
	TIMESTAMP '2020-01-01' + INTERVAL (i) SECOND AS t, (DATE '2020-01-01' + (i %% 1000)::INTEGER) AS day, TIME '12:00:00' AS clock,
	TIMESTAMPTZ '2020-01-01 00:00:00+00' AS tz, uuid() AS id, encode('blob' || i) AS bits, INTERVAL (i) DAY AS span,
	[i, i + 1, NULL] AS list, CASE WHEN i %% 5 = 0 THEN [] ELSE [['x'], ['y', NULL]] END AS nested,
	MAP {'a': i, 'b': i + 1} AS map, {'ra': i * 0.1, 'dec': NULL::DOUBLE, 'deep': {'z': i::DOUBLE}} AS pos,
	CASE WHEN i %% 2 = 0 THEN 'red' ELSE 'blue' END::ENUM('red', 'blue') AS color, NULL::INTEGER AS nothing
	FROM range(%d) t(i)`

func duckMaker(name, query, options string) maker {
	return maker{"duckdb: " + name, func(t testing.TB, db *sql.DB, path string) error {
		_, err := db.Exec(fmt.Sprintf("COPY (%s) TO '%s' (FORMAT parquet%s)", query, path, options))
		return err
	}}
}

// duckMakers are the files that DuckDB makes.
func duckMakers() []maker {
	var all []maker
	rows := func(codec string) string {
		if codec == "brotli" { // DuckDB takes its time over it
			return fmt.Sprintf(rich, 300)
		}
		return fmt.Sprintf(rich, 5000)
	}
	for _, codec := range []string{"snappy", "zstd", "gzip", "lz4_raw", "brotli", "uncompressed"} {
		for _, version := range []string{"V1", "V2"} {
			all = append(all, duckMaker(codec+" "+version, rows(codec), fmt.Sprintf(", CODEC '%s', PARQUET_VERSION %s", codec, version)))
		}
	}
	return append(all,
		duckMaker("small groups", rows(""), ", ROW_GROUP_SIZE 2048"),
		duckMaker("bloom filters", "SELECT (i % 100)::DOUBLE AS z, (i % 100)::VARCHAR AS name FROM range(20000) t(i)", ", ROW_GROUP_SIZE 4096, DICTIONARY_SIZE_LIMIT 2000"),
		duckMaker("no rows", fmt.Sprintf(rich, 0), ""),
		duckMaker("one row", fmt.Sprintf(rich, 1), ""),
		duckMaker("a million rows in a group", "SELECT i * 0.001 AS z, i % 1000 AS k FROM range(1000000) t(i)", ", ROW_GROUP_SIZE 1000000"),
		duckMaker("variant", "SELECT i::DOUBLE AS z, (CASE WHEN i % 2 = 0 THEN {'a': i}::VARIANT ELSE 'text'::VARIANT END) AS v FROM range(1000) t(i)", ""),
		duckMaker("2000 columns", "SELECT "+manyColumns(2000)+" FROM range(50) t(i)", ""),
		duckMaker("odd names", `SELECT i AS "a.b", i AS "with space", i AS "ünïcode 星", i AS "quote""d", {'x y': i, 'ä.ö': i} AS "s.t" FROM range(100) t(i)`, ""),
		duckMaker("metadata", "SELECT i::DOUBLE AS z FROM range(100) t(i)", ", KV_METADATA {owner: 'Quill Ridge', note: 'invented'}"),
		duckMaker("field ids", "SELECT i::DOUBLE AS z, i AS k FROM range(100) t(i)", ", FIELD_IDS {z: 7, k: 9}"),
	)
}

func manyColumns(n int) string {
	var b strings.Builder
	for i := range n {
		if i > 0 {
			b.WriteString(", ")
		}
		fmt.Fprintf(&b, "i * %d AS c%04d", i, i)
	}
	return b.String()
}

// row is what parquet-go writes: encodings that DuckDB does not choose.
type row struct {
	Z       float64           `parquet:"z,split"`
	F       float32           `parquet:"f,split"`
	Opt     *float64          `parquet:"opt,optional"`
	Delta   int64             `parquet:"delta,delta"`
	Delta32 int32             `parquet:"delta32,delta"`
	DLen    string            `parquet:"dlen,delta"`
	Dict    string            `parquet:"dict,dict"`
	DictF   float64           `parquet:"dictf,dict"`
	Plain   []byte            `parquet:"plain"`
	Flag    bool              `parquet:"flag"`
	UUID    uuid.UUID         `parquet:"uuid,uuid"`
	Time    time.Time         `parquet:"time,timestamp(nanosecond)"`
	Dec     int64             `parquet:"dec,decimal(4:18)"`
	List    []int32           `parquet:"list,list"`
	Map     map[string]string `parquet:"map"`
	Inner   inner             `parquet:"inner"`
	Case    int64             `parquet:"Case"`
	Case2   int64             `parquet:"case"`
}

type inner struct {
	RA  float64  `parquet:"ra"`
	Dec *float64 `parquet:"dec,optional"`
}

func makeRow(i int) row {
	v := float64(i) / 3
	r := row{Z: v, F: float32(v), Delta: int64(i) * 17, Delta32: int32(-i), DLen: fmt.Sprint("text ", i), Dict: fmt.Sprint("d", i%7),
		DictF: float64(i % 5), Plain: []byte{byte(i)}, Flag: i%3 == 0, UUID: uuid.NewSHA1(uuid.Nil, []byte{byte(i)}),
		Time: time.Unix(int64(i), 5).UTC(), Dec: int64(i) * 12345, Case: 1, Case2: 2, Inner: inner{RA: v}}
	if i%4 != 0 {
		r.Opt, r.Inner.Dec = &v, &v
	}
	for k := range i % 4 {
		r.List = append(r.List, int32(k))
	}
	if i%3 == 1 {
		r.Map = map[string]string{"k": fmt.Sprint(i)}
	}
	return r
}

func parquetGoMaker(name string, groups []int, options ...pq.WriterOption) maker {
	return maker{"parquet-go: " + name, func(t testing.TB, _ *sql.DB, path string) error {
		f, err := os.Create(path)
		if err != nil {
			return err
		}
		w := pq.NewGenericWriter[row](f, options...)
		n := 0
		for _, rows := range groups {
			for range rows {
				if _, err := w.Write([]row{makeRow(n)}); err != nil {
					return err
				}
				n++
			}
			if err := w.Flush(); err != nil {
				return err
			}
		}
		if err := w.Close(); err != nil {
			return err
		}
		return f.Close()
	}}
}

// parquetGoMakers are the files that parquet-go makes.
func parquetGoMakers() []maker {
	var all []maker
	codecs := map[string]compress.Codec{"snappy": &pq.Snappy, "zstd": &pq.Zstd, "gzip": &pq.Gzip, "lz4_raw": &pq.Lz4Raw, "brotli": &pq.Brotli, "none": &pq.Uncompressed}
	for _, name := range []string{"snappy", "zstd", "gzip", "lz4_raw", "brotli", "none"} {
		for version := 1; version <= 2; version++ {
			all = append(all, parquetGoMaker(fmt.Sprintf("%s v%d", name, version), []int{300, 1, 700}, pq.Compression(codecs[name]), pq.DataPageVersion(version)))
		}
	}
	return append(all,
		parquetGoMaker("small pages", []int{3000}, pq.PageBufferSize(512), pq.DataPageStatistics(true)),
		parquetGoMaker("bloom filter", []int{500, 500}, pq.BloomFilters(pq.SplitBlockFilter(10, "delta"), pq.SplitBlockFilter(10, "dict"))),
		parquetGoMaker("no row groups", nil),
		parquetGoMaker("groups of one row", []int{1, 1, 1, 1, 1}),
		parquetGoMaker("metadata", []int{10}, pq.KeyValueMetadata("owner", "Quill Ridge")),
	)
}

// makeAll makes the matrix; a maker that its library cannot serve is listed.
func makeAll(t testing.TB, db *sql.DB) map[string]string {
	dir := t.TempDir()
	files := make(map[string]string)
	for i, m := range slices.Concat(duckMakers(), parquetGoMakers(), handmadeMakers()) {
		path := filepath.Join(dir, fmt.Sprintf("%03d.parquet", i))
		if err := m.make(t, db, path); err != nil {
			t.Errorf("%s: not made: %v", m.name, err)
			continue
		}
		files[m.name] = path
	}
	return files
}
