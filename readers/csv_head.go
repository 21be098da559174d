package readers

import (
	"bytes"
	"fmt"
	"strconv"

	"catenrich/internal/delim"
	"catenrich/internal/fault"
	"catenrich/internal/table"
)

// A head is what stands before the first chunk: a byte order mark, and all
// lines down to the header.
type head struct {
	text   []byte
	insert int // where new names go: before the header's line end; -1 without a header
}

var (
	byteOrderMark = []byte("\xef\xbb\xbf")
	utf16Marks    = [][]byte{{0xff, 0xfe}, {0xfe, 0xff}}
)

// readHead reads as far as it takes to know the columns, and leaves the rest
// in the stash.
func (s *CSV) readHead() error {
	c := csvChunks.Get().(*csvChunk)
	defer csvChunks.Put(c)
	filled := 0
	for size := s.options.BlockSize; ; size = min(2*size, MaxRecord+1) {
		var err error
		if filled, err = s.fill(c, filled, size); err != nil {
			return err
		}
		text := c.buffer[:filled]
		done, err := s.parseHead(text, s.ended)
		if err != nil {
			return err
		}
		if done {
			s.putBack(text[len(s.head.text):], false)
			s.line += int64(delim.CountLineEnds(s.head.text))
			s.offset = int64(len(s.head.text))
			return nil
		}
		if size > MaxRecord {
			return fault.Data.Errorf("%s has no header within its first %d MiB", s.name, MaxRecord>>20)
		}
	}
}

// parseHead looks for the columns in the beginning of the input; all says that
// it is the whole input. It is done if more text would change nothing.
func (s *CSV) parseHead(text []byte, all bool) (done bool, err error) {
	if len(text) == 0 && all {
		return false, fault.Data.Errorf("%s is empty", s.name)
	}
	for _, mark := range utf16Marks {
		if bytes.HasPrefix(text, mark) {
			return false, fault.Data.Errorf("%s is UTF-16: convert it to UTF-8 first", s.name)
		}
	}
	mark := 0
	if bytes.HasPrefix(text, byteOrderMark) {
		mark = len(byteOrderMark)
	}
	records, header := s.options.dialects()
	if s.options.Header == HeaderNone {
		first, whole, err := s.firstRecord(text, mark, all, &records)
		if err != nil || !whole {
			return false, err
		}
		s.head = head{text: bytes.Clone(text[:mark]), insert: -1}
		return true, s.nameByNumber(text, first, &records)
	}

	var line foundLine
	var whole bool
	if s.options.Header == HeaderCommented {
		line, whole = s.commentedHeader(text, mark, all, &records)
	} else {
		line, whole, err = s.firstRecord(text, mark, all, &header)
	}
	if err != nil || !whole {
		return false, err
	}
	if line.next == 0 {
		return false, fault.Data.Errorf("%s has no header: %s", s.name, s.whereHeader())
	}
	s.head = head{text: bytes.Clone(text[:line.next]), insert: line.end}
	start := line.start
	if s.options.Header == HeaderCommented {
		start += len(records.Comment)
	}
	return true, s.nameByHeader(text[start:line.end], &header)
}

func (s *CSV) whereHeader() string {
	if s.options.Header == HeaderCommented {
		return fmt.Sprintf("no line begins with %q before the first record", s.dialect.Comment)
	}
	return "all its lines are blank or comments"
}

// A foundLine is text[start:end], and the next begins at next; all 0 for none.
type foundLine struct{ start, end, next int }

// firstRecord finds the first line that is neither blank nor a comment. It is
// whole if more text would not change it; there may be none.
func (s *CSV) firstRecord(text []byte, pos int, all bool, d *delim.Dialect) (_ foundLine, whole bool, err error) {
	for pos < len(text) {
		end, next, whole, open := d.First(text[pos:])
		if !whole && !all {
			return foundLine{}, false, nil
		}
		if open >= 0 {
			s.line = 1
			return foundLine{}, false, s.unclosed(text, pos+open)
		}
		if line := text[pos : pos+end]; !d.IsBlank(line) && !d.IsComment(line) {
			return foundLine{pos, pos + end, pos + next}, true, nil
		}
		pos += next
	}
	return foundLine{}, all, nil
}

// commentedHeader finds the last comment before the first record.
func (s *CSV) commentedHeader(text []byte, pos int, all bool, d *delim.Dialect) (last foundLine, whole bool) {
	for pos < len(text) {
		end, next, whole, _ := d.First(text[pos:])
		line := text[pos : pos+end]
		switch {
		case d.IsComment(line):
			if !whole && !all {
				return last, false
			}
			last = foundLine{pos, pos + end, pos + next}
		case d.IsBlank(line):
			if !whole && !all {
				return last, false
			}
		case len(line) < len(d.Comment) && !whole && !all: // it may become a comment
			return last, false
		default:
			return last, true
		}
		pos += next
	}
	return last, all
}

// nameByHeader makes the schema from the text of a header.
func (s *CSV) nameByHeader(text []byte, d *delim.Dialect) error {
	if d.Delimiter == ' ' {
		text = delim.Trim(text)
	}
	n, err := d.Locate(text, true, nil)
	if err != nil {
		return fault.Data.Errorf("%s: the header cannot be split: %w", s.name, err)
	}
	at := make([]delim.Span, n)
	d.Locate(text, true, at)
	names := make([]string, n)
	for i, f := range at {
		names[i] = string(d.Value(text[f.Start:f.End]))
	}
	if given := s.options.Names; given != nil {
		if len(given) != n {
			return fault.Data.Errorf("%s: %d names are given, and the header has %d", s.name, len(given), n)
		}
		names = given
	}
	s.setNames(names)
	return nil
}

// nameByNumber makes the schema of an input without a header, from the names
// that were given or from the number of fields in the first record.
func (s *CSV) nameByNumber(text []byte, first foundLine, d *delim.Dialect) error {
	names := s.options.Names
	if first.next == 0 {
		if names == nil {
			return fault.Data.Errorf("%s has no records, so its columns cannot be counted: name them (input.csv.names)", s.name)
		}
		s.setNames(names)
		return nil
	}
	n, err := d.Locate(text[first.start:first.end], true, nil)
	if err != nil {
		return fault.Data.Errorf("%s: the first record cannot be split: %w", s.name, err)
	}
	if names == nil {
		for i := range n {
			names = append(names, strconv.Itoa(i+1))
		}
	}
	if len(names) != n {
		return fault.Data.Errorf("%s: %d names are given, and the first record has %d fields", s.name, len(names), n)
	}
	s.setNames(names)
	return nil
}

func (s *CSV) setNames(names []string) {
	s.schema.File = s.name
	s.schema.Fields = make([]table.Field, len(names))
	for i, name := range names {
		s.schema.Fields[i] = table.Field{Name: name, Type: table.Untyped}
	}
}

// Head returns what stands before the first chunk, and where in it new names
// go: at the end of the header's text, or -1 if there is no header.
func (s *CSV) Head() (text []byte, insert int) { return s.head.text, s.head.insert }

// Dialects returns the punctuation of the records and that of the header.
func (s *CSV) Dialects() (records, header delim.Dialect) { return s.options.dialects() }
