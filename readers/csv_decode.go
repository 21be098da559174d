package readers

import (
	"errors"
	"fmt"
	"sync"

	"catenrich/internal/delim"
	"catenrich/internal/table"
)

// Rows says where the rows of a chunk's text end, and which bytes belong to no
// row because their record was rejected. Places count from the start of Raw.
type Rows struct {
	Ends  []int        // of each row's text, before its line end
	Drops []delim.Span // rejected records with their line ends, in order
}

func (r *Rows) reset() { r.Ends, r.Drops = r.Ends[:0], r.Drops[:0] }

// Rows returns what Decode found out of the chunk.
func (s *CSV) Rows(c *table.Chunk) *Rows { return &c.Cols.(*csvChunk).rows }

// Why a record has no row, and a cell no number.
var (
	errNotNumber = errors.New("not a number")
	errTooLarge  = errors.New("beyond the range of numbers")
)

// spans holds the places of fields for one call of Decode.
var spans = sync.Pool{New: func() any { return new([]delim.Span) }}

// Decode implements [table.Source]. A record that cannot be split, or whose
// number of fields is not that of the header, is a Reject. Only the fields up
// to the last that is wanted are located; the others are counted.
func (s *CSV) Decode(c *table.Chunk, b *table.Batch) error {
	at := spans.Get().(*[]delim.Span)
	defer spans.Put(at)
	if cap(*at) < s.located {
		*at = make([]delim.Span, s.located)
	}
	d := decoder{CSV: s, raw: c.Raw, batch: b, rows: s.Rows(c), at: (*at)[:s.located]}
	d.rows.reset()
	lines := s.dialect.Lines(c.Raw)
	quotes := lines.Quotes()
	rows := c.Rows
	if quotes || rows > len(c.Raw)/4 { // most line ends may end no row
		rows = int(s.countRows(c))
	}
	b.Reset(rows, s.wants, s.added)

	number := c.Line
	plain := !quotes // then every line is one line
	for pos := 0; pos < len(c.Raw); {
		end, next := lines.Next(pos)
		if line := c.Raw[pos:end]; !s.dialect.IsBlank(line) && !s.dialect.IsComment(line) {
			n, err := s.dialect.Locate(line, quotes, d.at)
			if err == nil && n == len(s.schema.Fields) {
				d.row(pos, end, number)
			} else {
				d.reject(c, pos, end, next, number, n, err)
			}
		}
		if plain {
			number++
		} else {
			number += int64(delim.CountLineEnds(c.Raw[pos:next]))
		}
		pos = next
	}
	b.Resize(len(d.rows.Ends), s.wants, s.added)
	return nil
}

// A decoder fills one batch from one chunk.
type decoder struct {
	*CSV
	raw   []byte
	batch *table.Batch
	rows  *Rows
	at    []delim.Span // of the record at hand
}

// row adds the record raw[pos:end], whose fields are in d.at.
func (d *decoder) row(pos, end int, line int64) {
	row := len(d.rows.Ends)
	d.rows.Ends = append(d.rows.Ends, end)
	d.batch.Marks = append(d.batch.Marks, line)
	for i := range d.wants {
		w := &d.wants[i]
		f := d.at[w.Field]
		value := d.dialect.Value(d.raw[pos+f.Start : pos+f.End])
		column := &d.batch.In[i]
		if w.As == table.Bytes {
			column.Bytes[row], column.State[row] = value, table.Good
			if len(value) == 0 {
				column.SetBad(row, table.Missing)
			}
			continue
		}
		v, ok := delim.ParseFloat(value)
		switch {
		case !ok:
			column.SetBad(row, table.Malformed)
			d.badCell(w.Field, row, line, value)
		default:
			column.SetFloat(row, v)
		}
	}
}

// maxShown is how many bytes of a value go into a message.
const maxShown = 80

// badCell keeps the first few cells that are no numbers, for messages.
func (d *decoder) badCell(field, row int, line int64, value []byte) {
	if len(d.batch.Cells) == table.MaxCells {
		return
	}
	shown := string(value[:min(len(value), maxShown)])
	if len(value) > maxShown {
		shown += "…"
	}
	err := errNotNumber
	if delim.IsNumber(value) {
		err = errTooLarge
	}
	d.batch.Cells = append(d.batch.Cells, table.CellError{
		File: d.name, Column: d.schema.Fields[field].Name, Value: shown,
		Line: line, Row: int64(row) + 1, Err: err,
	})
}

// reject adds a record that has no row.
func (d *decoder) reject(c *table.Chunk, pos, end, next int, line int64, n int, err error) {
	reason := fmt.Sprintf("its field count is %d, want %d", n, len(d.schema.Fields))
	if err != nil {
		reason = err.Error()
	}
	d.rows.Drops = append(d.rows.Drops, delim.Span{Start: pos, End: next})
	d.batch.Rejects = append(d.batch.Rejects, table.Reject{
		Line: line, Offset: c.Offset + int64(pos), Reason: reason,
		Record: append([]byte(nil), d.raw[pos:end]...),
	})
}
