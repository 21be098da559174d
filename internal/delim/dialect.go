// Package delim knows delimited text: where a record ends, where its fields
// lie, which number a field spells, and how a number is spelled.
//
// A [Dialect] says how a file is punctuated. [Dialect.Cut] finds where a block
// of text can be cut between two records, [Dialect.Lines] walks the records of
// a block, [Dialect.Locate] finds the fields of one record and
// [Dialect.Value] takes a field out of its quotes. [ParseFloat] and
// [AppendFloat] are the two directions of numbers. Nothing here allocates in
// the common case, and nothing here reads or writes a file.
//
// The format is that of RFC 4180, with these additions and decisions:
//   - a line ends with LF, CRLF, or a CR that no LF follows;
//   - a quote opens only as the very first byte of a field; elsewhere outside
//     quotes it is text like any other;
//   - blanks, that is spaces and tabs, around a field are no part of it;
//   - a line of blanks alone, and one that starts with the comment sign, are
//     no records;
//   - with a space as delimiter, runs of blanks separate the fields, and
//     blanks at either end of a record mean nothing.
package delim

import (
	"bytes"
	"errors"
	"strings"
)

// A Dialect is how a file is punctuated.
type Dialect struct {
	// Delimiter is a single byte between fields; ' ' stands for any run of
	// spaces and tabs.
	Delimiter byte

	// Quote says whether a field may be wrapped in double quotes, inside which
	// delimiters and line ends are text and a doubled quote is a quote.
	Quote bool

	// Comment is what a line that is no record begins with; "" for none.
	Comment string
}

// Validate returns an error that joins what is wrong with the dialect.
func (d *Dialect) Validate() error {
	var faults []error
	switch c := d.Delimiter; {
	case c == '"' || c == '\n' || c == '\r' || c == 0 || c >= 0x80:
		faults = append(faults, errors.New("the delimiter must be one ASCII character that is no quote and no line end"))
	case '0' <= c && c <= '9' || 'a' <= c && c <= 'z' || 'A' <= c && c <= 'Z' || c == '.' || c == '+' || c == '-':
		faults = append(faults, errors.New("the delimiter must be a character that cannot stand in a number"))
	}
	if strings.ContainsAny(d.Comment, "\"\r\n") {
		faults = append(faults, errors.New("the comment sign must not hold a quote or a line end"))
	}
	if d.Comment != "" && isBlank(d.Comment[0]) {
		faults = append(faults, errors.New("the comment sign must not begin with a blank"))
	}
	return errors.Join(faults...)
}

// aligned reports whether runs of blanks separate the fields.
func (d *Dialect) aligned() bool { return d.Delimiter == ' ' }

// isBlank reports whether c is a space or a tab.
func isBlank(c byte) bool { return c == ' ' || c == '\t' }

// IsComment reports whether a line is one that the comment sign begins.
func (d *Dialect) IsComment(line []byte) bool {
	return d.Comment != "" && len(line) >= len(d.Comment) && string(line[:len(d.Comment)]) == d.Comment
}

// IsBlank reports whether a line holds blanks alone. Where the tab is the
// delimiter, tabs make empty fields, and the line is a record.
func (d *Dialect) IsBlank(line []byte) bool {
	for _, c := range line {
		if !isBlank(c) || c == '\t' && d.Delimiter == '\t' {
			return false
		}
	}
	return true
}

// Trim returns text without the blanks around it.
func Trim(text []byte) []byte {
	for len(text) > 0 && isBlank(text[0]) {
		text = text[1:]
	}
	for len(text) > 0 && isBlank(text[len(text)-1]) {
		text = text[:len(text)-1]
	}
	return text
}

// CountLineEnds returns how many lines end in text. A CR that is its last byte
// counts, so text must not be cut between a CR and its LF.
func CountLineEnds(text []byte) int {
	n := bytes.Count(text, lf)
	if cr := bytes.Count(text, cr); cr > 0 {
		n += cr - bytes.Count(text, crlf)
	}
	return n
}

var (
	lf   = []byte{'\n'}
	cr   = []byte{'\r'}
	crlf = []byte{'\r', '\n'}
)
