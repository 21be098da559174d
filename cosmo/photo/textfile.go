package photo

import (
	"bytes"

	"catenrich/internal/fault"
	"catenrich/internal/number"
)

// maxLines bounds the rows of a side file; the largest template libraries have
// some hundred thousand wavelengths.
const maxLines = 1 << 20

// A sideFile walks over the lines of a small text file: fields separated by
// blanks, tabs, commas or semicolons, blank lines and lines that begin with #
// passed over, at most one heading before the first numbers.
type sideFile struct {
	name   string
	data   []byte
	line   int // of the fields that next returned, from 1
	rows   int
	fields [3][]byte
}

// next finds the next line with fields and splits it; ok is false at the end.
// Exactly want fields must stand there. The first line with fields is taken for
// a heading, and skipped, if its last two fields are both no numbers.
func (f *sideFile) next(want int) (ok bool, err error) {
	for len(f.data) > 0 {
		line := f.data
		if i := bytes.IndexByte(f.data, '\n'); i >= 0 {
			line, f.data = f.data[:i], f.data[i+1:]
		} else {
			f.data = nil
		}
		f.line++
		line = bytes.TrimSpace(bytes.TrimPrefix(line, []byte("\ufeff")))
		if len(line) == 0 || line[0] == '#' {
			continue
		}
		if n := f.split(line); n != want {
			return false, fault.Config.Errorf("%s:%d: %d columns, want %d: one row a line, columns separated by blanks or commas", f.name, f.line, n, want)
		}
		f.rows++
		if f.rows == 1 && f.heading(want) {
			continue
		}
		if f.rows > maxLines {
			return false, fault.Config.Errorf("%s:%d: more than %d rows: sample it more coarsely", f.name, f.line, maxLines)
		}
		return true, nil
	}
	return false, nil
}

// split cuts the line into fields and returns how many there are; it keeps
// three. A comma or a semicolon, if there is one, is the only separator.
func (f *sideFile) split(line []byte) int {
	separator := byte(' ')
	for _, c := range []byte{',', ';'} {
		if bytes.IndexByte(line, c) >= 0 {
			separator = c
			break
		}
	}
	n := 0
	for rest, more := line, true; more; {
		var field []byte
		if separator == ' ' {
			rest = bytes.TrimLeft(rest, " \t")
			i := bytes.IndexAny(rest, " \t")
			if more = i >= 0; more {
				field, rest = rest[:i], rest[i:]
			} else {
				field = rest
			}
		} else {
			field, rest, more = bytes.Cut(rest, []byte{separator})
		}
		if n < len(f.fields) {
			f.fields[n] = bytes.TrimSpace(field)
		}
		n++
	}
	return n
}

func (f *sideFile) heading(want int) bool {
	_, a := number.Parse(f.fields[want-2])
	_, b := number.Parse(f.fields[want-1])
	return !a && !b
}

// number reads field i of the current line; what names it in the error.
func (f *sideFile) number(i int, what string) (float64, error) {
	v, ok := number.Parse(f.fields[i])
	if !ok {
		return 0, fault.Config.Errorf("%s:%d: the %s %q is not a number: correct it, or put # before a line that is none of the data", f.name, f.line, what, clip(f.fields[i]))
	}
	return v, nil
}

// clip keeps hostile fields out of messages.
func clip(b []byte) []byte { return b[:min(len(b), 40)] }
