package fitshead

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"math/rand/v2"
	"os"
	"strings"
	"testing"
)

// headerOf makes a header of records.
func headerOf(t testing.TB, cards ...string) *Header {
	t.Helper()
	h, err := Read(bytes.NewReader(textOf(cards...)))
	if err != nil {
		t.Fatal(err)
	}
	return h
}

func textOf(cards ...string) []byte {
	var text []byte
	for _, c := range append(cards, "END") {
		text = appendCard(text, c, "")
	}
	return append(text, bytes.Repeat([]byte{' '}, int(Padded(int64(len(text))))-len(text))...)
}

// TestValues has records as section 4 of the standard allows them; the string
// examples are those of its section 4.2.1.
func TestValues(t *testing.T) {
	h := headerOf(t,
		"SIMPLE  =                    T / a comment",
		"FREE    = 42/no blanks",
		"SIGNED  =                  +17",
		"BIG     =  9223372036854775808",
		"D       = -1.5D-3 / Fortran's exponent",
		"KEYWORD1= ''                   / null string keyword",
		"KEYWORD2= '   '                / empty string keyword",
		"QUOTES  = 'it''s / here'       / comment",
		"LONG    = 'A long string wh&'",
		"CONTINUE  'ich goes on&'       / and on",
		"CONTINUE  ' to the end. '",
		"AMPER   = 'not continued&'",
		"NOVALUE   'text'",
		"UNDEF   =                        / no value",
		"OPEN    = 'no closing quote",
		"HEX     = 0x10",
		"INF     = Infinity",
		"TWICE   = 1",
		"TWICE   = 1",
	)
	for key, want := range map[string]int64{"FREE": 42, "SIGNED": 17} {
		if v, ok, err := h.Int(key); v != want || !ok || err != nil {
			t.Errorf("%s = %d, %v, %v, want %d", key, v, ok, err, want)
		}
	}
	for key, want := range map[string]float64{"BIG": 0x1p63, "D": -0.0015, "FREE": 42} {
		if v, ok, err := h.Float(key); v != want || !ok || err != nil {
			t.Errorf("%s = %v, %v, %v, want %v", key, v, ok, err, want)
		}
	}
	for key, want := range map[string]string{"KEYWORD1": "", "KEYWORD2": "", "QUOTES": "it's / here", "LONG": "A long string which goes on to the end.", "AMPER": "not continued&"} {
		if v, ok, err := h.Text(key); v != want || !ok || err != nil {
			t.Errorf("%s = %q, %v, %v, want %q", key, v, ok, err, want)
		}
	}
	for _, key := range []string{"NOVALUE", "UNDEF", "ABSENT"} {
		if _, ok, err := h.Text(key); ok || err != nil {
			t.Errorf("%s: %v, %v, want no value", key, ok, err)
		}
	}
	for _, key := range []string{"OPEN", "HEX", "INF", "TWICE", "BIG", "QUOTES"} {
		if v, ok, err := h.Int(key); err == nil {
			t.Errorf("%s = %d, %v, want an error", key, v, ok)
		}
	}
	for _, key := range []string{"OPEN", "HEX", "INF", "TWICE", "QUOTES"} {
		if v, ok, err := h.Float(key); err == nil {
			t.Errorf("%s = %v, %v, want an error", key, v, ok)
		}
	}
	if !h.True("SIMPLE") || h.True("FREE") || h.True("ABSENT") {
		t.Error("of SIMPLE, FREE and ABSENT only the first is true")
	}
}

func TestHeadersThatDoNotEnd(t *testing.T) {
	whole := textOf("SIMPLE  =                    T")
	for name, text := range map[string][]byte{
		"cut short":      whole[:len(whole)-1],
		"no END":         bytes.ReplaceAll(whole, []byte("END"), []byte("   ")),
		"binary data":    append(bytes.ReplaceAll(whole, []byte("END"), []byte("   ")), make([]byte, BlockSize)...),
		"another header": append(bytes.ReplaceAll(whole, []byte("END"), []byte("   ")), whole...),
	} {
		if _, err := Read(bytes.NewReader(text)); !errors.Is(err, ErrNoEnd) {
			t.Errorf("%s: %v, want ErrNoEnd", name, err)
		}
	}
	if _, err := Read(strings.NewReader("")); err != io.EOF {
		t.Errorf("nothing: %v, want io.EOF", err)
	}
	endless := io.MultiReader(bytes.NewReader(whole[:CardSize]), blanks{})
	if _, err := Read(endless); !errors.Is(err, ErrNoEnd) {
		t.Errorf("blanks without end: %v, want ErrNoEnd", err)
	}
}

type blanks struct{}

func (blanks) Read(p []byte) (int, error) {
	copy(p, bytes.Repeat([]byte{' '}, len(p)))
	return len(p), nil
}

// TestDataSize computes by equations 1, 2 and 4 of the standard.
func TestDataSize(t *testing.T) {
	image := []string{"SIMPLE  = T", "BITPIX  = -32", "NAXIS   = 3", "NAXIS1  = 10", "NAXIS2  = 20", "NAXIS3  = 30"}
	for _, c := range []struct {
		name  string
		cards []string
		want  int64
	}{
		{"an image", image, 4 * 10 * 20 * 30},
		{"no axes", []string{"SIMPLE  = T", "BITPIX  = 8", "NAXIS   = 0"}, 0},
		{"an axis of 0", []string{"SIMPLE  = T", "BITPIX  = 16", "NAXIS   = 2", "NAXIS1  = 0", "NAXIS2  = 5"}, 0},
		{"an extension", []string{"XTENSION= 'IMAGE   '", "BITPIX  = 64", "NAXIS   = 1", "NAXIS1  = 7", "PCOUNT  = 3", "GCOUNT  = 2"}, 8 * 2 * (3 + 7)},
		{"random groups", []string{"SIMPLE  = T", "BITPIX  = 16", "NAXIS   = 3", "NAXIS1  = 0", "NAXIS2  = 3", "NAXIS3  = 4", "GROUPS  = T", "PCOUNT  = 5", "GCOUNT  = 6"},
			2 * 6 * (5 + 3*4)},
	} {
		if got, err := headerOf(t, c.cards...).DataSize(); got != c.want || err != nil {
			t.Errorf("%s: %d, %v, want %d", c.name, got, err, c.want)
		}
	}
	for name, card := range map[string]string{"too large": "NAXIS3  = 9000000000000000", "negative": "NAXIS3  = -1", "text": "NAXIS3  = 'x'"} {
		if got, err := headerOf(t, append(image[:5:5], card)...).DataSize(); err == nil {
			t.Errorf("%s: %d, want an error", name, got)
		}
	}
}

func TestForms(t *testing.T) {
	for form, want := range map[string]int64{"D": 8, "1D": 8, "3E": 12, "0J": 0, "12A": 12, "20A5": 20, "9X": 2, "X": 1, "1PE(100)": 8, "Q": 16, "2M": 32, "4C": 32, "L": 1, "2I": 4, "K": 8, "5B": 5} {
		if _, _, width, ok := parseForm(form); !ok || width != want {
			t.Errorf("%s: %d bytes, %v, want %d", form, width, ok, want)
		}
	}
	for _, form := range []string{"", "3", "F8.3", "-1D", "2PE", "99999999999D", "d", " D"} {
		if _, _, width, ok := parseForm(form); ok {
			t.Errorf("%q is %d bytes, want an error", form, width)
		}
	}
}

// TestSum compares with the definition, word by word, and joins at every
// place.
func TestSum(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	p := make([]byte, 203)
	for i := range p {
		p[i] = byte(r.Uint32())
	}
	plain := func(p []byte) uint32 {
		p = append(bytes.Clone(p), 0, 0, 0)
		sum := uint64(0)
		for i := 0; i+4 <= len(p); i += 4 {
			sum += uint64(p[i])<<24 | uint64(p[i+1])<<16 | uint64(p[i+2])<<8 | uint64(p[i+3])
			if sum > 0xffffffff {
				sum -= 0xffffffff
			}
		}
		return uint32(sum)
	}
	for n := range len(p) {
		if got, want := SumOf(p[:n]).Words, plain(p[:n]); got != want {
			t.Fatalf("the sum of %d bytes is %d, want %d", n, got, want)
		}
		joined := SumOf(p[:n/3]).Join(SumOf(p[n/3 : n/2])).Join(SumOf(p[n/2 : n]))
		if want := SumOf(p[:n]); joined != want {
			t.Fatalf("joined at %d and %d of %d bytes: %v, want %v", n/3, n/2, n, joined, want)
		}
	}
	if ones := SumOf(bytes.Repeat([]byte{0xff}, 1<<20)); ones.Words != 0xffffffff {
		t.Errorf("the sum of ones is %#x", ones.Words)
	}
}

// TestEncodedSum holds what makes a CHECKSUM one: with it the whole unit adds
// up to ones. It is spelled in letters and digits alone.
func TestEncodedSum(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	for range 2000 {
		unit := textOf("CHECKSUM= '"+noSum+"'", fmt.Sprint("COMMENT ", r.Uint64()))
		text := encodeSum(SumOf(unit).Words)
		for _, c := range []byte(text) {
			if c < '0' || c > 'z' || isPunctuation(c) {
				t.Fatalf("a sum is written as %q", text)
			}
		}
		copy(unit[11:], text)
		if got := SumOf(unit).Words; got != 0xffffffff {
			t.Fatalf("with %q in it the sum is %#x, want all ones", text, got)
		}
	}
}

// TestSumsOfCFITSIO computes again the sums that CFITSIO wrote (testdata/).
func TestSumsOfCFITSIO(t *testing.T) {
	content, err := os.ReadFile("testdata/sums.fits")
	if err != nil {
		t.Fatal(err)
	}
	r := bytes.NewReader(content)
	primary, err := Read(r)
	if err != nil {
		t.Fatal(err)
	}
	h, err := Read(r)
	if err != nil {
		t.Fatal(err)
	}
	size, err := h.DataSize()
	if err != nil || size != 300*18 {
		t.Fatalf("%d bytes of data, %v, want 300 rows of 18", size, err)
	}
	data := SumOf(content[primary.Size()+h.Size():])
	if want, _, _ := h.Text("DATASUM"); fmt.Sprint(data.Words) != want {
		t.Errorf("the data add up to %d, CFITSIO says %s", data.Words, want)
	}
	want, _, _ := h.Text("CHECKSUM")
	header := bytes.Replace(h.raw, []byte(want), []byte(noSum), 1)
	if got := encodeSum(SumOf(header).Join(data).Words); got != want {
		t.Errorf("CHECKSUM is %q, CFITSIO says %q", got, want)
	}
}

// exampleTable has a column that is described after the columns, and one that
// is not there.
func exampleTable(t testing.TB, more ...string) *Table {
	h := headerOf(t, append([]string{"XTENSION= 'BINTABLE'", "BITPIX  = 8", "NAXIS   = 2", "NAXIS1  = 12 / bytes in a row", "NAXIS2  = 3", "PCOUNT  = 10", "GCOUNT  = 1",
		"TFIELDS = 2", "TTYPE1  = 'id'", "TFORM1  = 'J'", "TTYPE2  = 'z'", "TFORM2  = 'D'", "EXTNAME = 'CAT'", "TCOMM2  = 'the redsh&'", "CONTINUE  'ift'", "TSCAL3  = 2.0", "TCOMM3  = 'stale&'",
		"CONTINUE  'too'", "HISTORY made up", "THEAP   = 40"}, more...)...)
	tb, err := ParseTable(h)
	if err != nil {
		t.Fatal(err)
	}
	return tb
}

func TestParseTable(t *testing.T) {
	tb := exampleTable(t)
	if len(tb.Columns) != 2 || tb.Columns[1].Offset != 4 || tb.Columns[1].Comment != "the redshift" || tb.Columns[1].Scaled() || tb.Gap != 4 || tb.Heap != 6 || tb.PCount() != 10 {
		t.Errorf("the table is %+v", tb)
	}
}

func TestExtend(t *testing.T) {
	long := strings.Repeat("it's long ", 20)
	e, err := exampleTable(t).Extend([]NewColumn{
		{Name: "d_l", Form: "D", Unit: "Mpc.'littleh'**-1", UCD: "pos.distance", Comment: long},
		{Name: "status", Form: "J"},
	}, []string{"one line"})
	if err != nil {
		t.Fatal(err)
	}
	if e.RowBytes != 24 || e.Sums() || strings.Join(e.Stale, " ") != "TSCAL3 TCOMM3" || len(e.Text())%BlockSize != 0 {
		t.Errorf("rows of %d bytes, sums %v, stale %q, %d bytes of header", e.RowBytes, e.Sums(), e.Stale, len(e.Text()))
	}
	h, err := Read(bytes.NewReader(e.Text()))
	if err != nil {
		t.Fatal(err)
	}
	tb, err := ParseTable(h)
	if err != nil {
		t.Fatal(err)
	}
	got := tb.Columns[2]
	if tb.Rows != 3 || tb.Gap != 4 || tb.Heap != 6 || got.Name != "d_l" || got.Unit != "Mpc.'littleh'**-1" || got.UCD != "pos.distance" || got.Comment != strings.TrimSpace(long) || got.Scaled() || tb.Columns[3].Name != "status" {
		t.Errorf("read again: %+v", tb)
	}
	text := string(e.Text())
	for _, want := range []string{"NAXIS1  =                   24 / bytes in a row ", "THEAP   =                   76 ", "LONGSTRN= 'OGIP 1.0'", "HISTORY made up", "HISTORY one line"} {
		if strings.Count(text, want) != 1 {
			t.Errorf("the header holds %q %d times, want once", want, strings.Count(text, want))
		}
	}
	if at, after := strings.Index(text, "TTYPE3"), strings.Index(text, "CONTINUE  'ift'"); at < after || at > strings.Index(text, "HISTORY made up") {
		t.Errorf("the new columns stand at %d, want them right behind %d", at, after)
	}
}

func TestExtendRefuses(t *testing.T) {
	tb := exampleTable(t)
	if _, err := tb.Extend(make([]NewColumn, MaxColumns-1), nil); err == nil || !strings.Contains(err.Error(), "999") {
		t.Errorf("a table of 1000 columns: %v", err)
	}
	if _, err := tb.Extend([]NewColumn{{Name: "größe", Form: "D"}}, nil); err == nil {
		t.Error("a name beyond ASCII passes")
	}
}

// TestSeal puts sums into a header and lets the definition judge them.
func TestSeal(t *testing.T) {
	e, err := exampleTable(t, "CHECKSUM= 'old'", "DATASUM = '1'").Extend([]NewColumn{{Name: "new", Form: "E"}}, nil)
	if err != nil {
		t.Fatal(err)
	}
	written := bytes.Clone(e.Text())
	data := make([]byte, BlockSize)
	for i := range 3*16 + 10 {
		data[i] = byte(i * i)
	}
	err = e.Seal(SumOf(data), func(off int64, card []byte) error {
		copy(written[off:], card)
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	if got := SumOf(written).Join(SumOf(data)).Words; got != 0xffffffff {
		t.Errorf("the unit adds up to %#x, want all ones", got)
	}
	if !bytes.Equal(written, e.Text()) {
		t.Error("what was patched is not the header")
	}
}

// FuzzHeader parses anything; a table that can be made out can be extended,
// and the longer header read again.
func FuzzHeader(f *testing.F) {
	tb := exampleTable(f, "CHECKSUM= '0'", "TNULL1  = 5", "TSCAL2  = 1.D3")
	f.Add(tb.Header.raw)
	f.Add(textOf("SIMPLE  = T", "BITPIX  = 8", "NAXIS   = 1", "NAXIS1  = 3", "GROUPS  = T"))
	f.Fuzz(func(t *testing.T, text []byte) {
		h, err := Read(bytes.NewReader(text))
		if err != nil {
			return
		}
		h.DataSize()
		h.Kind()
		h.Name()
		tb, err := ParseTable(h)
		if err != nil || len(tb.Columns) > MaxColumns-2 {
			return
		}
		e, err := tb.Extend([]NewColumn{{Name: "new", Form: "D", Comment: strings.Repeat("' ", 60)}, {Name: "flag", Form: "L"}}, []string{"x"})
		if err != nil {
			return
		}
		again, err := Read(bytes.NewReader(e.Text()))
		if err != nil {
			t.Fatal(err)
		}
		longer, err := ParseTable(again)
		if err != nil && strings.Contains(err.Error(), "both called") {
			return // the fuzzer found the new names
		}
		if err != nil {
			t.Fatal(err)
		}
		if len(longer.Columns) != len(tb.Columns)+2 || longer.Rows != tb.Rows || longer.Gap != tb.Gap || longer.RowBytes != tb.RowBytes+9 {
			t.Errorf("%+v became %+v", tb, longer)
		}
	})
}
