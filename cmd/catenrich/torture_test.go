package main

import (
	"bytes"
	"fmt"
	"math"
	"os"
	"strconv"
	"strings"
	"testing"

	"github.com/apache/arrow-go/v18/parquet"
	"github.com/apache/arrow-go/v18/parquet/file"
	"github.com/apache/arrow-go/v18/parquet/schema"
	"github.com/klauspost/compress/zstd"
)

// A torture is a redshift as it may stand in a catalogue, and what becomes of
// its row: the status, and the comoving distance where there is one.
type torture struct {
	cell   string
	status int32
	mpc    float64 // NaN is null
}

// hubbleDistance of the set seventy-thirty: c/H0 (Hogg 1999, eq. 4). Distances
// at small z are z times that.
const hubbleDistance = 299792.458 / 70 // Mpc

// atHalf is the comoving distance at z = 0.5 in that set, from
// testdata/reference/seventy_thirty.csv.
const atHalf = 1888.6253959334059267

var null = math.NaN()

// tortures in text.
var tortures = []torture{
	{"0.5", 0, atHalf}, {"0.5D0", 0, atHalf}, {"5d-1", 0, atHalf}, {"+.5e+0", 0, atHalf}, {"  0.5\t", 0, atHalf}, {`"0.5"`, 0, atHalf}, {"0.5000000000000000000000000000000000000000000", 0, atHalf},
	{"", 1, null}, {"   ", 1, null}, {`""`, 1, null}, {"NaN", 1, null}, {"nan", 1, null},
	{"-99", 1, null}, {"-99.0", 1, null}, {"-9.9D1", 1, null}, {"-9900e-2", 1, null}, {"-99.00000000000000000001", 1, null},
	{"-98.99", 4, null},
	{"Inf", 2, null}, {"+Inf", 2, null}, {"-inf", 2, null}, {"Infinity", 2, null}, {"1e999", 2, null}, {"-1D400", 2, null},
	{"0x1p-1", 2, null}, {"1_0", 2, null}, {"0,5", -1, null}, {"0.5;", 2, null}, {"none", 2, null}, {"0.5.5", 2, null}, {"1e", 2, null}, {"--1", 2, null}, {"٠", 2, null}, {"½", 2, null},
	{"0.5\x00", 2, null}, {"\x00", 2, null}, {"\xff\xfe", 2, null}, {"\xc3\x28", 2, null},
	{"0", 8, 0}, {"-0", 8, 0}, {"-0.0", 8, 0}, {"1e-999", 8, 0}, {"-1e-999", 8, 0},
	{"5e-324", 0, math.SmallestNonzeroFloat64 * hubbleDistance}, {"2.2250738585072011e-308", 0, 2.2250738585072011e-308 * hubbleDistance}, {"1e-300", 0, 1e-300 * hubbleDistance},
	{"1e300", 16, null}, {"1.7976931348623157e308", 16, null}, {"10001", 16, null},
	{"-1", 4, null}, {"-1e300", 4, null}, {"-0.25", 8, null},
}

const tortureJob = `
input.files = ["%s"]
columns.redshift = "z"
columns.redshift_missing = [-99]
cosmology = [{ set = "seventy-thirty" }]
add.columns = ["comoving_distance"]
output.file = "%s"
limits.max_rejects = 1
`

// checkTorture compares a row's status and distance, as texts.
func (c torture) check(t *testing.T, distance, status string) {
	t.Helper()
	if status != strconv.Itoa(int(c.status)) {
		t.Errorf("%q has status %s, want %d", c.cell, status, c.status)
	}
	got := null
	if distance != "" {
		var err error
		if got, err = strconv.ParseFloat(distance, 64); err != nil {
			t.Errorf("%q: %v", c.cell, err)
		}
	}
	// A denormal has few digits.
	if math.IsNaN(got) != math.IsNaN(c.mpc) || math.Abs(got-c.mpc) > 1e-9*math.Abs(c.mpc)+math.SmallestNonzeroFloat64 {
		t.Errorf("%q has the distance %v, want %v", c.cell, got, c.mpc)
	}
}

// TestTortureText runs every cell with every line end, alone and mixed.
func TestTortureText(t *testing.T) {
	for name, ends := range map[string][]string{"LF": {"\n"}, "CRLF": {"\r\n"}, "CR": {"\r"}, "mixed": {"\n", "\r\n"}} {
		t.Run(name, func(t *testing.T) {
			t.Chdir(t.TempDir())
			var in strings.Builder
			in.WriteString("id,z,note" + ends[0])
			var want []torture
			for i, c := range tortures {
				end := ends[i%len(ends)]
				fmt.Fprintf(&in, "%d,%s,\xfe note\x00%s", i, c.cell, end)
				if c.status >= 0 {
					want = append(want, c) // the others are rejects
				}
			}
			writeFile(t, "in.csv", in.String())
			writeFile(t, "job.toml", fmt.Sprintf(tortureJob, "in.csv", "out.csv"))
			mustRun(t, "run", "job.toml", "--quiet")
			out := string(readFile(t, "out.csv"))
			lines := strings.Split(strings.NewReplacer("\r\n", "\n", "\r", "\n").Replace(out), "\n")
			if len(lines) != len(want)+2 {
				t.Fatalf("%d lines, want %d rows, a header and an empty end\n%q", len(lines), len(want), out)
			}
			for i, c := range want {
				line := lines[i+1]
				fields := strings.Split(line, ",")
				c.check(t, fields[len(fields)-2], fields[len(fields)-1])
				if !strings.Contains(in.String(), strings.Join(fields[:len(fields)-2], ",")) {
					t.Errorf("%q: the record was changed: %q", c.cell, line)
				}
			}
			if n := strings.Count(out, "\r"); n != strings.Count(in.String(), "\r")-rejectedCR(ends) {
				t.Errorf("%d carriage returns came out", n)
			}
		})
	}
}

// rejectedCR is how many carriage returns the one reject takes with it.
func rejectedCR(ends []string) int {
	for i, c := range tortures {
		if c.status < 0 {
			return strings.Count(ends[i%len(ends)], "\r")
		}
	}
	return 0
}

// TestTortureParquet has the same as numbers, of both widths: sentinels are
// rounded to the column's own.
func TestTortureParquet(t *testing.T) {
	inf, tiny32 := math.Inf(1), float64(math.SmallestNonzeroFloat32)
	wide := []torture{
		{"0.5", 0, atHalf}, {"NaN", 1, null}, {"-99.9", 1, null}, {"Inf", 2, null}, {"-Inf", 2, null}, {"0", 8, 0}, {"-0", 8, 0},
		{"5e-324", 0, math.SmallestNonzeroFloat64 * hubbleDistance}, {"1e300", 16, null}, {"-1", 4, null}, {"-1e300", 4, null}, {"null", 1, null},
	}
	narrow := []torture{
		{"0.5", 0, atHalf}, {"NaN", 1, null}, {"-99.9", 1, null}, {"Inf", 2, null}, {"-Inf", 2, null}, {"0", 8, 0}, {"-0", 8, 0},
		{fmt.Sprint(tiny32), 0, tiny32 * hubbleDistance}, {"3e38", 16, null}, {"-1", 4, null}, {"null", 1, null},
	}
	value := func(cell string) float64 {
		switch cell {
		case "Inf":
			return inf
		case "-Inf":
			return -inf
		}
		v, err := strconv.ParseFloat(cell, 64)
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
	for name, rows := range map[string][]torture{"float64": wide, "float32": narrow} {
		t.Run(name, func(t *testing.T) {
			t.Chdir(t.TempDir())
			var doubles []float64
			var floats []float32
			levels := make([]int16, len(rows))
			for i, c := range rows {
				if c.cell != "null" {
					levels[i] = 1
					doubles, floats = append(doubles, value(c.cell)), append(floats, float32(value(c.cell)))
				}
			}
			node := schema.NewFloat64Node("z", parquet.Repetitions.Optional, -1)
			if name == "float32" {
				node = schema.NewFloat32Node("z", parquet.Repetitions.Optional, -1)
			}
			writeFile(t, "in.parquet", oneColumn(t, node, func(w file.ColumnChunkWriter) (err error) {
				switch w := w.(type) {
				case *file.Float64ColumnChunkWriter:
					_, err = w.WriteBatch(doubles, levels, nil)
				case *file.Float32ColumnChunkWriter:
					_, err = w.WriteBatch(floats, levels, nil)
				}
				return err
			}))
			writeFile(t, "job.toml", strings.Replace(fmt.Sprintf(tortureJob, "in.parquet", "out.parquet"), "[-99]", "[-99.9]", 1))
			mustRun(t, "run", "job.toml", "--quiet")
			out, err := file.OpenParquetFile("out.parquet", false)
			if err != nil {
				t.Fatal(err)
			}
			defer out.Close()
			distances, statuses := out.RowGroup(0), make([]int32, len(rows))
			d, err := distances.Column(1)
			if err != nil {
				t.Fatal(err)
			}
			got, defs := make([]float64, len(rows)), make([]int16, len(rows))
			if _, _, err := d.(*file.Float64ColumnChunkReader).ReadBatch(int64(len(rows)), got, defs, nil); err != nil {
				t.Fatal(err)
			}
			s, err := distances.Column(2)
			if err != nil {
				t.Fatal(err)
			}
			if _, _, err := s.(*file.Int32ColumnChunkReader).ReadBatch(int64(len(rows)), statuses, make([]int16, len(rows)), nil); err != nil {
				t.Fatal(err)
			}
			next := 0
			for i, c := range rows {
				text := ""
				if defs[i] == 1 {
					text = strconv.FormatFloat(got[next], 'g', -1, 64)
					next++
				}
				c.check(t, text, strconv.Itoa(int(statuses[i])))
			}
		})
	}
}

// oneColumn is a Parquet file of one row group and one column.
func oneColumn(t *testing.T, node schema.Node, fill func(file.ColumnChunkWriter) error) string {
	t.Helper()
	var b bytes.Buffer
	root, err := schema.NewGroupNode("schema", parquet.Repetitions.Required, schema.FieldList{node}, -1)
	if err != nil {
		t.Fatal(err)
	}
	w := file.NewParquetWriter(&b, root)
	g, err := w.AppendRowGroupChecked()
	if err != nil {
		t.Fatal(err)
	}
	c, err := g.NextColumn()
	if err == nil {
		err = fill(c)
	}
	for _, end := range []func() error{c.Close, g.Close, w.Close} {
		if err == nil {
			err = end()
		}
	}
	if err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// TestTortureShapes: records and headers of unusual shape are copied as they
// are. What was appended comes off again, and the input is left.
func TestTortureShapes(t *testing.T) {
	long := strings.Repeat("0123456789abcdef", 64<<20/16)
	names, cells := make([]string, 5000), make([]string, 5000)
	for i := range names {
		names[i], cells[i] = "column "+strconv.Itoa(i), strconv.Itoa(i)
	}
	names[4321], cells[4321] = "z", "0.5"
	for _, c := range []struct{ name, text string }{
		{"a field of 64 MiB", "a,z,b\n" + long + ",0.5,1\nx,0.5," + long + "\n"},
		{"a quoted field of 64 MiB with line ends", "a,z\n\"" + strings.Repeat(long[:1<<20-1]+"\n", 64) + "\",0.5\n"},
		{"5000 columns", strings.Join(names, ",") + "\n" + strings.Join(cells, ",") + "\n" + strings.Join(cells, ",") + "\n"},
		{"names that stand twice", "a,z,a,A,a\n1,0.5,2,3,4\n"},
		{"names that are empty", ",z,,\n1,0.5,2,3\n"},
		{"names of bytes that are no text", "\xfe\xfa,z,\x00\n\x00\x01,0.5,\xc3\x28\n"},
		{"a field of NUL bytes", "a,z\n" + strings.Repeat("\x00", 1<<16) + ",0.5\n"},
		{"one row without end", "z\n0.5"},
		{"quotes in fields that are not quoted", "a,z\na\"b\"c,0.5\n"},
	} {
		t.Run(c.name, func(t *testing.T) {
			if testing.Short() && len(c.text) > 1<<20 {
				t.Skip("long")
			}
			t.Chdir(t.TempDir())
			for _, file := range []string{"in.csv", "in.csv.zst"} {
				text := c.text
				if strings.HasSuffix(file, ".zst") {
					z, err := zstd.NewWriter(nil, zstd.WithEncoderLevel(zstd.SpeedFastest))
					if err != nil {
						t.Fatal(err)
					}
					text = string(z.EncodeAll([]byte(text), nil))
				}
				writeFile(t, file, text)
				out := "out" + strings.TrimPrefix(file, "in")
				writeFile(t, "job.toml", fmt.Sprintf(tortureJob, file, out))
				mustRun(t, "run", "job.toml", "--quiet")
				got := string(unpack(t, out, readFile(t, out)))
				got = strings.Replace(got, ",comoving_distance,enrich_status", "", 1)
				appended := "," + distanceOf(t, got) + ",0"
				if back := strings.ReplaceAll(got, appended, ""); back != c.text {
					t.Errorf("%s: without what was appended there are %d bytes that are not the %d of the input", file, len(back), len(c.text))
				}
				os.Remove(out)
			}
		})
	}
}

// distanceOf is the last field but one of a text.
func distanceOf(t *testing.T, text string) string {
	t.Helper()
	rest := text[:strings.LastIndexByte(text, ',')]
	distance := rest[strings.LastIndexByte(rest, ',')+1:]
	if v, err := strconv.ParseFloat(distance, 64); err != nil || math.Abs(v-atHalf) > 1e-9*atHalf {
		t.Fatalf("the distance is %q, want %v", distance, atHalf)
	}
	return distance
}

// TestTortureNames: a column that is needed and stands twice is refused, in
// every format; so is an output column that is there already.
func TestTortureNames(t *testing.T) {
	for _, c := range []struct{ name, file, text, want string }{
		{"twice", "in.csv", "z,z\n1,2\n", `"z"`},
		{"already there", "in.csv", "z,comoving_distance\n1,2\n", `"comoving_distance"`},
		{"already there but for case", "in.csv", "z,Enrich_Status\n1,2\n", `enrich_status`},
	} {
		t.Chdir(t.TempDir())
		writeFile(t, c.file, c.text)
		writeFile(t, "job.toml", fmt.Sprintf(tortureJob, c.file, "out.csv"))
		r := runHere(t, []string{"run", "job.toml", "--quiet"}, nil)
		if r.code != 65 && r.code != 78 || !strings.Contains(r.stderr, c.want) || !strings.Contains(r.stderr, c.file) {
			t.Errorf("%s: exit %d, want 65 or 78, the file and %s\n%s", c.name, r.code, c.want, r.stderr)
		}
		if left := published(t, "."); len(left) != 2 {
			t.Errorf("%s left\n%s", c.name, listing(t, "."))
		}
	}
}
