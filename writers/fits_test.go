package writers

import (
	"bytes"
	"compress/gzip"
	"crypto/sha256"
	"errors"
	"fmt"
	"hash/crc32"
	"io"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"catenrich/internal/fault"
	"catenrich/internal/fitshead"
	"catenrich/internal/table"
	"catenrich/readers"
	"catenrich/readers/fitstest"
	"catenrich/readers/readertest"
	"catenrich/writers/writertest"
)

// fitsOf makes a file of a table of doubles with a gap, a heap, sums and units
// around it.
func fitsOf(tb readertest.Table, cards ...string) []byte {
	t := fitstest.Table{Rows: tb.Rows(), Gap: 5, Heap: []byte("this is the heap"), Cards: cards}
	for i, name := range tb.Names {
		t.Columns = append(t.Columns, fitstest.Doubles(name, tb.Columns[i]...))
	}
	return fitstest.File(fitstest.Image("BEFORE", 7000), t.HDU(), fitstest.Image("AFTER", 4000))
}

// sumCards are what a header without right sums may have.
var sumCards = []string{fitstest.Text("CHECKSUM", "0000000000000000"), fitstest.Text("DATASUM", "0")}

func writeTemp(t testing.TB, dir, name string, content []byte) string {
	t.Helper()
	path := filepath.Join(dir, name)
	if err := os.WriteFile(path, content, 0o666); err != nil {
		t.Fatal(err)
	}
	return path
}

func openFITS(path string) (table.Source, error) {
	return readers.OpenFITS(path, readers.FITSOptions{ChunkSize: 30 << 10})
}

func fitsSink(t testing.TB, codec string) func(table.Source, table.Spec) table.Sink {
	return func(src table.Source, spec table.Spec) table.Sink {
		spec.Codec = codec
		sink, err := NewFITS(src.(*readers.FITS), spec)
		if err != nil {
			t.Fatal(err)
		}
		return sink
	}
}

// readFITS reads the first table of a file of doubles and what was added.
func readFITS(t testing.TB, file []byte) (tb readertest.Table) {
	t.Helper()
	u := fitstest.Split(t, file)[2]
	for i := range int(u.Int(t, "TFIELDS")) {
		name, _ := u.Value(fmt.Sprintf("TTYPE%d", i+1))
		tb.Names = append(tb.Names, name)
		tb.Columns = append(tb.Columns, u.Column(t, i+1))
	}
	return tb
}

// unzip reads a gzip file with the standard library, which checks its sums, and
// wants it to be one member.
func unzip(t testing.TB, p []byte) []byte {
	t.Helper()
	r := bytes.NewReader(p)
	z, err := gzip.NewReader(r)
	if err != nil {
		t.Fatal(err)
	}
	z.Multistream(false)
	file, err := io.ReadAll(z)
	if err != nil {
		t.Fatal(err)
	}
	if r.Len() > 0 {
		t.Fatalf("%d bytes follow the first member", r.Len())
	}
	return file
}

func TestFITSSink(t *testing.T) {
	for _, sums := range [][]string{nil, sumCards} {
		write := func(t testing.TB, dir string, tb readertest.Table) string {
			return writeTemp(t, dir, "a.fits", fitsOf(tb, sums...))
		}
		t.Run(fmt.Sprintf("plain, %d sums", len(sums)), func(t *testing.T) {
			writertest.Test(t, writertest.Format{Write: write, Open: openFITS, Sink: fitsSink(t, ""), Read: readFITS})
		})
		t.Run(fmt.Sprintf("gzip, %d sums", len(sums)), func(t *testing.T) {
			writertest.Test(t, writertest.Format{Write: write, Open: openFITS, Sink: fitsSink(t, "gzip"),
				Read: func(t testing.TB, output []byte) readertest.Table { return readFITS(t, unzip(t, output)) }})
		})
	}
}

// enrichFITS takes a file through the sink, with the columns of the suite.
func enrichFITS(t testing.TB, content []byte, spec table.Spec) ([]byte, []string) {
	t.Helper()
	src, err := openFITS(writeTemp(t, t.TempDir(), "a.fits", content))
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	spec.Added = writertest.Added
	sink, err := NewFITS(src.(*readers.FITS), spec)
	if err != nil {
		t.Fatal(err)
	}
	out := writertest.NewOutput(t)
	if err := writertest.Run(src, sink, out, 3); err != nil {
		t.Fatal(err)
	}
	size, sum, ok := src.Digest()
	if want := sha256.Sum256(content); !ok || size != int64(len(content)) || sum != want {
		t.Errorf("the input's digest is %x of %d bytes, want %x of %d", sum, size, want, len(content))
	}
	return out.Bytes, sink.Warnings()
}

// TestFITSCopies holds that every old byte is there: units, rows, gap, heap.
func TestFITSCopies(t *testing.T) {
	const rows = 3000
	in := fitsOf(readertest.Random(rows, 6), sumCards...)
	out, warnings := enrichFITS(t, in, table.Spec{})
	if len(warnings) > 0 {
		t.Errorf("warnings %q", warnings)
	}
	old, new := fitstest.Split(t, in), fitstest.Split(t, out)
	if len(new) != len(old) {
		t.Fatalf("%d units became %d", len(old), len(new))
	}
	for i := range old {
		if i != 2 && (!bytes.Equal(old[i].Header, new[i].Header) || !bytes.Equal(old[i].Data, new[i].Data)) {
			t.Errorf("unit %d is not what it was", i)
		}
	}
	before, after := old[2], new[2]
	const width, grown = 6 * 8, 6*8 + 8 + 1 + 4
	if after.Int(t, "NAXIS1") != grown || after.Int(t, "THEAP") != rows*grown+5 || after.Int(t, "PCOUNT") != 5+16 {
		t.Errorf("rows of %d bytes, heap at %d of %d, want %d, %d and 21", after.Int(t, "NAXIS1"), after.Int(t, "THEAP"), after.Int(t, "PCOUNT"), grown, rows*grown+5)
	}
	for row := range rows {
		if !bytes.Equal(before.Data[row*width:(row+1)*width], after.Data[row*grown:row*grown+width]) {
			t.Fatalf("row %d is not what it was", row)
		}
	}
	if want := "\xAA\xAA\xAA\xAA\xAAthis is the heap"; string(after.Data[rows*grown:rows*grown+21]) != want {
		t.Errorf("behind the rows stands %q", after.Data[rows*grown:rows*grown+21])
	}
	if rest := after.Data[rows*grown+21:]; !bytes.Equal(rest, make([]byte, len(rest))) {
		t.Error("the last block is not filled up with zeros")
	}
	if sum := fitshead.SumOf(after.Header).Join(fitshead.SumOf(after.Data)).Words; sum != 0xffffffff {
		t.Errorf("with its CHECKSUM the unit adds up to %#x, want all ones", sum)
	}
	if sum, _ := after.Value("DATASUM"); sum != fmt.Sprint(fitshead.SumOf(after.Data).Words) {
		t.Errorf("DATASUM is %s, want %d", sum, fitshead.SumOf(after.Data).Words)
	}
}

// TestFITSGzip: a compressed output holds the plain one, and so does that of a
// compressed input.
func TestFITSGzip(t *testing.T) {
	in := fitsOf(readertest.Random(4000, 5), sumCards...)
	want, _ := enrichFITS(t, in, table.Spec{})
	var small bytes.Buffer
	z := gzip.NewWriter(&small)
	z.Write(in)
	z.Close()
	for name, content := range map[string][]byte{"plain": in, "compressed": small.Bytes()} {
		got, _ := enrichFITS(t, content, table.Spec{Codec: "gzip", Level: 3})
		if !bytes.Equal(unzip(t, got), want) {
			t.Errorf("of the %s input the compressed output holds another file than the plain one", name)
		}
		if got, _ := enrichFITS(t, content, table.Spec{}); !bytes.Equal(got, want) {
			t.Errorf("of the %s input the plain output is another file", name)
		}
	}
}

// TestFITSWideHeader patches sums that stand beyond the first stored block of a
// compressed header.
func TestFITSWideHeader(t *testing.T) {
	in := fitsOf(readertest.Random(3, 650), sumCards...)
	want, _ := enrichFITS(t, in, table.Spec{})
	got, _ := enrichFITS(t, in, table.Spec{Codec: "gzip"})
	if !bytes.Equal(unzip(t, got), want) {
		t.Error("the compressed output holds another file than the plain one")
	}
	u := fitstest.Split(t, want)[2]
	if at := bytes.Index(u.Header, []byte("CHECKSUM=")); at < storedSize {
		t.Fatalf("CHECKSUM stands at %d, within the first stored block", at)
	}
	if sum := fitshead.SumOf(u.Header).Join(fitshead.SumOf(u.Data)).Words; sum != 0xffffffff {
		t.Errorf("the unit adds up to %#x, want all ones", sum)
	}
}

// TestJoinedCRC compares with the CRC of the whole.
func TestJoinedCRC(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	p := make([]byte, 100_000)
	for i := range p {
		p[i] = byte(r.Uint32())
	}
	for _, cut := range []int{0, 1, 7, 4096, 99_999, 100_000} {
		a, b := p[:cut], p[cut:]
		got := checked{crc32.ChecksumIEEE(a), int64(len(a))}.join(checked{crc32.ChecksumIEEE(b), int64(len(b))})
		if want := crc32.ChecksumIEEE(p); got.crc != want || got.size != int64(len(p)) {
			t.Errorf("cut at %d: %#x of %d bytes, want %#x of %d", cut, got.crc, got.size, want, len(p))
		}
	}
}

func TestFITSNarrow(t *testing.T) {
	out, _ := enrichFITS(t, fitsOf(readertest.Random(300, 2)), table.Spec{Narrow: true})
	u := fitstest.Split(t, out)[2]
	if form, _ := u.Value("TFORM3"); form != "E" {
		t.Fatalf("the narrow column has the form %q, want E", form)
	}
	if cells := u.Column(t, 3); cells[0] == cells[0] || cells[5] != float64(float32(2236.06797749979)) { // 1000 √5
		t.Errorf("rows 0 and 5 are %v and %v, want NaN and 1000 √5 as a float32", cells[0], cells[5])
	}
}

func TestFITSMetadata(t *testing.T) {
	out, _ := enrichFITS(t, fitsOf(readertest.Random(3, 1)), table.Spec{Metadata: []table.KeyValue{
		{Key: "short.key", Value: "its value"}, {Key: "long.key", Value: strings.Repeat("x", 73)}}})
	header := string(fitstest.Split(t, out)[2].Header)
	if !strings.Contains(header, "HISTORY short.key ") || !strings.Contains(header, "HISTORY its value ") || strings.Contains(header, "long.key") {
		t.Errorf("the header is\n%s", header)
	}
}

// TestFITSStale: records of columns that are not there would describe ours.
func TestFITSStale(t *testing.T) {
	out, warnings := enrichFITS(t, fitsOf(readertest.Random(30, 1), fitstest.Number("TSCAL2", 1000), fitstest.Int("TNULL4", 7)), table.Spec{})
	u := fitstest.Split(t, out)[2]
	for _, key := range []string{"TSCAL2", "TNULL4"} {
		if _, ok := u.Value(key); ok {
			t.Errorf("%s is still there", key)
		}
	}
	if len(warnings) != 1 || !strings.Contains(warnings[0], "TSCAL2") {
		t.Errorf("warnings %q, want one that names TSCAL2", warnings)
	}
}

func TestFITSRefuses(t *testing.T) {
	src, err := openFITS(writeTemp(t, t.TempDir(), "a.fits", fitsOf(readertest.Random(3, 1))))
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	for name, spec := range map[string]table.Spec{
		"a name beyond ASCII": {Added: []table.Field{{Name: "größe"}}},
		"no name":             {Added: []table.Field{{}}},
		"a codec":             {Codec: "zstd"},
		"a level":             {Codec: "gzip", Level: 10},
	} {
		if _, err := NewFITS(src.(*readers.FITS), spec); fault.Of(err) != fault.Config {
			t.Errorf("%s: %v, want an error of class Config", name, err)
		}
	}
	if _, err := NewFITS(src.(*readers.FITS), table.Spec{Added: slices.Repeat([]table.Field{{Name: "x"}}, 999)}); fault.Of(err) != fault.Data {
		t.Errorf("1000 columns: %v, want an error of class Data", err)
	}
}

// TestFITSDiskFull fails every operation once where a patch is among them, in
// an output with a compressed header that was kept.
func TestFITSDiskFull(t *testing.T) {
	content := fitsOf(readertest.Random(20, 1), sumCards...)
	for fail := 1; ; fail++ {
		src, err := openFITS(writeTemp(t, t.TempDir(), "a.fits", content))
		if err != nil {
			t.Fatal(err)
		}
		out := writertest.NewOutput(t)
		out.FailAt = fail
		err = writertest.Run(src, fitsSink(t, "gzip")(src, table.Spec{Added: writertest.Added}), out, 1)
		src.Close()
		if out.Calls < fail {
			if err != nil || fail < 5 {
				t.Errorf("after %d operations: %v", out.Calls, err)
			}
			return
		}
		if !errors.Is(err, writertest.ErrInjected) {
			t.Errorf("when operation %d fails, the sink returns %v", fail, err)
		}
	}
}
