// Package fitshead reads and extends the headers of FITS files, and has the
// sums that guard their data (FITS Standard 4.0, 2018).
//
// A file is a row of header-data units. [Read] takes one header off a stream,
// [Header.DataSize] says how many bytes of data follow it, [ParseTable] makes
// out the columns of a binary table, and [Table.Extend] appends columns to it.
// card.go has the single record, sum.go the ones-complement sums.
package fitshead

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"math/bits"
)

const (
	// BlockSize is the size of a block: headers and data fill whole ones
	// (section 3.1).
	BlockSize = 2880
	// CardSize is the size of one header record, in bytes.
	CardSize = 80

	// maxHeader bounds a header; the widest table needs a twentieth of it.
	maxHeader = 16 << 20
	// maxData bounds a data unit, so that sums of sizes do not overflow.
	maxData = 1 << 60
)

// ErrNoEnd is a header that the END record does not close.
var ErrNoEnd = errors.New("its header has no END")

// A Header is the records of one header, in order.
type Header struct {
	raw   []byte // whole blocks
	cards int    // before END
	first map[string]int
	again map[string]bool // keywords of more than one record
}

// Read reads one header, to the end of the block that holds END. It returns
// io.EOF if r has ended already, and an error that wraps [ErrNoEnd] if r ends,
// or what is no header begins, before END; what else r returns, as it is.
func Read(r io.Reader) (*Header, error) {
	h := &Header{first: make(map[string]int), again: make(map[string]bool)}
	for {
		from := len(h.raw)
		if from >= maxHeader {
			return nil, fmt.Errorf("%w in its first %d MiB", ErrNoEnd, maxHeader>>20)
		}
		h.raw = append(h.raw, make([]byte, BlockSize)...)
		n, err := io.ReadFull(r, h.raw[from:])
		switch {
		case err == io.EOF && from == 0:
			return nil, io.EOF
		case err == io.EOF || err == io.ErrUnexpectedEOF && from+n > 0:
			return nil, fmt.Errorf("%w: the file ends in it", ErrNoEnd)
		case err != nil:
			return nil, err
		}
		if ended, err := h.index(from / CardSize); ended || err != nil {
			return h, err
		}
	}
}

// index notes the keywords of the records from number from on.
func (h *Header) index(from int) (ended bool, err error) {
	for i := from; i < len(h.raw)/CardSize; i++ {
		keyword := h.card(i)[:keywordSize]
		for _, c := range keyword {
			if c < ' ' || c > '~' {
				return false, fmt.Errorf("%w: record %d of it is no text", ErrNoEnd, i+1)
			}
		}
		key := string(bytes.TrimRight(keyword, " "))
		switch {
		case key == "END":
			return true, nil
		case i > 0 && (key == "XTENSION" || key == "SIMPLE") && hasValue(h.card(i)):
			return false, fmt.Errorf("%w: another header begins in it, at record %d", ErrNoEnd, i+1)
		}
		h.cards = i + 1
		if _, ok := h.first[key]; ok {
			h.again[key] = true
		} else {
			h.first[key] = i
		}
	}
	return false, nil
}

// Size returns how many bytes the header takes.
func (h *Header) Size() int64 { return int64(len(h.raw)) }

// card returns record i, END and what follows it included.
func (h *Header) card(i int) []byte { return h.raw[i*CardSize : (i+1)*CardSize] }

// Has reports whether a record with a keyword is there.
func (h *Header) Has(key string) bool {
	_, ok := h.first[key]
	return ok
}

// Begins reports whether the first record has the keyword key and a value.
func (h *Header) Begins(key string) bool {
	return h.cards > 0 && h.first[key] == 0 && h.Has(key) && hasValue(h.card(0))
}

// value returns the value of a keyword; ok is false where it is absent or has
// none. A keyword that stands more than once is an error.
func (h *Header) value(key string) (text string, quoted, ok bool, err error) {
	i, ok := h.first[key]
	if !ok || !hasValue(h.card(i)) {
		return "", false, false, nil
	}
	if h.again[key] {
		return "", false, false, fmt.Errorf("%s stands more than once in its header", key)
	}
	text, quoted, err = parseValue(h.card(i))
	for err == nil && quoted && len(text) > 0 && text[len(text)-1] == '&' && i+1 < h.cards && isContinue(h.card(i+1)) {
		var more string
		i++
		more, _, err = parseValue(h.card(i))
		text = text[:len(text)-1] + more
	}
	if err != nil {
		return "", false, false, fmt.Errorf("%s %w", key, err)
	}
	return text, quoted, text != "" || quoted, nil
}

// Text returns a string, without blanks at its end.
func (h *Header) Text(key string) (v string, ok bool, err error) {
	text, quoted, ok, err := h.value(key)
	if ok && !quoted {
		return "", false, fmt.Errorf("%s is %.40s, want a string in quotes", key, text)
	}
	return text, ok, err
}

// Int returns a whole number.
func (h *Header) Int(key string) (v int64, ok bool, err error) {
	text, quoted, ok, err := h.value(key)
	if err != nil || !ok {
		return 0, false, err
	}
	if v, ok = parseInt(text); !ok || quoted {
		return 0, false, fmt.Errorf("%s is %.40q, want a whole number", key, text)
	}
	return v, true, nil
}

// Float returns a number.
func (h *Header) Float(key string) (v float64, ok bool, err error) {
	text, quoted, ok, err := h.value(key)
	if err != nil || !ok {
		return 0, false, err
	}
	if v, ok = parseFloat(text); !ok || quoted {
		return 0, false, fmt.Errorf("%s is %.40q, want a number", key, text)
	}
	return v, true, nil
}

// True reports whether a keyword is there and T.
func (h *Header) True(key string) bool {
	text, quoted, ok, err := h.value(key)
	return err == nil && ok && !quoted && text == "T"
}

// count returns a whole number that must be there and lie in [0, most].
func (h *Header) count(key string, most int64) (int64, error) {
	v, ok, err := h.Int(key)
	if err == nil && !ok {
		err = fmt.Errorf("its header has no %s", key)
	}
	if err == nil && (v < 0 || v > most) {
		err = fmt.Errorf("%s is %d, want 0 to %d", key, v, most)
	}
	return v, err
}

// countOr is count for a keyword that may be absent.
func (h *Header) countOr(key string, absent, most int64) (int64, error) {
	if !h.Has(key) {
		return absent, nil
	}
	return h.count(key, most)
}

// A Kind is what a header-data unit holds.
type Kind uint8

// The kinds; a table or image that is compressed tile by tile is a binary table
// to those who do not know better.
const (
	Image Kind = iota
	BinaryTable
	ASCIITable
	CompressedImage
	CompressedTable
	RandomGroups
	Unknown
)

func (k Kind) String() string {
	return [...]string{"an image", "a binary table", "an ASCII table", "a compressed image", "a compressed table", "random groups",
		"an extension of unknown kind"}[k]
}

// Kind tells what the header describes.
func (h *Header) Kind() Kind {
	if !h.Has("XTENSION") {
		if h.True("GROUPS") {
			return RandomGroups
		}
		return Image
	}
	switch name, _, _ := h.Text("XTENSION"); name {
	case "IMAGE", "IUEIMAGE":
		return Image
	case "TABLE":
		return ASCIITable
	case "BINTABLE", "A3DTABLE":
		if h.True("ZIMAGE") {
			return CompressedImage
		}
		if h.True("ZTABLE") {
			return CompressedTable
		}
		return BinaryTable
	}
	return Unknown
}

// Name returns EXTNAME, or "".
func (h *Header) Name() string {
	name, _, _ := h.Text("EXTNAME")
	return name
}

// DataSize returns how many bytes of data follow the header, without what
// fills the last block: |BITPIX|/8 × GCOUNT × (PCOUNT + NAXIS1 × NAXIS2 × …),
// where random groups leave out NAXIS1, which is 0 (equations 1, 2 and 4).
func (h *Header) DataSize() (int64, error) {
	bitpix, ok, err := h.Int("BITPIX")
	if err != nil {
		return 0, err
	}
	switch bitpix {
	case 8, 16, 32, 64, -32, -64:
	default:
		if !ok {
			return 0, errors.New("its header has no BITPIX")
		}
		return 0, fmt.Errorf("BITPIX is %d, want 8, 16, 32, 64, -32 or -64", bitpix)
	}
	size, err := h.axes()
	if err != nil {
		return 0, err
	}
	pcount, err := h.countOr("PCOUNT", 0, maxData)
	if err != nil {
		return 0, err
	}
	gcount, err := h.countOr("GCOUNT", 1, maxData)
	if err != nil {
		return 0, err
	}
	if !h.Has("XTENSION") && h.Kind() != RandomGroups {
		pcount, gcount = 0, 1 // reserved for groups and extensions
	}
	bytes := max(bitpix, -bitpix) / 8
	size, fits := product(size+pcount, gcount)
	if fits {
		size, fits = product(size, bytes)
	}
	if !fits {
		return 0, errTooLarge
	}
	return size, nil
}

var errTooLarge = errors.New("its header speaks of more data than any file can hold")

// axes returns the product of the lengths of the axes; 0 without axes.
func (h *Header) axes() (int64, error) {
	const maxAxes = 999
	n, err := h.count("NAXIS", maxAxes)
	if err != nil || n == 0 {
		return 0, err
	}
	size, fits := int64(1), true
	for i := int64(1); i <= n; i++ {
		length, err := h.count(fmt.Sprintf("NAXIS%d", i), maxData)
		if err != nil {
			return 0, err
		}
		if i == 1 && length == 0 && h.Kind() == RandomGroups {
			continue
		}
		if size, fits = product(size, length); !fits {
			return 0, errTooLarge
		}
	}
	return size, nil
}

// product multiplies sizes; ok is false beyond what a data unit can have.
func product(a, b int64) (p int64, ok bool) {
	if a < 0 || b < 0 {
		return 0, false
	}
	high, low := bits.Mul64(uint64(a), uint64(b))
	return int64(low), high == 0 && low <= maxData
}

// Padded returns n rounded up to whole blocks.
func Padded(n int64) int64 { return (n + BlockSize - 1) / BlockSize * BlockSize }
