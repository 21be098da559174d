package fitshead

import (
	"bytes"
	"fmt"
	"strconv"
)

// A NewColumn is what the header says of an added column. Name and Form are
// needed; what is empty is left out.
type NewColumn struct {
	Name    string // TTYPE
	Form    string // TFORM
	Unit    string // TUNIT
	UCD     string // TUCD
	Comment string // TCOMM
}

// An Extended is the header of a table that got more columns.
type Extended struct {
	RowBytes int64
	Stale    []string // keywords of columns that the table did not have, left out

	text     []byte
	checksum int // where the record begins; -1 where there is none
	datasum  int
}

// Extend returns the header with columns appended to the table, and text as
// HISTORY. Of the records that are there, NAXIS1, TFIELDS, THEAP, CHECKSUM and
// DATASUM change; records of columns beyond TFIELDS, which would speak of the
// new ones, are left out; all else stays as it is. The new records follow the
// last that speaks of a column.
func (t *Table) Extend(added []NewColumn, history []string) (*Extended, error) {
	fields := len(t.Columns) + len(added)
	if fields > MaxColumns {
		return nil, fmt.Errorf("it has %d columns, and with %d new ones more than the %d that a FITS table can have", len(t.Columns), len(added), MaxColumns)
	}
	e := &Extended{RowBytes: t.RowBytes, checksum: -1, datasum: -1}
	for _, c := range added {
		for _, text := range []string{c.Name, c.Form, c.Unit, c.UCD, c.Comment} {
			if !Printable(text) {
				return nil, fmt.Errorf("the column name or description %q has characters that a FITS header cannot hold (want ASCII text)", text)
			}
		}
		_, _, width, ok := parseForm(c.Form)
		if !ok {
			panic("fitshead: a new column of form " + c.Form)
		}
		e.RowBytes += width
	}
	rows, fits := product(e.RowBytes, t.Rows)
	if !fits {
		return nil, errTooLarge
	}
	h := t.Header
	last := t.lastOfColumns()
	for i := 0; i < h.cards; i++ {
		key := string(bytes.TrimRight(h.card(i)[:keywordSize], " "))
		switch {
		case key == "CHECKSUM" && e.checksum >= 0, key == "DATASUM" && e.datasum >= 0:
			// A second one would be wrong.
		case key == "NAXIS1":
			e.number(h.card(i), key, e.RowBytes)
		case key == "TFIELDS":
			e.number(h.card(i), key, int64(fields))
		case key == "THEAP":
			e.number(h.card(i), key, rows+t.Gap)
		case key == "CHECKSUM":
			e.checksum = len(e.text)
			e.text = appendText(e.text, key, noSum, sumComment)
		case key == "DATASUM":
			e.datasum = len(e.text)
			e.text = appendText(e.text, key, "0", sumComment)
		case columnOf(key) > len(t.Columns):
			e.Stale = append(e.Stale, key)
			for i+1 < h.cards && isContinue(h.card(i+1)) {
				i++
			}
		default:
			e.text = append(e.text, h.card(i)...)
		}
		if i >= last && last >= 0 {
			text := columnCards(added, len(t.Columns)+1)
			if bytes.Contains(text, []byte("CONTINUE  '")) && !h.Has("LONGSTRN") {
				e.text = appendText(e.text, "LONGSTRN", "OGIP 1.0", "long strings go on in CONTINUE") // common practice, no source
			}
			e.text = append(e.text, text...)
			last = -1
		}
	}
	for _, line := range history {
		e.text = appendCard(e.text, fmt.Sprintf("%-8s%s", "HISTORY", line), "")
	}
	e.text = appendCard(e.text, "END", "")
	e.text = append(e.text, bytes.Repeat([]byte{' '}, int(Padded(int64(len(e.text))))-len(e.text))...)
	return e, nil
}

const (
	noSum      = "0000000000000000" // what CHECKSUM is while the sum is taken
	sumComment = "ones-complement sum"
)

// number appends a record with a new number and its old comment.
func (e *Extended) number(card []byte, key string, v int64) {
	e.text = appendInt(e.text, key, v, commentOf(card))
}

// columnCards returns the records of new columns, the first of which is number
// n.
func columnCards(added []NewColumn, n int) (text []byte) {
	for i, c := range added {
		for _, entry := range []struct{ key, value string }{
			{"TTYPE", c.Name}, {"TFORM", c.Form}, {"TUNIT", c.Unit}, {"TUCD", c.UCD}, {"TCOMM", c.Comment},
		} {
			if entry.value != "" {
				text = appendText(text, entry.key+strconv.Itoa(n+i), entry.value, "")
			}
		}
	}
	return text
}

// lastOfColumns returns the last record that speaks of a column of the table,
// with its CONTINUE records; of an empty table, TFIELDS.
func (t *Table) lastOfColumns() int {
	last := 0
	for i := range t.Header.cards {
		key := string(bytes.TrimRight(t.Header.card(i)[:keywordSize], " "))
		if n := columnOf(key); key == "TFIELDS" || n > 0 && n <= len(t.Columns) || last > 0 && last == i-1 && key == "CONTINUE" {
			last = i
		}
	}
	return last
}

// Text is the header, in whole blocks. Where it [Extended.Sums], the sums in
// it are not right before Seal.
func (e *Extended) Text() []byte { return e.text }

// Sums reports whether the header holds CHECKSUM or DATASUM.
func (e *Extended) Sums() bool { return e.checksum >= 0 || e.datasum >= 0 }

// Seal puts the sums into the header, where it has them. data is the sum of
// the whole data unit. patch is called with each record that changed and its
// place in the header.
func (e *Extended) Seal(data Sum, patch func(off int64, card []byte) error) error {
	if e.datasum >= 0 {
		if err := e.set(e.datasum, "DATASUM", strconv.FormatUint(uint64(data.Words), 10), patch); err != nil {
			return err
		}
	}
	if e.checksum < 0 {
		return nil
	}
	return e.set(e.checksum, "CHECKSUM", encodeSum(SumOf(e.text).Join(data).Words), patch)
}

// set replaces the string of one record.
func (e *Extended) set(at int, key, value string, patch func(int64, []byte) error) error {
	card := appendText(nil, key, value, sumComment)
	copy(e.text[at:], card)
	return patch(int64(at), card)
}

// Printable reports whether a header can hold the text.
func Printable(text string) bool {
	for i := range len(text) {
		if text[i] < ' ' || text[i] > '~' {
			return false
		}
	}
	return true
}
