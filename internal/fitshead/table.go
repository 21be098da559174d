package fitshead

import (
	"fmt"
	"strconv"
	"strings"
)

// MaxColumns is how many columns a binary table may have (section 7.3.1).
const MaxColumns = 999

// maxRow bounds a row, in bytes: one must fit into memory.
const maxRow = 128 << 20

// A Table is a binary table (section 7.3).
type Table struct {
	Header   *Header
	Columns  []Column
	RowBytes int64
	Rows     int64
	Gap      int64 // bytes between the last row and the heap
	Heap     int64 // bytes of the heap; Gap and Heap are PCOUNT
}

// A Column is one field of every row.
type Column struct {
	Name, Unit, UCD, Comment string

	Code   byte  // of TFORM: one of LXBIJKAEDCMPQ
	Repeat int64 // elements in the field
	Offset int64 // of the field in its row, in bytes
	Width  int64 // in bytes

	// The value of an element is Zero + Scale × what is stored; a whole number
	// that is Null has none.
	Scale, Zero float64
	Null        int64
	HasNull     bool
}

// Scaled reports whether values differ from what is stored.
func (c *Column) Scaled() bool { return c.Scale != 1 || c.Zero != 0 }

// OffsetInteger reports whether the column holds whole numbers that are stored
// shifted by half of their range (table 19): unsigned ones of two, four and
// eight bytes, or signed ones of one.
func (c *Column) OffsetInteger() bool {
	return c.Scale == 1 && (c.Code == 'B' && c.Zero == -0x1p7 || c.Code == 'I' && c.Zero == 0x1p15 ||
		c.Code == 'J' && c.Zero == 0x1p31 || c.Code == 'K' && c.Zero == 0x1p63)
}

// PCount is the value of PCOUNT.
func (t *Table) PCount() int64 { return t.Gap + t.Heap }

// ParseTable makes out the columns of a binary table. An error says what of
// the header is missing, impossible, or does not fit together.
func ParseTable(h *Header) (*Table, error) {
	t := &Table{Header: h}
	for _, fixed := range []struct {
		key  string
		want int64
	}{{"BITPIX", 8}, {"NAXIS", 2}, {"GCOUNT", 1}} {
		v, err := h.countOr(fixed.key, fixed.want, maxData)
		if err != nil {
			return nil, err
		}
		if v != fixed.want {
			return nil, fmt.Errorf("%s is %d, and in a binary table it is %d", fixed.key, v, fixed.want)
		}
	}
	var err error
	if t.RowBytes, err = h.count("NAXIS1", maxRow); err != nil {
		return nil, err
	}
	if t.Rows, err = h.count("NAXIS2", maxData); err != nil {
		return nil, err
	}
	if t.RowBytes == 0 && t.Rows > 0 {
		return nil, fmt.Errorf("NAXIS1 is 0: its %d rows hold nothing", t.Rows)
	}
	if err := t.parseColumns(); err != nil {
		return nil, err
	}
	return t, t.parseHeap()
}

// parseColumns reads the keywords of every column.
func (t *Table) parseColumns() error {
	n, err := t.Header.count("TFIELDS", MaxColumns)
	if err != nil {
		return err
	}
	names := make(map[string]int)
	width := int64(0)
	for i := 1; i <= int(n); i++ {
		c, err := parseColumn(t.Header, strconv.Itoa(i))
		if err != nil {
			return err
		}
		c.Offset = width
		if width += c.Width; width > maxRow {
			return fmt.Errorf("its first %d columns alone make a row of %d bytes, and %d is the most that is read", i, width, maxRow)
		}
		if first, ok := names[c.Name]; ok && c.Name != "" {
			return fmt.Errorf("columns %d and %d are both called %q (TTYPE): give one of them another name", first, i, c.Name)
		}
		names[c.Name] = i
		t.Columns = append(t.Columns, c)
	}
	if width != t.RowBytes {
		return fmt.Errorf("NAXIS1 says that a row has %d bytes, and its columns (TFORM) that it has %d", t.RowBytes, width)
	}
	return nil
}

// parseColumn reads the keywords that end in n.
func parseColumn(h *Header, n string) (Column, error) {
	c := Column{Scale: 1}
	form, ok, err := h.Text("TFORM" + n)
	if err != nil {
		return c, err
	}
	if !ok {
		return c, fmt.Errorf("its header has no TFORM%s", n)
	}
	if c.Code, c.Repeat, c.Width, ok = parseForm(form); !ok {
		return c, fmt.Errorf("TFORM%s is %.40q, which is no form of a column", n, form)
	}
	for _, text := range []struct {
		key string
		to  *string
	}{{"TTYPE", &c.Name}, {"TUNIT", &c.Unit}, {"TUCD", &c.UCD}, {"TCOMM", &c.Comment}} {
		if *text.to, _, err = h.Text(text.key + n); err != nil {
			return c, err
		}
	}
	if c.Null, c.HasNull, err = h.Int("TNULL" + n); err != nil {
		return c, err
	}
	if scale, ok, err := h.Float("TSCAL" + n); err != nil {
		return c, err
	} else if ok {
		c.Scale = scale
	}
	if c.Zero, _, err = h.Float("TZERO" + n); err != nil {
		return c, err
	}
	if c.Scale == 0 {
		return c, fmt.Errorf("TSCAL%s is 0: what column %q holds cannot be told", n, c.Name)
	}
	return c, nil
}

// elementBits are the sizes of the elements (table 18); a descriptor of an
// array in the heap is two whole numbers.
var elementBits = map[byte]int64{'L': 8, 'X': 1, 'B': 8, 'I': 16, 'J': 32, 'K': 64, 'A': 8, 'E': 32, 'D': 64, 'C': 64, 'M': 128, 'P': 64, 'Q': 128}

// parseForm reads TFORM: a repeat count, a letter, and what only some letters
// have.
func parseForm(form string) (code byte, repeat, width int64, ok bool) {
	digits := 0
	for digits < len(form) && '0' <= form[digits] && form[digits] <= '9' {
		digits++
	}
	repeat = 1
	if digits > 0 {
		v, err := strconv.ParseInt(form[:digits], 10, 32)
		if err != nil {
			return 0, 0, 0, false
		}
		repeat = v
	}
	if digits == len(form) {
		return 0, 0, 0, false
	}
	code = form[digits]
	size, ok := elementBits[code]
	if (code == 'P' || code == 'Q') && repeat > 1 {
		return 0, 0, 0, false
	}
	return code, repeat, (repeat*size + 7) / 8, ok
}

// parseHeap finds the heap, which follows the rows, mostly at once.
func (t *Table) parseHeap() error {
	pcount, err := t.Header.countOr("PCOUNT", 0, maxData)
	if err != nil {
		return err
	}
	rows, fits := product(t.RowBytes, t.Rows)
	if !fits || rows+pcount > maxData {
		return errTooLarge
	}
	theap, err := t.Header.countOr("THEAP", rows, maxData)
	if err != nil {
		return err
	}
	switch {
	case pcount == 0:
		return nil // then THEAP means nothing
	case theap < rows || theap > rows+pcount:
		return fmt.Errorf("THEAP is %d: the heap would begin outside of the %d bytes behind the %d bytes of the rows", theap, pcount, rows)
	}
	t.Gap = theap - rows
	t.Heap = pcount - t.Gap
	return nil
}

// columnKeywords begin the keywords that end in the number of a column: those
// of section 7.3.2 and of the coordinates of table columns (section 8), and
// conventions that are common practice.
var columnKeywords = map[string]bool{
	"TTYPE": true, "TFORM": true, "TUNIT": true, "TNULL": true, "TSCAL": true, "TZERO": true, "TDISP": true, "TDIM": true,
	"TDMIN": true, "TDMAX": true, "TLMIN": true, "TLMAX": true, "TBCOL": true,
	"TCTYP": true, "TCUNI": true, "TCRPX": true, "TCRVL": true, "TCDLT": true, "TCROT": true,
	"TUCD": true, "TCOMM": true, "TALEN": true, "TUTYP": true,
}

// columnOf returns the number of the column that a keyword speaks of, or 0.
func columnOf(keyword string) int {
	root := strings.TrimRight(keyword, "0123456789")
	number := keyword[len(root):]
	if !columnKeywords[root] || number == "" || number[0] == '0' {
		return 0
	}
	n, err := strconv.Atoi(number)
	if err != nil {
		return 0
	}
	return n
}
