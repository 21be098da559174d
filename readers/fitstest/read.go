package fitstest

import (
	"encoding/binary"
	"fmt"
	"math"
	"strconv"
	"strings"
	"testing"
)

// A Unit is one header-data unit as its bytes stand in the file.
type Unit struct {
	Header, Data []byte // whole blocks
}

// Split takes a file apart. Every unit must be an image or a table.
func Split(t testing.TB, file []byte) (units []Unit) {
	t.Helper()
	for len(file) > 0 {
		u := Unit{}
		for {
			if len(file) < len(u.Header)+2880 {
				t.Fatalf("header of unit %d does not end", len(units))
			}
			u.Header = file[:len(u.Header)+2880]
			if strings.Contains(string(u.Header[len(u.Header)-2880:]), "END"+strings.Repeat(" ", 77)) {
				break
			}
		}
		size := int64(0)
		if n := u.Int(t, "NAXIS"); n > 0 {
			size = 1
			for i := range n {
				size *= u.Int(t, fmt.Sprintf("NAXIS%d", i+1))
			}
			bits := u.Int(t, "BITPIX")
			size = (size + u.IntOr("PCOUNT", 0)) * max(bits, -bits) / 8
		}
		file = file[len(u.Header):]
		padded := (size + 2879) / 2880 * 2880
		if int64(len(file)) < padded {
			t.Fatalf("unit %d has %d bytes of data, want %d", len(units), len(file), padded)
		}
		u.Data, file = file[:padded], file[padded:]
		units = append(units, u)
	}
	return units
}

// Value returns the value of a keyword, without quotes; ok is false where it
// is absent.
func (u Unit) Value(key string) (value string, ok bool) {
	for at := 0; at < len(u.Header); at += 80 {
		card := string(u.Header[at : at+80])
		if !strings.HasPrefix(card, fmt.Sprintf("%-8s= ", key)) {
			continue
		}
		value, _, _ = strings.Cut(card[10:], "/")
		if value = strings.TrimSpace(value); strings.HasPrefix(value, "'") {
			value = strings.TrimRight(strings.Trim(value, "'"), " ")
		}
		return value, true
	}
	return "", false
}

// Int returns a number that must be there.
func (u Unit) Int(t testing.TB, key string) int64 {
	t.Helper()
	text, ok := u.Value(key)
	v, err := strconv.ParseInt(text, 10, 64)
	if !ok || err != nil {
		t.Fatalf("%s is %q, %v", key, text, err)
	}
	return v
}

// IntOr returns a number, or what stands for one that is absent.
func (u Unit) IntOr(key string, absent int64) int64 {
	if text, ok := u.Value(key); ok {
		if v, err := strconv.ParseInt(text, 10, 64); err == nil {
			return v
		}
	}
	return absent
}

// Column returns a column of form D, E, J or L as floats: NaN for a null, 0 and
// 1 for F and T. The first column is number 1.
func (u Unit) Column(t testing.TB, number int) (cells []float64) {
	t.Helper()
	at, width := int64(0), u.Int(t, "NAXIS1")
	for i := 1; i < number; i++ {
		form, _ := u.Value(fmt.Sprintf("TFORM%d", i))
		at += widths[form]
	}
	form, _ := u.Value(fmt.Sprintf("TFORM%d", number))
	for range u.Int(t, "NAXIS2") {
		p := u.Data[at:]
		switch form {
		case "D":
			cells = append(cells, math.Float64frombits(binary.BigEndian.Uint64(p)))
		case "E":
			cells = append(cells, float64(math.Float32frombits(binary.BigEndian.Uint32(p))))
		case "J":
			cells = append(cells, float64(int32(binary.BigEndian.Uint32(p))))
		case "L":
			v, ok := map[byte]float64{'F': 0, 'T': 1, 0: math.NaN()}[p[0]]
			if !ok {
				t.Fatalf("a logical cell holds %q", p[0])
			}
			cells = append(cells, v)
		default:
			t.Fatalf("column %d has the form %q", number, form)
		}
		at += width
	}
	return cells
}

var widths = map[string]int64{"D": 8, "E": 4, "J": 4, "K": 8, "I": 2, "B": 1, "L": 1}
