package readers

import (
	"bytes"
	"context"
	"errors"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/klauspost/compress/gzip"

	"catenrich/internal/fault"
	"catenrich/internal/table"
	"catenrich/readers/fitstest"
	"catenrich/readers/readertest"
)

// tableOf makes a file of a table of doubles, with more around it.
func tableOf(tb readertest.Table) []byte {
	t := fitstest.Table{Rows: tb.Rows(), Heap: []byte("the heap"), Gap: 3}
	for i, name := range tb.Names {
		t.Columns = append(t.Columns, fitstest.Doubles(name, tb.Columns[i]...))
	}
	return fitstest.File(fitstest.Image("BEFORE", 5000), t.HDU(), fitstest.Image("AFTER", 3000))
}

func zip(t testing.TB, p []byte) []byte {
	t.Helper()
	var b bytes.Buffer
	z := gzip.NewWriter(&b)
	if _, err := z.Write(p); err != nil {
		t.Fatal(err)
	}
	if err := z.Close(); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func writeTemp(t testing.TB, dir, name string, content []byte) string {
	t.Helper()
	path := filepath.Join(dir, name)
	if err := os.WriteFile(path, content, 0o666); err != nil {
		t.Fatal(err)
	}
	return path
}

// smallChunks makes a few thousand rows several chunks.
var smallChunks = FITSOptions{ChunkSize: 50 << 10}

func TestFITSSource(t *testing.T) {
	open := func(path string) (table.Source, error) { return OpenFITS(path, smallChunks) }
	t.Run("plain", func(t *testing.T) {
		readertest.Test(t, readertest.Format{Open: open, Write: func(t testing.TB, dir string, tb readertest.Table) string {
			return writeTemp(t, dir, "a.fits", tableOf(tb))
		}})
	})
	t.Run("gzip", func(t *testing.T) {
		readertest.Test(t, readertest.Format{Open: open, Write: func(t testing.TB, dir string, tb readertest.Table) string {
			return writeTemp(t, dir, "a.fits.gz", zip(t, tableOf(tb)))
		}})
	})
}

// readAll decodes columns of a file; it must fit into one chunk.
func readAll(t testing.TB, src table.Source, wants []table.Want) *table.Batch {
	t.Helper()
	if err := src.Select(wants, nil); err != nil {
		t.Fatal(err)
	}
	c, err := src.Next(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	var b table.Batch
	if err := src.Decode(c, &b); err != nil {
		t.Fatal(err)
	}
	return &b
}

// TestFITSNumbers has every type of number. The values of the unsigned columns
// are those of FITS Standard 4.0, section 5.2.5 and table 11: stored plus 2^15,
// 2^31, 2^63, or less 2^7.
func TestFITSNumbers(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	cases := []struct {
		name  string
		form  string
		cards []string
		cells any
		typ   table.Type
		want  [3]float64 // NaN for a missing cell, Inf for a malformed one
		text  [3]string  // "" for a missing cell
	}{
		{"B", "B", nil, []uint8{0, 1, 255}, table.Integer, [3]float64{0, 1, 255}, [3]string{"0", "1", "255"}},
		{"signed byte", "B", []string{fitstest.Int("TZERO#", -128)}, []uint8{0, 128, 255}, table.Integer, [3]float64{-128, 0, 127}, [3]string{"-128", "0", "127"}},
		{"I", "1I", nil, []int16{-32768, 7, 32767}, table.Integer, [3]float64{-32768, 7, 32767}, [3]string{"-32768", "7", "32767"}},
		{"I, TNULL", "I", []string{fitstest.Int("TNULL#", -99)}, []int16{-99, 0, 99}, table.Integer, [3]float64{nan, 0, 99}, [3]string{"", "0", "99"}},
		{"unsigned I", "I", []string{fitstest.Int("TZERO#", 32768)}, []int16{-32768, 0, 32767}, table.Integer, [3]float64{0, 32768, 65535}, [3]string{"0", "32768", "65535"}},
		{"J, scaled", "J", []string{"TSCAL#  = 1.0D-3", fitstest.Number("TZERO#", 0.5), fitstest.Int("TNULL#", 4)}, []int32{-500, 4, 1500}, table.Float64,
			[3]float64{0, nan, 2}, [3]string{"0", "", "2"}},
		{"unsigned J", "J", []string{fitstest.Int("TZERO#", 2147483648), "TSCAL#  = 1"}, []int32{math.MinInt32, 0, math.MaxInt32}, table.Integer,
			[3]float64{0, 1 << 31, 1<<32 - 1}, [3]string{"0", "2147483648", "4294967295"}},
		{"K", "K", nil, []int64{math.MinInt64, 9007199254740993, -1}, table.Integer, [3]float64{-0x1p63, 9007199254740992, -1},
			[3]string{"-9223372036854775808", "9007199254740993", "-1"}},
		{"unsigned K", "K", []string{"TZERO#  = 9223372036854775808", fitstest.Int("TNULL#", 0)}, []int64{math.MinInt64 + 5, math.MaxInt64, 0}, table.Integer,
			[3]float64{5, 0x1p64, nan}, [3]string{"5", "18446744073709551615", ""}},
		{"E", "E", nil, []float32{0.1, float32(nan), float32(inf)}, table.Float32, [3]float64{float64(float32(0.1)), nan, inf}, [3]string{"0.1", "", "+Inf"}},
		{"E, scaled", "E", []string{"TSCAL#  = 10"}, []float32{0.5, float32(nan), 2}, table.Float64, [3]float64{5, nan, 20}, [3]string{"5", "", "20"}},
		{"D", "D", nil, []float64{0.1, nan, -inf}, table.Float64, [3]float64{0.1, nan, inf}, [3]string{"0.1", "", "-Inf"}},
		{"D, scaled", "D", []string{"TSCAL#  = -2.", "TZERO#  = 1E1"}, []float64{3, nan, 0}, table.Float64, [3]float64{4, nan, 10}, [3]string{"4", "", "10"}},
	}
	tb := fitstest.Table{Rows: 3}
	for _, c := range cases {
		tb.Columns = append(tb.Columns, fitstest.Column{Name: c.name, Form: c.form, Cards: c.cards, Cells: fitstest.Big(c.cells)})
	}
	src, err := OpenFITS(writeTemp(t, t.TempDir(), "a.fits", fitstest.File(tb.HDU())), FITSOptions{})
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	var wants []table.Want
	for i := range cases {
		wants = append(wants, table.Want{Field: i, As: table.Float}, table.Want{Field: i, As: table.Bytes})
	}
	b := readAll(t, src, wants)
	for i, c := range cases {
		if got := src.Schema().Fields[i].Type; got != c.typ {
			t.Errorf("%s: type %v, want %v", c.name, got, c.typ)
		}
		for row := range 3 {
			got, state := b.In[2*i].Float[row], b.In[2*i].State[row]
			switch want := c.want[row]; {
			case want != want:
				if state != table.Missing || got == got {
					t.Errorf("%s, row %d: %v in state %d, want a missing cell", c.name, row, got, state)
				}
			case math.IsInf(want, 0):
				if state != table.Malformed {
					t.Errorf("%s, row %d: %v in state %d, want a malformed cell", c.name, row, got, state)
				}
			case got != want || state != table.Good:
				t.Errorf("%s, row %d: %v in state %d, want %v", c.name, row, got, state, want)
			}
			text, textState := b.In[2*i+1].Bytes[row], b.In[2*i+1].State[row]
			if string(text) != c.text[row] || (textState == table.Good) != (c.text[row] != "") {
				t.Errorf("%s, row %d: text %q in state %d, want %q", c.name, row, text, textState, c.text[row])
			}
		}
	}
	if len(b.Cells) != 2 {
		t.Errorf("%d malformed cells are told of, want 2: %v", len(b.Cells), b.Cells)
	}
}

func TestFITSText(t *testing.T) {
	tb := fitstest.Table{Rows: 4, Columns: []fitstest.Column{
		{Name: "mark", Form: "4A", Cells: []byte("good" + " b  " + "c\x00zz" + "    ")},
		{Name: "flag", Form: "L", Cells: []byte("TF\x00T")},
		{Name: "vector", Form: "2E", Cells: make([]byte, 32)},
		{Name: "list", Form: "1PE(3)", Cells: make([]byte, 32)},
		{Name: "bits", Form: "9X", Cells: make([]byte, 8)},
		{Name: "complex", Form: "C", Cells: make([]byte, 32)},
		{Name: "none", Form: "0D"},
	}}
	src, err := OpenFITS(writeTemp(t, t.TempDir(), "a.fits", fitstest.File(tb.HDU())), FITSOptions{})
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	b := readAll(t, src, []table.Want{{Field: 0, As: table.Bytes}, {Field: 1, As: table.Bytes}})
	for i, want := range [][4]string{{"good", " b", "c", ""}, {"true", "false", "", "true"}} {
		for row, w := range want {
			if got := string(b.In[i].Bytes[row]); got != w || (b.In[i].State[row] == table.Missing) != (w == "") {
				t.Errorf("column %d, row %d: %q in state %d, want %q", i, row, got, b.In[i].State[row], w)
			}
		}
	}
	for i := range 5 {
		if err := src.Select([]table.Want{{Field: i + 2, As: table.Float}}, nil); fault.Of(err) != fault.Data {
			t.Errorf("column %q could be selected as a number: %v", src.Schema().Fields[i+2].Name, err)
		}
	}
	if err := src.Select([]table.Want{{Field: 0, As: table.Float}}, nil); fault.Of(err) != fault.Data {
		t.Errorf("text could be selected as a number: %v", err)
	}
}

// named makes a table of one number that bears a name.
func named(name string, v float64) []byte {
	tb := fitstest.Table{Rows: 1, Columns: []fitstest.Column{fitstest.Doubles("z", v)}, Cards: []string{fitstest.Text("EXTNAME", name)}}
	return tb.HDU()
}

func TestFITSChoice(t *testing.T) {
	path := writeTemp(t, t.TempDir(), "a.fits", fitstest.File(fitstest.Image("PIX", 100), named("ONE", 1), named("Two", 2), named("two", 3)))
	for hdu, want := range map[string]float64{"": 1, "2": 1, "3": 2, "one": 1, "TWO": 2, "Two": 2, "4": 3} {
		src, err := OpenFITS(path, FITSOptions{HDU: hdu})
		if err != nil {
			t.Errorf("hdu %q: %v", hdu, err)
			continue
		}
		b := readAll(t, src, []table.Want{{Field: 0, As: table.Float}})
		if got := b.In[0].Float[0]; got != want {
			t.Errorf("hdu %q is table %v, want %v", hdu, got, want)
		}
		src.Close()
	}
}

// TestFITSFaults has what no table can be made of: each is one line that names
// the file and the reason, and is the fault of the content.
func TestFITSFaults(t *testing.T) {
	good := fitstest.Table{Rows: 100, Columns: []fitstest.Column{fitstest.Doubles("z", make([]float64, 100)...)}}
	whole := fitstest.File(good.HDU())
	replace := func(old, new string) []byte {
		if !bytes.Contains(whole, []byte(old)) {
			t.Fatalf("the file does not hold %q", old)
		}
		return bytes.Replace(whole, []byte(old), []byte(new), 1)
	}
	header := func(cards ...string) []byte { return fitstest.File(fitstest.Header(cards...)) }
	ascii := header(fitstest.Text("XTENSION", "TABLE"), fitstest.Int("BITPIX", 8), fitstest.Int("NAXIS", 2), fitstest.Int("NAXIS1", 0), fitstest.Int("NAXIS2", 0),
		fitstest.Int("PCOUNT", 0), fitstest.Int("GCOUNT", 1), fitstest.Int("TFIELDS", 0), fitstest.Text("EXTNAME", "OLD"))
	compressed := replace("TFORM1  = 'D       '", "ZIMAGE  = T         ")
	twice := fitstest.Table{Rows: 1, Columns: []fitstest.Column{fitstest.Doubles("z", 1), fitstest.Doubles("z", 2)}}
	heap := fitstest.Table{Rows: 1, Columns: []fitstest.Column{fitstest.Doubles("z", 1)}, Heap: []byte("heap"), Cards: []string{fitstest.Int("THEAP", 5)}}
	cases := []struct {
		name    string
		hdu     string
		content []byte
		want    string
	}{
		{"empty", "", nil, "is empty"},
		{"text", "", []byte("z,id\n1,2\n"), "is not a FITS file"},
		{"long text", "", bytes.Repeat([]byte("z,id\n1,2\n"), 1000), "is not a FITS file"},
		{"no table", "", fitstest.File(fitstest.Image("PIX", 10)), `holds no binary table: HDU 0 is an image; HDU 1 "PIX" is an image`},
		{"data cut short", "", whole[:len(whole)-2880+100], "HDU 1: the data of the table are cut short"},
		{"header cut short", "", whole[:2880*2-100], "HDU 1: its header has no END"},
		{"image cut short", "", fitstest.File(fitstest.Image("PIX", 6000))[:2880*3], "HDU 1: its 6000 bytes of data are cut short"},
		{"no END", "", replace("END     "+strings.Repeat(" ", 72)+strings.Repeat(" ", 80), strings.Repeat(" ", 160)), "HDU 0: its header has no END"},
		{"NAXIS1 disagrees", "", replace("NAXIS1  =                    8", "NAXIS1  =                    9"), "NAXIS1 says that a row has 9 bytes, and its columns (TFORM) that it has 8"},
		{"no TFORM", "", replace("TFORM1", "TFOR_1"), "its header has no TFORM1"},
		{"odd TFORM", "", replace("'D       '", "'F8.3    '"), "TFORM1 is"},
		{"a TTYPE twice", "", fitstest.File(twice.HDU()), `columns 1 and 2 are both called "z"`},
		{"a keyword twice", "", replace("GCOUNT  =                    1", "NAXIS1  =                    1"), "NAXIS1 stands more than once"},
		{"an ASCII table", "", ascii, "is an ASCII table: convert it"},
		{"an ASCII table, by name", "old", ascii, "HDU 1 (input.hdu = \"old\") is an ASCII table"},
		{"a compressed image", "", compressed, "is a compressed image: uncompress it"},
		{"an image, by number", "0", whole, "HDU 0 (input.hdu = \"0\") is an image"},
		{"random groups", "", fitstest.Header("SIMPLE  =                    T", fitstest.Int("BITPIX", -32), fitstest.Int("NAXIS", 2), fitstest.Int("NAXIS1", 0), fitstest.Int("NAXIS2", 0),
			"GROUPS  =                    T", fitstest.Int("PCOUNT", 0), fitstest.Int("GCOUNT", 0)), "HDU 0 is random groups"},
		{"no such HDU", "7", whole, `has no HDU "7"`},
		{"no such name", "nope", whole, `has no HDU "nope"`},
		{"rows beyond number", "", replace("NAXIS2  =                  100", "NAXIS2  =  1000000000000000000"), "more data than any file can hold"},
		{"negative rows", "", replace("NAXIS2  =                  100", "NAXIS2  =                 -100"), "NAXIS2 is -100"},
		{"rows of nothing", "", header(fitstest.Text("XTENSION", "BINTABLE"), fitstest.Int("BITPIX", 8), fitstest.Int("NAXIS", 2), fitstest.Int("NAXIS1", 0),
			fitstest.Int("NAXIS2", 1e15), fitstest.Int("PCOUNT", 0), fitstest.Int("GCOUNT", 1), fitstest.Int("TFIELDS", 0)), "NAXIS1 is 0"},
		{"heap before the rows' end", "", fitstest.File(heap.HDU()), "THEAP is 5: the heap would begin outside of the 4 bytes behind the 8 bytes of the rows"},
		{"damaged gzip", "", append(zip(t, whole)[:40], bytes.Repeat([]byte{0x55}, 50)...), "cannot be decompressed"},
		{"gzip cut short", "", zip(t, whole)[:60], "cannot be decompressed"},
		{"gzip of something else", "", zip(t, []byte("z,id\n")), "is not a FITS file"},
		{"gzip of nothing", "", zip(t, nil), "is empty"},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			path := writeTemp(t, t.TempDir(), "a.fits", c.content)
			err := readWhole(path, FITSOptions{HDU: c.hdu})
			if err == nil || fault.Of(err) != fault.Data || !strings.Contains(err.Error(), c.want) || !strings.HasPrefix(err.Error(), path) || strings.Contains(err.Error(), "\n") {
				t.Errorf("class %d: %v\nwant one line of class 65 with %q", fault.Of(err), err, c.want)
			}
		})
	}
}

// readWhole opens a file and reads it as a writer would.
func readWhole(path string, o FITSOptions) error {
	src, err := OpenFITS(path, o)
	if err != nil {
		return err
	}
	defer src.Close()
	if err := src.CopyBefore(io.Discard); err != nil {
		return err
	}
	var wants []table.Want
	for i, f := range src.Schema().Fields {
		if f.Type.Numeric() {
			wants = append(wants, table.Want{Field: i, As: table.Float})
		}
		if f.Type != table.Other {
			wants = append(wants, table.Want{Field: i, As: table.Bytes})
		}
	}
	if err := src.Select(wants, nil); err != nil {
		return err
	}
	var b table.Batch
	for {
		c, err := src.Next(context.Background())
		if err == io.EOF {
			break
		}
		if err != nil {
			return err
		}
		if err := src.Decode(c, &b); err != nil {
			return err
		}
		src.Release(c)
	}
	if err := src.CopyHeap(io.Discard); err != nil {
		return err
	}
	return src.CopyAfter(io.Discard)
}

// TestFITSFaultsBehind has units behind the table that are damaged.
func TestFITSFaultsBehind(t *testing.T) {
	whole := tableOf(readertest.Random(10, 2))
	for name, content := range map[string][]byte{"plain": whole[:len(whole)-4000], "gzip": zip(t, whole[:len(whole)-4000])} {
		err := readWhole(writeTemp(t, t.TempDir(), "a.fits", content), FITSOptions{})
		if fault.Of(err) != fault.Data || !strings.Contains(err.Error(), "HDU 3: its 3000 bytes of data are cut short: the file ends 1240 bytes before they do") {
			t.Errorf("%s: %v", name, err)
		}
	}
	src, err := OpenFITS(writeTemp(t, t.TempDir(), "a.fits", append(whole, "special records"...)), FITSOptions{})
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	readAll(t, src, nil)
	var after bytes.Buffer
	if err := errors.Join(src.CopyHeap(io.Discard), src.CopyAfter(&after)); err != nil {
		t.Fatal(err)
	}
	if !bytes.HasSuffix(whole, after.Bytes()[:2880*3]) || !bytes.HasSuffix(after.Bytes(), []byte("special records")) {
		t.Errorf("%d bytes stand behind the table, want the image and the special records", after.Len())
	}
}

// TestFITSWithoutPadding reads a file whose last block is not filled up.
func TestFITSWithoutPadding(t *testing.T) {
	tb := fitstest.Table{Rows: 2, Columns: []fitstest.Column{fitstest.Doubles("z", 1, 2)}}
	whole := fitstest.File(tb.HDU())
	src, err := OpenFITS(writeTemp(t, t.TempDir(), "a.fits", whole[:2880*2+16]), FITSOptions{})
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	if b := readAll(t, src, []table.Want{{Field: 0, As: table.Float}}); b.In[0].Float[1] != 2 {
		t.Errorf("row 1 is %v, want 2", b.In[0].Float[1])
	}
	if err := errors.Join(src.CopyHeap(io.Discard), src.CopyAfter(io.Discard)); err != nil || len(src.Warnings()) != 1 {
		t.Errorf("%v, warnings %q, want none and one", err, src.Warnings())
	}
}

// FuzzFITS mutates whole files: nothing may panic, hang or take more memory
// than the file is worth, and every error names the file.
func FuzzFITS(f *testing.F) {
	f.Add(tableOf(readertest.Random(3, 2)))
	tb := fitstest.Table{Rows: 2, Columns: []fitstest.Column{
		{Name: "b", Form: "B", Cells: []byte{1, 2}, Cards: []string{fitstest.Int("TNULL#", 1)}},
		{Name: "t", Form: "3A", Cells: []byte("ab cd ")},
		{Name: "k", Form: "K", Cells: make([]byte, 16), Cards: []string{"TZERO#  = 9223372036854775808"}},
		{Name: "l", Form: "L", Cells: []byte("TF")},
		{Name: "p", Form: "1PB(3)", Cells: make([]byte, 16)},
	}, Gap: 2, Heap: []byte("heap")}
	f.Add(fitstest.File(tb.HDU()))
	f.Add(zip(f, fitstest.File(tb.HDU())))
	dir := f.TempDir()
	f.Fuzz(func(t *testing.T, content []byte) {
		path := writeTemp(t, dir, "fuzz.fits", content)
		if err := readWhole(path, FITSOptions{}); err != nil && (fault.Of(err) != fault.Data || !strings.HasPrefix(err.Error(), path)) {
			t.Errorf("class %d: %v", fault.Of(err), err)
		}
	})
}
