package demo

import (
	"fmt"
	"io"
	"math"

	"github.com/apache/arrow-go/v18/parquet"
	"github.com/apache/arrow-go/v18/parquet/compress"
	"github.com/apache/arrow-go/v18/parquet/file"
	"github.com/apache/arrow-go/v18/parquet/schema"

	"catenrich/internal/fault"
)

// WideCatalogue is what WriteParquet leaves.
const WideCatalogue = "quill_ridge_wide.parquet"

// wideGroup is the rows of a row group.
const wideGroup = 8192

// WriteParquet writes the same survey as [Write] with the same options, as a
// Parquet file of 60 columns: the rows of the CSV catalogue
// in their order, without its broken records, the 25 columns with the same
// float64 values, and 35 more of the types that wide catalogues have. A
// redshift that is text in the CSV is null. Templates and truth are those of
// Write. Nothing is replaced, as there.
func WriteParquet(dir string, o Options) (files []string, err error) {
	o, err = o.resolve()
	if err != nil {
		return nil, err
	}
	s, err := newSurvey(o)
	if err != nil {
		return nil, err
	}
	b := newBundle(dir)
	defer func() {
		if err != nil {
			b.discard()
		}
	}()
	w, err := b.create(WideCatalogue)
	if err != nil {
		return nil, err
	}
	// The library would close a file that it can close; the bundle does that.
	if err := s.writeParquet(struct{ io.Writer }{w}, o); err != nil {
		return nil, fault.IO.Errorf("writing the demo's Parquet file: %w", err)
	}
	return b.commit()
}

// A wideRow is a row with what only the wide catalogue has.
type wideRow struct {
	truth  truth
	record record
	extra  extra
}

// writeParquet writes one row group after the other.
func (s *survey) writeParquet(w io.Writer, o Options) (err error) {
	columns := wideColumns()
	fields := make(schema.FieldList, len(columns))
	for i := range columns {
		fields[i] = columns[i].node
	}
	root, err := schema.NewGroupNode("quill_ridge", parquet.Repetitions.Required, fields, -1)
	if err != nil {
		return err
	}
	// Where a dictionary overflows, the writer lists encodings in random order:
	// only columns of a few values have one.
	options := []parquet.WriterProperty{
		parquet.WithCreatedBy("catenrich demo"), parquet.WithCompression(compress.Codecs.Zstd),
		parquet.WithDictionaryDefault(false), parquet.WithPageIndexEnabled(true),
	}
	for _, c := range columns {
		if c.few {
			options = append(options, parquet.WithDictionaryFor(c.node.Name(), true))
		}
	}
	out, err := file.NewParquetWriterWithError(w, root, file.WithWriterProps(parquet.NewWriterProperties(options...)))
	if err != nil {
		return err
	}
	if err := out.AppendKeyValueMetadata("about", "Quill Ridge, an invented survey: nothing in it was observed"); err != nil {
		return err
	}
	dice := newDice(o.Seed, 3)
	rows := make([]wideRow, 0, wideGroup)
	for i := range s.slots {
		rows = rows[:len(rows)+1]
		row := &rows[len(rows)-1]
		s.make(i, &row.truth, &row.record)
		row.extra.fill(&row.truth, &row.record, dice)
		if defects[row.truth.defect].broken() {
			rows = rows[:len(rows)-1]
		}
		if len(rows) == wideGroup || i == len(s.slots)-1 && len(rows) > 0 {
			if err := writeGroup(out, columns, rows); err != nil {
				return err
			}
			rows = rows[:0]
		}
	}
	return out.Close()
}

func writeGroup(out *file.Writer, columns []wideColumn, rows []wideRow) error {
	group, err := out.AppendRowGroupChecked()
	if err != nil {
		return err
	}
	for _, c := range columns {
		for _, leaf := range c.leaves {
			chunk, err := group.NextColumn()
			if err == nil {
				err = leaf(chunk, rows)
			}
			if err == nil {
				err = chunk.Close()
			}
			if err != nil {
				return fmt.Errorf("column %s: %w", c.node.Name(), err)
			}
		}
	}
	return group.Close()
}

// A wideColumn is a top-level column with a function for each of its leaves.
type wideColumn struct {
	node   schema.Node
	leaves []leafWriter
	few    bool // values: they go into a dictionary
}

// A leafWriter writes the values of one leaf for a row group.
type leafWriter func(file.ColumnChunkWriter, []wideRow) error

// levels are the values of a leaf with their definition and repetition levels.
type levels[T any] struct {
	values   []T
	def, rep []int16
}

func (l *levels[T]) none(def, rep int16) { l.def, l.rep = append(l.def, def), append(l.rep, rep) }

func (l *levels[T]) add(v T, def, rep int16) {
	l.values = append(l.values, v)
	l.none(def, rep)
}

// nested makes a leaf of what each row adds to its levels.
func nested[T any](add func(*wideRow, *levels[T])) leafWriter {
	return func(w file.ColumnChunkWriter, rows []wideRow) error {
		var l levels[T]
		for i := range rows {
			add(&rows[i], &l)
		}
		if w.Descr().MaxRepetitionLevel() == 0 {
			l.rep = nil
		}
		if w.Descr().MaxDefinitionLevel() == 0 {
			l.def = nil
		}
		return writeLevels(w, &l)
	}
}

// flat makes a leaf of a column with a value or null in each row.
func flat[T any](get func(*wideRow) (v T, ok bool)) leafWriter {
	return nested(func(r *wideRow, l *levels[T]) {
		if v, ok := get(r); ok {
			l.add(v, 1, 0)
		} else {
			l.none(0, 0)
		}
	})
}

// writeLevels hands the levels to the library's writer of their type.
func writeLevels[T any](w file.ColumnChunkWriter, l *levels[T]) (err error) {
	switch v := any(l.values).(type) {
	case []bool:
		_, err = w.(*file.BooleanColumnChunkWriter).WriteBatch(v, l.def, l.rep)
	case []int32:
		_, err = w.(*file.Int32ColumnChunkWriter).WriteBatch(v, l.def, l.rep)
	case []int64:
		_, err = w.(*file.Int64ColumnChunkWriter).WriteBatch(v, l.def, l.rep)
	case []float32:
		_, err = w.(*file.Float32ColumnChunkWriter).WriteBatch(v, l.def, l.rep)
	case []float64:
		_, err = w.(*file.Float64ColumnChunkWriter).WriteBatch(v, l.def, l.rep)
	case []parquet.ByteArray:
		_, err = w.(*file.ByteArrayColumnChunkWriter).WriteBatch(v, l.def, l.rep)
	case []parquet.FixedLenByteArray:
		_, err = w.(*file.FixedLenByteArrayColumnChunkWriter).WriteBatch(v, l.def, l.rep)
	default:
		panic(fmt.Sprintf("demo: no Parquet column holds %T", l.values))
	}
	return err
}

// sameNumber makes a column of one of the catalogue's, with the same float64.
// Text and empty fields are null; NaN and sentinels are what they are.
func sameNumber(column int) wideColumn {
	node := schema.NewFloat64Node(columnNames[column], parquet.Repetitions.Optional, -1)
	return wideColumn{node: node, leaves: []leafWriter{flat(func(r *wideRow) (float64, bool) {
		v := &r.record[column]
		return v.number, !v.isText
	})}}
}

func sameInteger(column int) wideColumn {
	node := schema.NewInt32Node(columnNames[column], parquet.Repetitions.Optional, -1)
	return wideColumn{node: node, few: true, leaves: []leafWriter{flat(func(r *wideRow) (int32, bool) {
		v := &r.record[column]
		return int32(math.Round(v.number)), !v.isText
	})}}
}

func sameText(column int, few bool) wideColumn {
	return textColumn(columnNames[column], few, func(r *wideRow) string { return r.record[column].text })
}

// textColumn is null where the text is empty.
func textColumn(name string, few bool, get func(*wideRow) string) wideColumn {
	return wideColumn{node: textNode(name, parquet.Repetitions.Optional), few: few, leaves: []leafWriter{flat(func(r *wideRow) (parquet.ByteArray, bool) {
		s := get(r)
		return parquet.ByteArray(s), s != ""
	})}}
}

func textNode(name string, rep parquet.Repetition) schema.Node {
	return schema.MustPrimitive(schema.NewPrimitiveNodeLogical(name, rep, schema.StringLogicalType{}, parquet.Types.ByteArray, -1, -1))
}
