// Package fitstest makes small FITS files for tests, with nothing of the code
// under test: what the standard says, and faults on demand.
package fitstest

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"math"
	"strings"
)

// A Column is one column of a table.
type Column struct {
	Name  string   // "" leaves TTYPE out
	Form  string   // TFORM
	Cards []string // further records, # being the number of the column
	Cells []byte   // of all rows, one after the other; big-endian
}

// A Table is a binary table.
type Table struct {
	Columns []Column
	Rows    int
	Cards   []string // further records of the header
	Gap     int      // bytes between rows and heap, each 0xAA
	Heap    []byte
}

// Doubles returns a column of form D.
func Doubles(name string, cells ...float64) Column {
	return Column{Name: name, Form: "D", Cells: Big(cells)}
}

// Big returns numbers as FITS stores them.
func Big(cells any) []byte {
	var b bytes.Buffer
	if err := binary.Write(&b, binary.BigEndian, cells); err != nil {
		panic(err)
	}
	return b.Bytes()
}

// NaN is a missing value.
var NaN = math.NaN()

// Int is a record with a whole number.
func Int(key string, v int64) string { return fmt.Sprintf("%-8s= %20d", key, v) }

// Number is a record with a number.
func Number(key string, v float64) string { return fmt.Sprintf("%-8s= %20G", key, v) }

// Text is a record with a string.
func Text(key, v string) string {
	return fmt.Sprintf("%-8s= '%-8s'", key, strings.ReplaceAll(v, "'", "''"))
}

// Header lays out records, adds END, and fills the last block.
func Header(cards ...string) []byte {
	var b bytes.Buffer
	for _, card := range append(cards, "END") {
		if len(card) > 80 {
			panic("fitstest: a record of more than 80 bytes: " + card)
		}
		fmt.Fprintf(&b, "%-80s", card)
	}
	return Pad(b.Bytes(), ' ')
}

// Pad fills the last block.
func Pad(p []byte, with byte) []byte {
	for len(p)%2880 != 0 {
		p = append(p, with)
	}
	return p
}

// Primary is a primary header without data.
func Primary() []byte {
	return Header("SIMPLE  =                    T", Int("BITPIX", 8), Int("NAXIS", 0), "EXTEND  =                    T")
}

// Image is an image extension of so many bytes.
func Image(name string, size int) []byte {
	h := Header(Text("XTENSION", "IMAGE"), Int("BITPIX", 8), Int("NAXIS", 1), Int("NAXIS1", int64(size)), Int("PCOUNT", 0), Int("GCOUNT", 1), Text("EXTNAME", name))
	data := make([]byte, size)
	for i := range data {
		data[i] = byte(i * 7)
	}
	return append(h, Pad(data, 0)...)
}

// HDU is the whole header-data unit of the table.
func (t *Table) HDU() []byte {
	width := int64(0)
	for _, c := range t.Columns {
		if t.Rows > 0 {
			width += int64(len(c.Cells) / t.Rows)
		} else {
			width += widths[c.Form]
		}
	}
	cards := []string{Text("XTENSION", "BINTABLE"), Int("BITPIX", 8), Int("NAXIS", 2), Int("NAXIS1", width), Int("NAXIS2", int64(t.Rows)),
		Int("PCOUNT", int64(t.Gap+len(t.Heap))), Int("GCOUNT", 1), Int("TFIELDS", int64(len(t.Columns)))}
	for i, c := range t.Columns {
		if c.Name != "" {
			cards = append(cards, Text(fmt.Sprintf("TTYPE%d", i+1), c.Name))
		}
		cards = append(cards, Text(fmt.Sprintf("TFORM%d", i+1), c.Form))
		for _, card := range c.Cards {
			key, value, _ := strings.Cut(card, "=")
			key = strings.Replace(strings.TrimSpace(key), "#", fmt.Sprint(i+1), 1)
			cards = append(cards, fmt.Sprintf("%-8s=%s", key, value))
		}
	}
	if t.Gap > 0 {
		cards = append(cards, Int("THEAP", width*int64(t.Rows)+int64(t.Gap)))
	}
	data := t.data()
	return append(Header(append(cards, t.Cards...)...), Pad(data, 0)...)
}

func (t *Table) data() (data []byte) {
	for row := range t.Rows {
		for _, c := range t.Columns {
			width := len(c.Cells) / t.Rows
			data = append(data, c.Cells[row*width:(row+1)*width]...)
		}
	}
	data = append(data, bytes.Repeat([]byte{0xAA}, t.Gap)...)
	return append(data, t.Heap...)
}

// File is a primary header and the units behind it.
func File(units ...[]byte) []byte {
	return append(Primary(), bytes.Join(units, nil)...)
}
