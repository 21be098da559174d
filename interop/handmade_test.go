package interop

import (
	"bytes"
	"database/sql"
	"encoding/binary"
	"fmt"
	"math"
	"os"
	"testing"

	"github.com/apache/arrow-go/v18/parquet"
	"github.com/apache/arrow-go/v18/parquet/file"
	"github.com/apache/arrow-go/v18/parquet/schema"

	"catenrich/readers"
)

// handmade are annotations that no maker writes, as compact Thrift: the field
// logicalType of a SchemaElement (or another field) that is inserted behind
// the name of an unannotated column. Numbers are those of parquet.thrift.
var handmade = []struct {
	name, column string
	insert       []byte
}{
	{"FLOAT16", "half", []byte{0x6c, 0xfc, 0x00, 0x00}},                                     // field 10: union, field 15, empty
	{"GEOMETRY", "shape", []byte{0x6c, 0x0c, 0x22, 0x00, 0x00}},                             // field 17
	{"GEOGRAPHY with a CRS", "shape", []byte{0x6c, 0x0c, 0x24, 0x18, 1, 'X', 0x00, 0x00}},   // field 18
	{"an unknown annotation", "shape", []byte{0x6c, 0x0c, 0xc8, 0x01, 0x15, 4, 0x00, 0x00}}, // field 100
	{"an unknown field of an element", "shape", []byte{0x05, 0xd0, 0x0f, 0x0e}},             // field 1000, an i32
}

// handmadeMakers make files with such a footer.
func handmadeMakers() []maker {
	var all []maker
	for _, h := range handmade {
		all = append(all, maker{"by hand: " + h.name, func(t testing.TB, _ *sql.DB, path string) error {
			b, err := plainFile()
			if err != nil {
				return err
			}
			n := len(b) - 8
			start := n - int(binary.LittleEndian.Uint32(b[n:]))
			element := append([]byte{0x18, byte(len(h.column))}, h.column...)
			at := bytes.Index(b[start:n], element)
			if at < 0 || b[start+at+len(element)] != 0 {
				return fmt.Errorf("column %s does not stand unannotated in the footer", h.column)
			}
			at += start + len(element)
			footer := append(append(bytes.Clone(b[start:at]), h.insert...), b[at:n]...)
			out := append(bytes.Clone(b[:start]), footer...)
			out = append(binary.LittleEndian.AppendUint32(out, uint32(len(footer))), "PAR1"...)
			return os.WriteFile(path, out, 0o666)
		}})
	}
	return all
}

// plainFile has a double, two bytes and a blob in each row, unannotated.
func plainFile() ([]byte, error) {
	req := parquet.Repetitions.Required
	root, err := schema.NewGroupNode("schema", req, schema.FieldList{
		schema.NewFloat64Node("z", req, -1),
		schema.NewFixedLenByteArrayNode("half", req, 2, -1),
		schema.NewByteArrayNode("shape", req, -1),
	}, -1)
	if err != nil {
		return nil, err
	}
	var buf bytes.Buffer
	w := file.NewParquetWriter(&buf, root)
	g, err := w.AppendRowGroupChecked()
	if err != nil {
		return nil, err
	}
	var z []float64
	var half []parquet.FixedLenByteArray
	var shape []parquet.ByteArray
	for i := range 200 {
		z = append(z, float64(i)/2)
		half = append(half, binary.LittleEndian.AppendUint16(nil, uint16(0x3c00+i)))
		point := append([]byte{1, 1, 0, 0, 0}, make([]byte, 16)...) // well-known binary, little-endian
		binary.LittleEndian.PutUint64(point[5:], math.Float64bits(z[i]))
		shape = append(shape, point)
	}
	for range 3 {
		c, err := g.NextColumn()
		if err != nil {
			return nil, err
		}
		switch c := c.(type) {
		case *file.Float64ColumnChunkWriter:
			c.WriteBatch(z, nil, nil)
		case *file.FixedLenByteArrayColumnChunkWriter:
			c.WriteBatch(half, nil, nil)
		case *file.ByteArrayColumnChunkWriter:
			c.WriteBatch(shape, nil, nil)
		}
		if err := c.Close(); err != nil {
			return nil, err
		}
	}
	if err := g.Close(); err != nil {
		return nil, err
	}
	err = w.Close()
	return buf.Bytes(), err
}

// TestHandmadeSurvives: what was inserted by hand is in the output's footer.
func TestHandmadeSurvives(t *testing.T) {
	for i, m := range handmadeMakers() {
		in, out := t.TempDir()+"/in.parquet", t.TempDir()+"/out.parquet"
		if err := m.make(t, nil, in); err != nil {
			t.Fatal(err)
		}
		graft(t, in, out, specs[0])
		b, err := os.ReadFile(out)
		if err != nil {
			t.Fatal(err)
		}
		n := len(b) - 8
		footer := b[n-int(binary.LittleEndian.Uint32(b[n:])) : n]
		if !bytes.Contains(footer, append([]byte(handmade[i].column), handmade[i].insert...)) {
			t.Errorf("%s: the output's footer is without it", m.name)
		}
		p, err := readers.OpenParquet(out)
		if err != nil {
			t.Fatal(err)
		}
		p.Close()
	}
}
