package readers

import (
	"context"
	"io"

	"catenrich/internal/delim"
	"catenrich/internal/fault"
	"catenrich/internal/table"
)

// A finder reads an input a second time, for its rows one by one. It goes
// forward only, so rows asked for in order cost one pass together.
type finder struct {
	again *CSV
	chunk *table.Chunk // the one at hand, nil before the first
	first int64        // its first row
	rows  int64
}

// Locate implements [table.Source]. It reads the file from the start, or from
// the row that was asked for last if that stands before. A stream has nothing
// to go back to.
func (s *CSV) Locate(row int64) (c *table.Chunk, within int, err error) {
	if s.file == nil {
		return nil, 0, fault.Usage.Errorf("%s is a stream: its rows cannot be looked up", s.name)
	}
	if s.finder == nil || row < s.finder.first {
		if s.finder != nil {
			s.finder.close()
		}
		again, err := OpenCSV(s.name, s.options)
		if err != nil {
			return nil, 0, err
		}
		s.finder = &finder{again: again}
	}
	f := s.finder
	for row < 0 || f.chunk == nil || row >= f.first+f.rows {
		if err := f.advance(); err == io.EOF {
			return nil, 0, fault.Data.Errorf("%s has no row %d: it has %d rows", s.name, row+1, f.first+f.rows)
		} else if err != nil {
			return nil, 0, err
		}
	}
	return f.copy(), int(row - f.first), nil
}

// advance goes to the next chunk and counts its rows.
func (f *finder) advance() error {
	next, err := f.again.Next(context.Background())
	if err != nil {
		return err
	}
	f.first += f.rows
	if f.chunk != nil {
		f.again.Release(f.chunk)
	}
	f.chunk, f.rows = next, f.again.countRows(next)
	return nil
}

// copy returns a chunk of the caller's own.
func (f *finder) copy() *table.Chunk {
	c := &csvChunk{buffer: append([]byte(nil), f.chunk.Raw...)}
	c.Chunk = *f.chunk
	c.FirstRow, c.Raw, c.Cols = f.first, c.buffer, c
	return &c.Chunk
}

func (f *finder) close() error {
	f.chunk = nil
	return f.again.Close()
}

// countRows returns how many rows Decode will make of a chunk.
func (s *CSV) countRows(c *table.Chunk) (rows int64) {
	lines := s.dialect.Lines(c.Raw)
	for pos := 0; pos < len(c.Raw); {
		end, next := lines.Next(pos)
		if line := c.Raw[pos:end]; !s.dialect.IsBlank(line) && !s.dialect.IsComment(line) {
			if n, err := s.dialect.Locate(line, lines.Quotes(), []delim.Span(nil)); err == nil && n == len(s.schema.Fields) {
				rows++
			}
		}
		pos = next
	}
	return rows
}
