package delim

import (
	"bytes"
	"errors"
)

// A Span is the place of a field in its record: record[Start:End], with its
// quotes and the blanks around it.
type Span struct{ Start, End int }

// ErrAfterQuote says why a record cannot be split.
var ErrAfterQuote = errors.New("text after a closing quote")

// Locate finds the first len(at) fields of a record, and counts all of them.
// quotes says whether the record may hold a quote that means something; false
// saves the search. Where the record has fewer fields, the rest of at is left
// as it was. The error is [ErrAfterQuote] or nil.
func (d *Dialect) Locate(record []byte, quotes bool, at []Span) (n int, err error) {
	switch {
	case quotes && d.Quote && bytes.IndexByte(record, '"') >= 0:
		return d.locateQuoted(record, at)
	case d.aligned():
		return locateAligned(record, at), nil
	}
	pos := 0
	for n < len(at) {
		i := bytes.IndexByte(record[pos:], d.Delimiter)
		if i < 0 {
			at[n] = Span{pos, len(record)}
			return n + 1, nil
		}
		at[n] = Span{pos, pos + i}
		n++
		pos += i + 1
	}
	delimiter := [1]byte{d.Delimiter}
	return n + 1 + bytes.Count(record[pos:], delimiter[:]), nil
}

// locateAligned is Locate for fields between runs of blanks.
func locateAligned(record []byte, at []Span) (n int) {
	for i := 0; ; n++ {
		for i < len(record) && isBlank(record[i]) {
			i++
		}
		if i == len(record) {
			return n
		}
		start := i
		for i < len(record) && !isBlank(record[i]) {
			i++
		}
		if n < len(at) {
			at[n] = Span{start, i}
		}
	}
}

// locateQuoted is Locate for a record with a quote in it.
func (d *Dialect) locateQuoted(record []byte, at []Span) (n int, err error) {
	aligned := d.aligned()
	for i := 0; ; i++ { // past the delimiter
		if aligned {
			for i < len(record) && isBlank(record[i]) {
				i++
			}
			if i == len(record) {
				return n, err
			}
		}
		start := i
		if i < len(record) && record[i] == '"' {
			shut := closing(record, i+1)
			if shut < 0 {
				shut = len(record) - 1
			}
			i = shut + 1
		}
		unquoted := i
		i = d.fieldEnd(record, i)
		if unquoted > start && len(Trim(record[unquoted:i])) > 0 {
			err = ErrAfterQuote
		}
		if n < len(at) {
			at[n] = Span{start, i}
		}
		n++
		if i == len(record) {
			return n, err
		}
	}
}

// fieldEnd returns the place of the first delimiter at or after i.
func (d *Dialect) fieldEnd(record []byte, i int) int {
	if d.aligned() {
		for i < len(record) && !isBlank(record[i]) {
			i++
		}
		return i
	}
	if j := bytes.IndexByte(record[i:], d.Delimiter); j >= 0 {
		return i + j
	}
	return len(record)
}

// Value returns what a field holds: without its quotes, and without the blanks
// around it and around what was quoted. It is a part of field wherever
// possible; only a field with doubled quotes costs a copy.
func (d *Dialect) Value(field []byte) []byte {
	if !d.Quote || len(field) == 0 || field[0] != '"' {
		return Trim(field)
	}
	shut := closing(field, 1)
	if shut < 0 {
		shut = len(field)
	}
	inner := field[1:shut]
	if bytes.IndexByte(inner, '"') >= 0 {
		inner = bytes.ReplaceAll(inner, []byte(`""`), []byte(`"`))
	}
	return Trim(inner)
}

// AppendField appends a field that [Dialect.Value] reads back as value, in
// quotes where it needs them. ok is false if the dialect has no quotes and
// value needs them; then dst is returned as it was.
func (d *Dialect) AppendField(dst, value []byte) (_ []byte, ok bool) {
	if !d.needsQuotes(value) {
		return append(dst, value...), true
	}
	if !d.Quote {
		return dst, false
	}
	dst = append(dst, '"')
	for _, c := range value {
		if c == '"' {
			dst = append(dst, '"')
		}
		dst = append(dst, c)
	}
	return append(dst, '"'), true
}

// needsQuotes reports whether value, bare, would read back as something else.
func (d *Dialect) needsQuotes(value []byte) bool {
	if len(value) == 0 {
		return d.aligned()
	}
	if d.Quote && value[0] == '"' || isBlank(value[0]) || isBlank(value[len(value)-1]) {
		return true
	}
	for _, c := range value {
		if c == d.Delimiter || c == '\n' || c == '\r' || d.aligned() && c == '\t' {
			return true
		}
	}
	return d.IsComment(value)
}
