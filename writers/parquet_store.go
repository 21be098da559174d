package writers

import (
	"bufio"
	"bytes"
	"io"
	"os"

	"catenrich/internal/fault"
)

// A column chunk must be contiguous, and slices come row by row: the pages of
// a row group wait here, keyed by slice and column, until its last slice is
// in. What does not fit into memory waits in a scratch file.
type pageStore struct {
	room    int64 // bytes of pages that stay in memory
	scratch func() (*os.File, error)
	release func([]byte) // takes back a buffer

	slices []storedSlice
	held   int64
	file   *os.File
	end    int64 // of what is in the file

	copying []byte // a page on its way from the file
}

// A storedSlice has the pages of all new columns, one behind another in one
// buffer, or at an offset of the scratch file.
type storedSlice struct {
	buf   []byte // nil in the file
	at    int64
	pages []page
}

// A page stands at buf[from:to].
type page struct {
	from, to int
	meta     pageMeta
}

// add takes over the buffer.
func (s *pageStore) add(buf []byte, pages []page) error {
	if s.held+int64(len(buf)) <= s.room {
		s.held += int64(len(buf))
		s.slices = append(s.slices, storedSlice{buf: buf, pages: pages})
		return nil
	}
	if s.file == nil {
		var err error
		if s.file, err = s.scratch(); err != nil {
			return err
		}
	}
	if _, err := s.file.WriteAt(buf, s.end); err != nil {
		return fault.IO.Errorf("writing pages to a scratch file: %w", err)
	}
	s.slices = append(s.slices, storedSlice{at: s.end, pages: pages})
	s.end += int64(len(buf))
	s.release(buf)
	return nil
}

// copyPage writes one page to w.
func (s *pageStore) copyPage(w io.Writer, slice, column int) error {
	sl := &s.slices[slice]
	p := &sl.pages[column]
	if sl.buf != nil {
		_, err := w.Write(sl.buf[p.from:p.to])
		return err
	}
	s.copying = grow(s.copying[:0], p.to-p.from)
	if _, err := s.file.ReadAt(s.copying, sl.at+int64(p.from)); err != nil {
		return fault.IO.Errorf("reading pages from a scratch file: %w", err)
	}
	_, err := w.Write(s.copying)
	return err
}

// clear makes room for the next row group.
func (s *pageStore) clear() {
	for i := range s.slices {
		if s.slices[i].buf != nil {
			s.release(s.slices[i].buf)
		}
		s.slices[i] = storedSlice{}
	}
	s.slices, s.held, s.end = s.slices[:0], 0, 0
}

// close removes the scratch file, which has no name.
func (s *pageStore) close() error {
	if s.file == nil {
		return nil
	}
	f := s.file
	s.file = nil
	return f.Close()
}

// A spool is bytes that are written once and read once, in order: a few in
// memory, many in a scratch file.
type spool struct {
	scratch func() (*os.File, error)
	buf     []byte
	file    *os.File
	end     int64
	size    int64
}

// spoolRoom is how much of a spool stays in memory.
const spoolRoom = 4 << 20

func (s *spool) add(p []byte) error {
	s.size += int64(len(p))
	s.buf = append(s.buf, p...)
	if len(s.buf) < spoolRoom {
		return nil
	}
	if s.file == nil {
		var err error
		if s.file, err = s.scratch(); err != nil {
			return err
		}
	}
	if _, err := s.file.WriteAt(s.buf, s.end); err != nil {
		return fault.IO.Errorf("writing metadata to a scratch file: %w", err)
	}
	s.end += int64(len(s.buf))
	s.buf = s.buf[:0]
	return nil
}

// reader reads the spool from its start.
func (s *spool) reader() *bufio.Reader {
	if s.file == nil {
		return bufio.NewReader(bytes.NewReader(s.buf))
	}
	return bufio.NewReaderSize(io.MultiReader(io.NewSectionReader(s.file, 0, s.end), bytes.NewReader(s.buf)), 1<<16)
}

func (s *spool) close() error {
	if s.file == nil {
		return nil
	}
	f := s.file
	s.file = nil
	return f.Close()
}
