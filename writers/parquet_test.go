package writers

import (
	"bytes"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/apache/arrow-go/v18/arrow/memory"
	"github.com/apache/arrow-go/v18/parquet"
	"github.com/apache/arrow-go/v18/parquet/compress"
	"github.com/apache/arrow-go/v18/parquet/file"
	"github.com/apache/arrow-go/v18/parquet/metadata"
	"github.com/apache/arrow-go/v18/parquet/schema"

	"catenrich/internal/table"
)

// A shape is a file made for a test.
type shape struct {
	groups    []int
	pageIndex bool
	keys      metadata.KeyValueMetadata
	props     []parquet.WriterProperty
}

// make writes z (optional double, null in row 4 of every 10) and id (int64).
func (s *shape) make(t testing.TB) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "in.parquet")
	f, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	root, err := schema.NewGroupNode("schema", parquet.Repetitions.Required, schema.FieldList{
		schema.NewFloat64Node("z", parquet.Repetitions.Optional, -1),
		schema.NewInt64Node("id", parquet.Repetitions.Required, -1),
	}, -1)
	if err != nil {
		t.Fatal(err)
	}
	props := append([]parquet.WriterProperty{parquet.WithPageIndexEnabled(s.pageIndex), parquet.WithDictionaryDefault(false),
		parquet.WithCompression(compress.Codecs.Snappy)}, s.props...)
	w := file.NewParquetWriter(f, root, file.WithWriterProps(parquet.NewWriterProperties(props...)), file.WithWriteMetadata(s.keys))
	row := int64(0)
	for _, rows := range s.groups {
		g, err := w.AppendRowGroupChecked()
		if err != nil {
			t.Fatal(err)
		}
		z, defs, ids := make([]float64, 0, rows), make([]int16, rows), make([]int64, rows)
		for i := range rows {
			ids[i] = row + int64(i)
			if v := wantZ(ids[i]); v == v {
				z, defs[i] = append(z, v), 1
			}
		}
		c, err := g.NextColumn()
		if err != nil {
			t.Fatal(err)
		}
		if _, err := c.(*file.Float64ColumnChunkWriter).WriteBatch(z, defs, nil); err != nil {
			t.Fatal(err)
		}
		c.Close()
		if c, err = g.NextColumn(); err != nil {
			t.Fatal(err)
		}
		if _, err := c.(*file.Int64ColumnChunkWriter).WriteBatch(ids, nil, nil); err != nil {
			t.Fatal(err)
		}
		c.Close()
		if err := g.Close(); err != nil {
			t.Fatal(err)
		}
		row += int64(rows)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return path
}

func wantZ(row int64) float64 {
	if row%10 == 4 {
		return math.NaN()
	}
	return float64(row) / 7
}

// readDoubles reads a column of doubles through arrow-go, NaN for null.
func readDoubles(t testing.TB, r *file.Reader, column int) []float64 {
	t.Helper()
	var all []float64
	for g := range r.NumRowGroups() {
		c, err := r.RowGroup(g).Column(column)
		if err != nil {
			t.Fatal(err)
		}
		rows := int(r.RowGroup(g).NumRows())
		values, defs := make([]float64, rows), make([]int16, rows)
		n, _, err := c.(*file.Float64ColumnChunkReader).ReadBatch(int64(rows), values, defs, nil)
		if err != nil || c.Err() != nil || n != int64(rows) {
			t.Fatalf("row group %d: %d of %d rows, %v, %v", g, n, rows, err, c.Err())
		}
		next := 0
		for _, d := range defs {
			if d == 0 {
				all = append(all, math.NaN())
				continue
			}
			all = append(all, values[next])
			next++
		}
	}
	return all
}

func openArrow(t testing.TB, path string) *file.Reader {
	t.Helper()
	r, err := file.OpenParquetFile(path, false)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { r.Close() })
	return r
}

func sameBits(a, b float64) bool {
	return math.Float64bits(a) == math.Float64bits(b) || a != a && b != b
}

func TestGraft(t *testing.T) {
	for _, s := range []shape{
		{groups: nil},
		{groups: []int{0}},
		{groups: []int{1}},
		{groups: []int{1, 0, 2}, pageIndex: true},
		{groups: []int{100, 65536, 65537, 3}, pageIndex: true},
		{groups: []int{200000, 0}},
	} {
		for _, spec := range []table.Spec{{}, {Encoding: "plain", Codec: "none"}, {Codec: "snappy"}, {Codec: "zstd", Level: 5}} {
			t.Run(fmt.Sprint(s.groups, s.pageIndex, spec.Encoding, spec.Codec), func(t *testing.T) {
				spec.Added = added
				spec.Metadata = []table.KeyValue{{Key: "catenrich.config_hash", Value: "abc"}}
				path := s.make(t)
				out := newFileOutput(t)
				job := graftJob{path: path, want: []string{"z"}, spec: spec, kernel: fill, workers: 3}
				sink, err := job.run(out)
				if err != nil {
					t.Fatal(err)
				}
				checkVerbatim(t, sink, path, out)
				checkGrafted(t, openArrow(t, out.f.Name()), &s)
			})
		}
	}
}

// checkVerbatim: the output begins with the input.
func checkVerbatim(t *testing.T, sink *Parquet, path string, out *fileOutput) {
	t.Helper()
	in, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	head := make([]byte, len(in))
	if _, err := out.f.ReadAt(head, 0); err != nil || !bytes.Equal(in, head) {
		t.Errorf("the output does not begin with the input: %v", err)
	}
	if n, sum := sink.Verbatim(); n != int64(len(in)) || sum == [32]byte{} {
		t.Errorf("Verbatim says %d bytes, want %d", n, len(in))
	}
}

func checkGrafted(t *testing.T, r *file.Reader, s *shape) {
	t.Helper()
	if r.NumRowGroups() != len(s.groups) || r.MetaData().Schema.NumColumns() != 6 {
		t.Fatalf("%d row groups, %d columns", r.NumRowGroups(), r.MetaData().Schema.NumColumns())
	}
	z, twice, noise := readDoubles(t, r, 0), readDoubles(t, r, 2), readDoubles(t, r, 3)
	total := 0
	for _, n := range s.groups {
		total += n
	}
	if len(z) != total {
		t.Fatalf("%d rows, want %d", len(z), total)
	}
	for row := range z {
		want := wantZ(int64(row))
		if !sameBits(z[row], want) || !sameBits(twice[row], 2*want) || !sameBits(noise[row], expectNoise(int64(row))) {
			t.Fatalf("row %d: z %v, twice %v, noise %v", row, z[row], twice[row], noise[row])
		}
	}
	checkFlagsAndStates(t, r)
	if v := r.MetaData().KeyValueMetadata().FindValue("catenrich.config_hash"); v == nil || *v != "abc" {
		t.Errorf("metadata: %v", r.MetaData().KeyValueMetadata())
	}
}

func checkFlagsAndStates(t *testing.T, r *file.Reader) {
	t.Helper()
	row := int64(0)
	for g := range r.NumRowGroups() {
		rows := int(r.RowGroup(g).NumRows())
		c, err := r.RowGroup(g).Column(4)
		if err != nil {
			t.Fatal(err)
		}
		flags, defs := make([]bool, rows), make([]int16, rows)
		if _, _, err := c.(*file.BooleanColumnChunkReader).ReadBatch(int64(rows), flags, defs, nil); err != nil {
			t.Fatal(err)
		}
		if c, err = r.RowGroup(g).Column(5); err != nil {
			t.Fatal(err)
		}
		states := make([]int32, rows)
		if n, _, err := c.(*file.Int32ColumnChunkReader).ReadBatch(int64(rows), states, make([]int16, rows), nil); err != nil || n != int64(rows) {
			t.Fatal(n, err)
		}
		next := 0
		for i := range rows {
			got := table.Null
			if defs[i] == 1 {
				got = 0
				if flags[next] {
					got = 1
				}
				next++
			}
			if got != uint8(row%3) || states[i] != int32(row)-5 {
				t.Fatalf("row %d: flag %d, state %d", row, got, states[i])
			}
			row++
		}
	}
}

// TestAgainstArrowWriter: arrow-go writes the same columns, and its metadata
// is what ours must say.
func TestAgainstArrowWriter(t *testing.T) {
	const rows = 70000
	s := shape{groups: []int{rows}, pageIndex: true}
	out := newFileOutput(t)
	job := graftJob{path: s.make(t), want: []string{"z"}, spec: table.Spec{Added: added}, kernel: fill, workers: 2}
	if _, err := job.run(out); err != nil {
		t.Fatal(err)
	}
	ours := openArrow(t, out.f.Name())
	theirs := arrowColumns(t, rows)
	for i := range added {
		a, err := ours.MetaData().RowGroup(0).ColumnChunk(2 + i)
		if err != nil {
			t.Fatal(err)
		}
		b, err := theirs.MetaData().RowGroup(0).ColumnChunk(i)
		if err != nil {
			t.Fatal(err)
		}
		sa, err := a.Statistics()
		if err != nil {
			t.Fatal(err)
		}
		sb, err := b.Statistics()
		if err != nil {
			t.Fatal(err)
		}
		if sa.NullCount() != sb.NullCount() || !bytes.Equal(sa.EncodeMin(), sb.EncodeMin()) || !bytes.Equal(sa.EncodeMax(), sb.EncodeMax()) {
			t.Errorf("%s: statistics %d %x %x, arrow-go has %d %x %x", added[i].Name, sa.NullCount(), sa.EncodeMin(), sa.EncodeMax(),
				sb.NullCount(), sb.EncodeMin(), sb.EncodeMax())
		}
		if a.NumValues() != b.NumValues() || a.Compression() != b.Compression() {
			t.Errorf("%s: %d values, arrow-go has %d", added[i].Name, a.NumValues(), b.NumValues())
		}
		if a.Compression() != compress.Codecs.Zstd || len(a.EncodingStats()) != 1 {
			t.Errorf("%s: codec %v, encoding stats %v", added[i].Name, a.Compression(), a.EncodingStats())
		}
	}
}

// arrowColumns writes the columns of fill by arrow-go.
func arrowColumns(t *testing.T, rows int) *file.Reader {
	var b table.Batch
	b.Reset(rows, []table.Want{{As: table.Float}}, added)
	for i := range rows {
		b.In[0].Float[i] = wantZ(int64(i))
	}
	fill(&b, 0)
	optional := parquet.Repetitions.Optional
	root := schema.MustGroup(schema.NewGroupNode("schema", parquet.Repetitions.Required, schema.FieldList{
		schema.NewFloat64Node("twice", optional, -1), schema.NewFloat64Node("noise", optional, -1),
		schema.NewBooleanNode("new_flag", optional, -1), schema.NewInt32Node("new_state", optional, -1)}, -1))
	var buf bytes.Buffer
	w := file.NewParquetWriter(&buf, root, file.WithWriterProps(parquet.NewWriterProperties(
		parquet.WithCompression(compress.Codecs.Zstd), parquet.WithDictionaryDefault(false), parquet.WithPageIndexEnabled(true))))
	g, err := w.AppendRowGroupChecked()
	if err != nil {
		t.Fatal(err)
	}
	for i := range added {
		c, err := g.NextColumn()
		if err != nil {
			t.Fatal(err)
		}
		defs := make([]int16, rows)
		switch c := c.(type) {
		case *file.Float64ColumnChunkWriter:
			var v []float64
			for row, x := range b.Out[i].Float {
				if x == x {
					v, defs[row] = append(v, x), 1
				}
			}
			c.WriteBatch(v, defs, nil)
		case *file.BooleanColumnChunkWriter:
			var v []bool
			for row, x := range b.Out[i].Flag {
				if x != table.Null {
					v, defs[row] = append(v, x == table.True), 1
				}
			}
			c.WriteBatch(v, defs, nil)
		case *file.Int32ColumnChunkWriter:
			for row := range defs {
				defs[row] = 1
			}
			c.WriteBatch(b.Out[i].Int, defs, nil)
		}
		c.Close()
	}
	g.Close()
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	r, err := file.NewParquetReader(bytes.NewReader(buf.Bytes()), file.WithReadProps(parquet.NewReaderProperties(memory.DefaultAllocator)))
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// TestSameBytesAtAnyWorkerCount also proves that an encoder's past does not
// show in its pages.
func TestSameBytesAtAnyWorkerCount(t *testing.T) {
	s := shape{groups: []int{300000, 5, 70000, 1}}
	path := s.make(t)
	var sums [][32]byte
	for _, workers := range []int{1, 2, 5, 16} {
		out := newFileOutput(t)
		job := graftJob{path: path, want: []string{"z"}, spec: table.Spec{Added: added}, kernel: fill, workers: workers}
		if _, err := job.run(out); err != nil {
			t.Fatal(err)
		}
		if sums = append(sums, out.Sum()); sums[0] != sums[len(sums)-1] {
			t.Errorf("%d workers give other bytes", workers)
		}
	}
}

func TestFullDiskIsAnError(t *testing.T) {
	s := shape{groups: []int{100000}}
	path := s.make(t)
	info, _ := os.Stat(path)
	for _, at := range []int64{100, info.Size() + 1000, info.Size() + 900000} {
		out := newFileOutput(t)
		out.failAt = at
		job := graftJob{path: path, want: []string{"z"}, spec: table.Spec{Added: added}, kernel: fill, workers: 2}
		if _, err := job.run(out); err == nil {
			t.Errorf("a disk full after %d bytes passes", at)
		}
	}
}
