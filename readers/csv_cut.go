package readers

import (
	"io"

	"catenrich/internal/delim"
	"catenrich/internal/fault"
)

// cutChunk fills c.buffer with text, and returns how much of it is a chunk.
// The rest goes back to the stash. With an error, the chunk is the last.
func (s *CSV) cutChunk(c *csvChunk) (n int, err error) {
	filled, taken := 0, s.stashed
	for size := s.options.BlockSize; ; size = min(2*size, MaxRecord+1) {
		if filled, err = s.fill(c, filled, size); err != nil {
			return 0, err
		}
		if filled == 0 {
			return 0, io.EOF
		}
		block := c.buffer[:filled]
		all := s.ended && s.stashed == len(s.stash)
		n, open := s.dialect.Cut(block, all)
		if n > 0 && size > s.options.BlockSize {
			// A long record is a chunk of its own: what was read with it may
			// hold more lines than a batch should.
			_, n, _, _ = s.dialect.First(block)
			open = -1
		}
		switch {
		case open >= 0 && all:
			return n, s.unclosed(block, open)
		case n > 0:
			s.putBack(block[n:], filled == s.stashed-taken)
			return n, nil
		case size > MaxRecord:
			return 0, s.tooLong(block, open)
		}
	}
}

// fill brings c.buffer to size bytes of text, or to all there is.
func (s *CSV) fill(c *csvChunk, filled, size int) (int, error) {
	if cap(c.buffer) < size {
		bigger := make([]byte, size)
		copy(bigger, c.buffer[:filled])
		c.buffer = bigger
	}
	c.buffer = c.buffer[:size]
	n := copy(c.buffer[filled:], s.stash[s.stashed:])
	s.stashed += n
	filled += n
	if s.ended {
		return filled, nil
	}
	for filled < size {
		n, err := s.text.Read(c.buffer[filled:])
		filled += n
		if err == io.EOF {
			// The digest is of all bytes, whatever the decompressor needed.
			if _, err = io.Copy(io.Discard, s.feed); err == nil {
				s.ended = true
				return filled, nil
			}
		}
		if err != nil {
			return filled, s.readError(err)
		}
	}
	return filled, nil
}

// putBack returns text to the front of the stash; again says that all of it
// came from there, and still stands there.
func (s *CSV) putBack(text []byte, again bool) {
	if again {
		s.stashed -= len(text)
		return
	}
	if cap(s.stash) > 4*s.options.BlockSize && len(text) <= s.options.BlockSize {
		s.stash = nil // of a long record
	}
	s.stash, s.stashed = append(s.stash[:0], text...), 0
}

func (s *CSV) unclosed(block []byte, open int) error {
	return fault.Data.Errorf("%s:%d: a quote opens here that is not closed: close it, or read the file without quotes (input.csv.quote = \"none\")",
		s.name, s.line+int64(delim.CountLineEnds(block[:open])))
}

func (s *CSV) tooLong(block []byte, open int) error {
	if open >= 0 {
		return fault.Data.Errorf("%s:%d: a quote opens here that is not closed within %d MiB, the longest record that is read: close it, or read the file without quotes (input.csv.quote = \"none\")",
			s.name, s.line+int64(delim.CountLineEnds(block[:open])), MaxRecord>>20)
	}
	return fault.Data.Errorf("%s:%d: the record that begins here is longer than %d MiB, the longest that is read", s.name, s.line, MaxRecord>>20)
}
