package readers

import (
	"context"
	"encoding/binary"
	"io"
	"math"
	"math/big"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"github.com/apache/arrow-go/v18/arrow/decimal128"
	"github.com/apache/arrow-go/v18/parquet"
	"github.com/apache/arrow-go/v18/parquet/compress"
	"github.com/apache/arrow-go/v18/parquet/file"
	"github.com/apache/arrow-go/v18/parquet/schema"

	"catenrich/internal/fault"
	"catenrich/internal/table"
	"catenrich/readers/readertest"
)

// writeParquet writes a file by arrow-go: one row group for each call of write.
func writeParquet(t testing.TB, dir string, fields schema.FieldList, groups ...func(g file.SerialRowGroupWriter)) string {
	t.Helper()
	path := filepath.Join(dir, "in.parquet")
	f, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	root, err := schema.NewGroupNode("schema", parquet.Repetitions.Required, fields, -1)
	if err != nil {
		t.Fatal(err)
	}
	w := file.NewParquetWriter(f, root)
	for _, write := range groups {
		g, err := w.AppendRowGroupChecked()
		if err != nil {
			t.Fatal(err)
		}
		write(g)
		if err := g.Close(); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return path
}

// column returns the next column's writer.
func column[T any](t testing.TB, g file.SerialRowGroupWriter) T {
	t.Helper()
	c, err := g.NextColumn()
	if err != nil {
		t.Fatal(err)
	}
	return c.(T)
}

func writeTable(t testing.TB, dir string, tb readertest.Table) string {
	var fields schema.FieldList
	for _, name := range tb.Names {
		fields = append(fields, schema.NewFloat64Node(name, parquet.Repetitions.Optional, -1))
	}
	var groups []func(file.SerialRowGroupWriter)
	const size = 1800
	for from := 0; from < tb.Rows(); from += size {
		groups = append(groups, func(g file.SerialRowGroupWriter) {
			for i := range tb.Columns {
				cells := tb.Columns[i][from:min(from+size, tb.Rows())]
				values, defs := []float64{}, make([]int16, len(cells))
				for row, v := range cells {
					if v == v {
						values, defs[row] = append(values, v), 1
					}
				}
				c := column[*file.Float64ColumnChunkWriter](t, g)
				if _, err := c.WriteBatch(values, defs, nil); err != nil {
					t.Fatal(err)
				}
				c.Close()
			}
		})
	}
	return writeParquet(t, dir, fields, groups...)
}

func TestParquetSource(t *testing.T) {
	readertest.Test(t, readertest.Format{
		Write: writeTable,
		Open:  func(path string) (table.Source, error) { return OpenParquet(path) },
	})
}

// numbers are columns of every kind that holds numbers or text, three rows
// each, and what they must come out as.
func numbers(t testing.TB) (path string, want map[string][3]float64, text map[string][3]string) {
	req := parquet.Repetitions.Required
	logical := func(name string, l schema.LogicalType, p parquet.Type, length int) schema.Node {
		n, err := schema.NewPrimitiveNodeLogical(name, req, l, p, length, -1)
		if err != nil {
			t.Fatal(err)
		}
		return n
	}
	inner := schema.MustGroup(schema.NewGroupNode("inner", parquet.Repetitions.Optional,
		schema.FieldList{schema.NewFloat64Node("z", parquet.Repetitions.Optional, -1)}, -1))
	fields := schema.FieldList{
		logical("f16", schema.Float16LogicalType{}, parquet.Types.FixedLenByteArray, 2),
		schema.NewFloat32Node("f32", req, -1),
		logical("u64", schema.NewIntLogicalType(64, false), parquet.Types.Int64, -1),
		logical("u8", schema.NewIntLogicalType(8, false), parquet.Types.Int32, -1),
		logical("i64", schema.NewIntLogicalType(64, true), parquet.Types.Int64, -1),
		logical("d9", schema.NewDecimalLogicalType(9, 3), parquet.Types.Int32, -1),
		logical("d18", schema.NewDecimalLogicalType(18, 10), parquet.Types.Int64, -1),
		logical("d38", schema.NewDecimalLogicalType(38, 20), parquet.Types.FixedLenByteArray, 16),
		logical("dvar", schema.NewDecimalLogicalType(20, 2), parquet.Types.ByteArray, -1),
		logical("text", schema.StringLogicalType{}, parquet.Types.ByteArray, -1),
		schema.NewBooleanNode("flag", req, -1),
		schema.MustGroup(schema.NewGroupNode("outer", parquet.Repetitions.Optional, schema.FieldList{inner}, -1)),
		logical("when", schema.NewTimestampLogicalType(true, schema.TimeUnitMicros), parquet.Types.Int64, -1),
	}
	d38 := [3]string{"-99999999999999999999999999999999999999", "1", "12345678901234567890123456789"}
	path = writeParquet(t, t.TempDir(), fields, func(g file.SerialRowGroupWriter) {
		fixed := func(v ...[]byte) {
			var all []parquet.FixedLenByteArray
			for _, b := range v {
				all = append(all, b)
			}
			column[*file.FixedLenByteArrayColumnChunkWriter](t, g).WriteBatch(all, nil, nil)
		}
		half := func(h uint16) []byte { return binary.LittleEndian.AppendUint16(nil, h) }
		fixed(half(0x3555), half(0x8001), half(0x7bff))
		column[*file.Float32ColumnChunkWriter](t, g).WriteBatch([]float32{0.1, -2, 3e38}, nil, nil)
		column[*file.Int64ColumnChunkWriter](t, g).WriteBatch([]int64{-1, 0, 1 << 62}, nil, nil)
		column[*file.Int32ColumnChunkWriter](t, g).WriteBatch([]int32{255, 0, 7}, nil, nil)
		column[*file.Int64ColumnChunkWriter](t, g).WriteBatch([]int64{-1, 9007199254740993, -99}, nil, nil)
		column[*file.Int32ColumnChunkWriter](t, g).WriteBatch([]int32{-123, 0, 999999999}, nil, nil)
		column[*file.Int64ColumnChunkWriter](t, g).WriteBatch([]int64{1, 999999999999999999, -5}, nil, nil)
		var big16 [][]byte
		for _, s := range d38 {
			n, _ := new(big.Int).SetString(s, 10)
			d := decimal128.FromBigInt(n)
			big16 = append(big16, binary.BigEndian.AppendUint64(binary.BigEndian.AppendUint64(nil, uint64(d.HighBits())), d.LowBits()))
		}
		fixed(big16...)
		column[*file.ByteArrayColumnChunkWriter](t, g).WriteBatch([]parquet.ByteArray{{0xff}, {1, 0}, {0, 0xe8, 0xd4, 0xa5, 0x10, 0, 0, 0, 0, 1}}, nil, nil)
		column[*file.ByteArrayColumnChunkWriter](t, g).WriteBatch([]parquet.ByteArray{[]byte("a"), []byte(""), []byte("ü")}, nil, nil)
		column[*file.BooleanColumnChunkWriter](t, g).WriteBatch([]bool{true, false, true}, nil, nil)
		column[*file.Float64ColumnChunkWriter](t, g).WriteBatch([]float64{0.5}, []int16{3, 1, 0}, nil)
		column[*file.Int64ColumnChunkWriter](t, g).WriteBatch([]int64{1, 2, 3}, nil, nil)
	})
	parse := func(s string) float64 {
		v, err := strconv.ParseFloat(s, 64)
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
	nan := math.NaN()
	dvar := new(big.Int).SetBytes([]byte{0, 0xe8, 0xd4, 0xa5, 0x10, 0, 0, 0, 0, 1})
	want = map[string][3]float64{
		"f16": {0.333251953125, -0x1p-24, 65504}, // IEEE 754-2008, binary16: nearest to 1/3, smallest subnormal, largest
		"f32": {float64(float32(0.1)), -2, float64(float32(3e38))},
		"u64": {18446744073709551615, 0, 1 << 62}, "u8": {255, 0, 7}, "i64": {-1, 9007199254740992, -99},
		"d9":   {-0.123, 0, 999999.999},
		"d18":  {1e-10, parse("99999999.9999999999"), -5e-10},
		"d38":  {parse(d38[0] + "e-20"), 1e-20, parse(d38[2] + "e-20")},
		"dvar": {-0.01, 2.56, parse(dvar.String() + "e-2")}, "outer.inner.z": {0.5, nan, nan},
	}
	text = map[string][3]string{"text": {"a", "", "ü"}, "flag": {"true", "false", "true"}, "u64": {"18446744073709551615", "0", "4611686018427387904"},
		"i64": {"-1", "9007199254740993", "-99"}, "f32": {"0.1", "-2", "3e+38"}, "d9": {"-0.123", "0", "999999.999"}}
	return path, want, text
}

func TestParquetNumbersOfEveryKind(t *testing.T) {
	path, want, text := numbers(t)
	for name, values := range want {
		b, p := decodeOne(t, path, name, table.Float)
		for row, v := range values {
			if got := b.In[0].Float[row]; math.Float64bits(got) != math.Float64bits(v) && !(got != got && v != v) {
				t.Errorf("%s, row %d: %v, want %v", name, row, got, v)
			}
		}
		p.Close()
	}
	for name, values := range text {
		b, p := decodeOne(t, path, name, table.Bytes)
		for row, v := range values {
			if got := string(b.In[0].Bytes[row]); got != v || b.In[0].Bytes[row] == nil {
				t.Errorf("%s, row %d: %q, want %q", name, row, got, v)
			}
		}
		p.Close()
	}
}

func decodeOne(t testing.TB, path, name string, as table.Kind) (*table.Batch, *Parquet) {
	t.Helper()
	p, err := OpenParquet(path)
	if err != nil {
		t.Fatal(err)
	}
	i, err := p.Schema().Index(name, "test")
	if err != nil {
		t.Fatal(err)
	}
	if err := p.Select([]table.Want{{Field: i, As: as}}, nil); err != nil {
		t.Fatal(err)
	}
	c, err := p.Next(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	b := new(table.Batch)
	if err := p.Decode(c, b); err != nil {
		t.Fatal(err)
	}
	return b, p
}

func TestParquetTypes(t *testing.T) {
	path, _, _ := numbers(t)
	p, err := OpenParquet(path)
	if err != nil {
		t.Fatal(err)
	}
	defer p.Close()
	want := map[string]table.Type{"f16": table.Float16, "f32": table.Float32, "u64": table.Integer, "d38": table.Decimal, "text": table.Text,
		"flag": table.Bool, "outer": table.Other, "outer.inner": table.Other, "outer.inner.z": table.Float64, "when": table.Other}
	for name, typ := range want {
		if i, err := p.Schema().Index(name, ""); err != nil || p.Schema().Fields[i].Type != typ {
			t.Errorf("%s: %v, %v, want %v", name, i, err, typ)
		}
	}
	for name, as := range map[string]table.Kind{"text": table.Float, "flag": table.Float, "outer": table.Float, "when": table.Float, "outer.inner": table.Bytes} {
		i, _ := p.Schema().Index(name, "")
		if err := p.Select([]table.Want{{Field: i, As: as}}, nil); fault.Of(err) != fault.Data || !strings.Contains(err.Error(), strconv.Quote(name)) {
			t.Errorf("%s as %d: %v", name, as, err)
		}
	}
}

// TestParquetInfinityIsMalformed: the cell is reported with its place.
func TestParquetInfinityIsMalformed(t *testing.T) {
	path := writeParquet(t, t.TempDir(), schema.FieldList{schema.NewFloat64Node("z", parquet.Repetitions.Required, -1)},
		func(g file.SerialRowGroupWriter) {
			column[*file.Float64ColumnChunkWriter](t, g).WriteBatch([]float64{1, math.Inf(1), math.NaN()}, nil, nil)
		})
	b, p := decodeOne(t, path, "z", table.Float)
	defer p.Close()
	if got := b.In[0].State; got[0] != table.Good || got[1] != table.Malformed || got[2] != table.Missing {
		t.Errorf("states %v", got)
	}
	if len(b.Cells) != 1 || b.Cells[0].Row != 2 || b.Cells[0].Column != "z" {
		t.Errorf("cells %+v", b.Cells)
	}
}

// TestParquetSlices: a long row group comes in slices of ParquetSlice rows.
func TestParquetSlices(t *testing.T) {
	const rows = 2*ParquetSlice + 1
	path := writeParquet(t, t.TempDir(), schema.FieldList{schema.NewInt64Node("id", parquet.Repetitions.Required, -1)},
		func(g file.SerialRowGroupWriter) {
			v := make([]int64, rows)
			for i := range v {
				v[i] = int64(i)
			}
			column[*file.Int64ColumnChunkWriter](t, g).WriteBatch(v, nil, nil)
		})
	p, err := OpenParquet(path)
	if err != nil {
		t.Fatal(err)
	}
	defer p.Close()
	if err := p.Select([]table.Want{{Field: 0, As: table.Float}}, nil); err != nil {
		t.Fatal(err)
	}
	var b table.Batch
	want := int64(0)
	for {
		c, err := p.Next(context.Background())
		if err == io.EOF {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		if c.FirstRow != want || c.Last != (c.FirstRow == 2*ParquetSlice) {
			t.Errorf("chunk %+v, want first row %d", c, want)
		}
		if err := p.Decode(c, &b); err != nil {
			t.Fatal(err)
		}
		for i, v := range b.In[0].Float {
			if v != float64(want+int64(i)) {
				t.Fatalf("row %d: %v", want+int64(i), v)
			}
		}
		want += int64(c.Rows)
	}
	if want != rows {
		t.Errorf("%d rows, want %d", want, rows)
	}
}

// TestParquetLongPages: pages of many slices, in every codec, with nulls and
// without, numbers and text.
func TestParquetLongPages(t *testing.T) {
	const rows = 4*ParquetSlice + 77
	opt, req := parquet.Repetitions.Optional, parquet.Repetitions.Required
	text, err := schema.NewPrimitiveNodeLogical("text", opt, schema.StringLogicalType{}, parquet.Types.ByteArray, -1, -1)
	if err != nil {
		t.Fatal(err)
	}
	fields := schema.FieldList{schema.NewFloat64Node("z", opt, -1), schema.NewInt64Node("id", req, -1), text}
	root := schema.MustGroup(schema.NewGroupNode("schema", req, fields, -1))
	var z []float64
	var words []parquet.ByteArray
	ids, defs := make([]int64, rows), make([]int16, rows)
	for i := range ids {
		if ids[i] = int64(i); i%7 != 3 {
			z, words, defs[i] = append(z, float64(i)/3), append(words, strconv.AppendInt([]byte("word "), int64(i), 10)), 1
		}
	}
	codecs := compress.Codecs
	for _, codec := range []compress.Compression{codecs.Uncompressed, codecs.Snappy, codecs.Gzip, codecs.Zstd, codecs.Brotli, codecs.Lz4Raw} {
		for _, version := range []parquet.DataPageVersion{parquet.DataPageV1, parquet.DataPageV2} {
			path := filepath.Join(t.TempDir(), "long.parquet")
			f, err := os.Create(path)
			if err != nil {
				t.Fatal(err)
			}
			w := file.NewParquetWriter(f, root, file.WithWriterProps(parquet.NewWriterProperties(parquet.WithCompression(codec), parquet.WithDictionaryDefault(false),
				parquet.WithDataPageSize(64<<20), parquet.WithDataPageVersion(version), parquet.WithCompressionLevel(1))))
			g, err := w.AppendRowGroupChecked()
			if err != nil {
				t.Fatal(err)
			}
			for range fields {
				c, err := g.NextColumn()
				if err != nil {
					t.Fatal(err)
				}
				switch c := c.(type) {
				case *file.Float64ColumnChunkWriter:
					c.WriteBatch(z, defs, nil)
				case *file.Int64ColumnChunkWriter:
					c.WriteBatch(ids, nil, nil)
				case *file.ByteArrayColumnChunkWriter:
					c.WriteBatch(words, defs, nil)
				}
				c.Close()
			}
			g.Close()
			if err := w.Close(); err != nil {
				t.Fatal(err)
			}
			checkLongPages(t, path, rows)
		}
	}
}

func checkLongPages(t *testing.T, path string, rows int64) {
	t.Helper()
	p, err := OpenParquet(path)
	if err != nil {
		t.Fatal(err)
	}
	defer p.Close()
	if err := p.Select([]table.Want{{Field: 0, As: table.Float}, {Field: 1, As: table.Float}, {Field: 2, As: table.Bytes}}, nil); err != nil {
		t.Fatal(err)
	}
	var b table.Batch
	row := int64(0)
	for {
		c, err := p.Next(context.Background())
		if err == io.EOF {
			break
		}
		if err := p.Decode(c, &b); err != nil {
			t.Fatal(err)
		}
		for i := range b.Rows {
			null := row%7 == 3
			word := "word " + strconv.FormatInt(row, 10)
			if b.In[1].Float[i] != float64(row) || null != (b.In[0].State[i] == table.Missing) || !null && b.In[0].Float[i] != float64(row)/3 ||
				null != (b.In[2].Bytes[i] == nil) || !null && string(b.In[2].Bytes[i]) != word {
				t.Fatalf("row %d: %v, %v, %q", row, b.In[0].Float[i], b.In[1].Float[i], b.In[2].Bytes[i])
			}
			row++
		}
	}
	if row != rows {
		t.Errorf("%d rows of %d", row, rows)
	}
}

func TestFloat16(t *testing.T) {
	for h := range uint16(0xffff) {
		// Source: IEEE 754-2008, 3.4: (-1)^s 2^(e-15) (1 + f/1024), and without
		// the 1 and with e = 1 where the exponent field is 0.
		e, f := int(h>>10&31), float64(h&1023)/1024
		want := math.Ldexp(1+f, e-15)
		switch {
		case e == 0:
			want = math.Ldexp(f, -14)
		case e == 31 && f == 0:
			want = math.Inf(1)
		case e == 31:
			want = math.NaN()
		}
		if h >= 0x8000 {
			want = -want
		}
		if got := float16(h); math.Float64bits(got) != math.Float64bits(want) && !(got != got && want != want) {
			t.Fatalf("%04x: %v, want %v", h, got, want)
		}
	}
}
