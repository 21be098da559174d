package writers_test

import (
	"bytes"
	"encoding/csv"
	"io"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"

	"catenrich/internal/fault"
	"catenrich/internal/table"
	"catenrich/readers"
	"catenrich/readers/readertest"
	"catenrich/writers"
	"catenrich/writers/writertest"
)

func writeTable(t testing.TB, dir string, tb readertest.Table) string {
	t.Helper()
	path := filepath.Join(dir, "in.csv")
	f, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	w := csv.NewWriter(f)
	w.Write(tb.Names)
	for row := range tb.Rows() {
		record := make([]string, len(tb.Columns))
		for i := range record {
			if v := tb.Columns[i][row]; v == v {
				record[i] = strconv.FormatFloat(v, 'g', -1, 64)
			}
		}
		w.Write(record)
	}
	w.Flush()
	return path
}

// readTable reads an output with the standard library alone.
func readTable(t testing.TB, text []byte) (tb readertest.Table) {
	t.Helper()
	records, err := csv.NewReader(bytes.NewReader(text)).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	tb.Names = records[0]
	tb.Columns = make([][]float64, len(tb.Names))
	for _, record := range records[1:] {
		for i, field := range record {
			v := math.NaN()
			switch field {
			case "":
			case "true":
				v = 1
			case "false":
				v = 0
			default:
				if v, err = strconv.ParseFloat(field, 64); err != nil {
					t.Fatal(err)
				}
			}
			tb.Columns[i] = append(tb.Columns[i], v)
		}
	}
	return tb
}

// unpack decompresses with readers that know members and frames.
func unpack(t testing.TB, codec string, packed []byte) []byte {
	t.Helper()
	var r io.Reader = bytes.NewReader(packed)
	var err error
	switch codec {
	case "gzip":
		r, err = gzip.NewReader(r)
	case "zst":
		r, err = zstd.NewReader(r)
	}
	if err != nil {
		t.Fatal(err)
	}
	text, err := io.ReadAll(r)
	if err != nil {
		t.Fatal(err)
	}
	return text
}

func TestSuite(t *testing.T) {
	for _, codec := range []string{"", "gzip", "zst"} {
		t.Run("codec="+codec, func(t *testing.T) {
			writertest.Test(t, writertest.Format{
				Write: writeTable,
				Open: func(path string) (table.Source, error) {
					return readers.OpenCSV(path, readers.CSVOptions{BlockSize: 16 << 10})
				},
				Sink: func(src table.Source, spec table.Spec) table.Sink {
					spec.Codec = codec
					return writers.NewCSV(src.(*readers.CSV), spec)
				},
				Read: func(t testing.TB, output []byte) readertest.Table { return readTable(t, unpack(t, codec, output)) },
			})
		})
	}
}

// enrich takes a text through reader and writer, with the suite's columns
// under one-letter names: l, f and s.
func enrich(t *testing.T, text string, o readers.CSVOptions, spec table.Spec) (string, error) {
	t.Helper()
	src, err := readers.NewCSV("in.csv", io.NopCloser(strings.NewReader(text)), o)
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	spec.Added = append([]table.Field(nil), writertest.Added...)
	for i, name := range []string{"l", "f", "s"} {
		spec.Added[i].Name = name
	}
	out := writertest.NewOutput(t)
	err = writertest.Run(src, writers.NewCSV(src, spec), out, 2)
	return string(out.Bytes), err
}

// Row 0 of the suite's columns is null, null, 0; row 1 is 1000, true, 1; row 2
// is 1414.213562373095, false, 2.
func TestWriting(t *testing.T) {
	const two = "1414.213562373095"
	commented := readers.CSVOptions{Header: readers.HeaderCommented, HeaderDelimiter: '\t'}
	for _, c := range []struct {
		name, text string
		options    readers.CSVOptions
		spec       table.Spec
		want       string
	}{
		{name: "plain", text: "a,z\nx,0.50\ny,1\nw,2\n", want: "a,z,l,f,s\nx,0.50,,,0\ny,1,1000,true,1\nw,2," + two + ",false,2\n"},
		{name: "no final newline", text: "a,z\nx,0.50\ny,1", want: "a,z,l,f,s\nx,0.50,,,0\ny,1,1000,true,1"},
		{name: "header alone", text: "a,z\n", want: "a,z,l,f,s\n"},
		{name: "header alone, no newline", text: "a,z", want: "a,z,l,f,s"},
		{name: "mixed line ends", text: "z\r\n1\n2\r3\r\n", want: "z,l,f,s\r\n1,,,0\n2,1000,true,1\r3," + two + ",false,2\r\n"},
		{name: "byte order mark", text: "\ufeffz\n1\n", want: "\ufeffz,l,f,s\n1,,,0\n"},
		{name: "byte order mark, no header", text: "\ufeff1\n2\n", options: readers.CSVOptions{Header: readers.HeaderNone}, want: "\ufeff1,,,0\n2,1000,true,1\n"},
		{name: "blanks are kept", text: " z \n 1 \n2\t\n", want: " z ,l,f,s\n 1 ,,,0\n2\t,1000,true,1\n"},
		{name: "blank and comment lines", text: "#1\n\nz\n#,\"\n1\n  \n#2\n2\n#3", options: readers.CSVOptions{Comment: "#"}, want: "#1\n\nz,l,f,s\n#,\"\n1,,,0\n  \n#2\n2,1000,true,1\n#3"},
		{name: "quotes", text: "\"a\",z\n\"x\n\"\",y\",1\n\"w\",2\n", want: "\"a\",z,l,f,s\n\"x\n\"\",y\",1,,,0\n\"w\",2,1000,true,1\n"},
		{name: "rejects are left out", text: "a,z\nx\nx,1\n\nx,2,3\r\n\"a\"b,1\ny,2\nz", want: "a,z,l,f,s\nx,1,,,0\n\ny,2,1000,true,1\n"},
		{name: "all are rejects", text: "a,z\nx\ny\n", want: "a,z,l,f,s\n"},
		{name: "header with another delimiter", text: "# a \t z \nx,1\ny,2\n", options: commented, want: "# a \t z \tl\tf\ts\nx,1,,,0\ny,2,1000,true,1\n"},
		{name: "space-aligned", text: "# a   z\n  x   1  \n  y   2\r\n", options: readers.CSVOptions{Delimiter: ' ', Header: readers.HeaderCommented}, want: "# a   z l f s\n  x   1   nan nan 0\n  y   2 1000 true 1\r\n"},
		{name: "semicolons", text: "a;z\nx;1\n", options: readers.CSVOptions{Delimiter: ';'}, want: "a;z;l;f;s\nx;1;;;0\n"},
		{name: "NUL and invalid UTF-8", text: "a,z\n\x00,1\n\xff\xfe,2\n", want: "a,z,l,f,s\n\x00,1,,,0\n\xff\xfe,2,1000,true,1\n"},
		{name: "digits", text: "z\n1\n2\n3\n", spec: table.Spec{Digits: 5}, want: "z,l,f,s\n1,,,0\n2,1000,true,1\n3,1414.2,false,2\n"},
		{name: "narrow", text: "z\n1\n2\n3\n", spec: table.Spec{Narrow: true}, want: "z,l,f,s\n1,,,0\n2,1000,true,1\n3,1414.2136,false,2\n"},
		{name: "narrow with digits", text: "z\n1\n2\n3\n", spec: table.Spec{Narrow: true, Digits: 7}, want: "z,l,f,s\n1,,,0\n2,1000,true,1\n3,1414.214,false,2\n"},
	} {
		t.Run(c.name, func(t *testing.T) {
			for _, size := range []int{0, 1, 2, 3, 5, 8, 13} {
				c.options.BlockSize = size
				got, err := enrich(t, c.text, c.options, c.spec)
				// The suite's columns count all rows of the input, whatever the
				// chunks, so the bytes do not depend on the block.
				if err != nil || got != c.want {
					t.Errorf("blocks of %d: %v\ngot  %q\nwant %q", size, err, got, c.want)
				}
			}
		})
	}
}

func TestNamesAreQuotedWhereTheyMust(t *testing.T) {
	for _, c := range []struct {
		name, want string
		options    readers.CSVOptions
	}{
		{"a b", "z,a b\n", readers.CSVOptions{}},
		{"a,b", "z,\"a,b\"\n", readers.CSVOptions{}},
		{"a\"b", "z,a\"b\n", readers.CSVOptions{}},
		{"\"a", "z,\"\"\"a\"\n", readers.CSVOptions{}},
		{"a b", "z \"a b\"\n", readers.CSVOptions{Delimiter: ' '}},
		{"a,b", "", readers.CSVOptions{NoQuote: true}},
	} {
		src, err := readers.NewCSV("in.csv", io.NopCloser(strings.NewReader("z\n")), c.options)
		if err != nil {
			t.Fatal(err)
		}
		out := writertest.NewOutput(t)
		err = writers.NewCSV(src, table.Spec{Added: []table.Field{{Name: c.name}}}).Begin(out)
		if c.want == "" {
			if fault.Of(err) != fault.Config {
				t.Errorf("%q was not refused: %v", c.name, err)
			}
		} else if err != nil || string(out.Bytes) != c.want {
			t.Errorf("%q: %q, %v, want %q", c.name, out.Bytes, err, c.want)
		}
		src.Close()
	}
}

func TestRefusedSpecs(t *testing.T) {
	for _, spec := range []table.Spec{{Codec: "brotli"}, {Codec: "gzip", Level: 10}, {Codec: "gzip", Level: -1}, {Codec: "zst", Level: 5}, {Digits: 18}, {Digits: -1}} {
		if _, err := enrich(t, "z\n1\n", readers.CSVOptions{}, spec); fault.Of(err) != fault.Config {
			t.Errorf("%+v: %v, want a fault of the job", spec, err)
		}
	}
}

// TestMembers counts members by a reader that stops at the end of each: one
// for the header and one for each chunk, none with a name or a time.
func TestMembers(t *testing.T) {
	text := "z\n" + strings.Repeat("0.123456\n", 2000)
	packed, err := enrich(t, text, readers.CSVOptions{BlockSize: 4096}, table.Spec{Codec: "gzip"})
	if err != nil {
		t.Fatal(err)
	}
	r := bytes.NewReader([]byte(packed))
	z, err := gzip.NewReader(r)
	members := 0
	for ; err == nil; err = z.Reset(r) {
		z.Multistream(false)
		if _, err := io.Copy(io.Discard, z); err != nil {
			t.Fatal(err)
		}
		if !z.ModTime.IsZero() || z.Name != "" {
			t.Fatalf("member %d has the time %v and the name %q", members, z.ModTime, z.Name)
		}
		members++
	}
	if want := 1 + (len(text)-2+4094)/4095; err != io.EOF || members != want { // 455 records of 9 bytes a chunk
		t.Errorf("%d members, %v, want %d", members, err, want)
	}
}

// TestProgramsUnpack asks gzip and zstd themselves, where they are installed.
func TestProgramsUnpack(t *testing.T) {
	text := "z\n" + strings.Repeat("0.123456\n", 2000)
	want, err := enrich(t, text, readers.CSVOptions{BlockSize: 4096}, table.Spec{})
	if err != nil {
		t.Fatal(err)
	}
	for codec, program := range map[string]string{"gzip": "gzip", "zst": "zstd"} {
		t.Run(program, func(t *testing.T) {
			if _, err := exec.LookPath(program); err != nil {
				t.Skip(err)
			}
			packed, err := enrich(t, text, readers.CSVOptions{BlockSize: 4096}, table.Spec{Codec: codec})
			if err != nil {
				t.Fatal(err)
			}
			cmd := exec.Command(program, "-dc")
			cmd.Stdin = strings.NewReader(packed)
			if got, err := cmd.Output(); err != nil || string(got) != want {
				t.Errorf("%s -dc: %v, %d bytes, want %d", program, err, len(got), len(want))
			}
		})
	}
}

// TestNebulaeVerbatim: an open catalogue comes through with every row, and
// what was its own can be cut out again, byte for byte.
func TestNebulaeVerbatim(t *testing.T) {
	packed, err := os.ReadFile("../testdata/catalogues/nebulae-and-galaxies.csv.gz")
	if err != nil {
		t.Fatal(err)
	}
	text := string(unpack(t, "gzip", packed))
	got, err := enrich(t, text, readers.CSVOptions{Delimiter: ';'}, table.Spec{})
	if err != nil {
		t.Fatal(err)
	}
	var back strings.Builder
	lines := 0
	for line := range strings.Lines(got) { // no quoted field of it holds a line end
		own := strings.TrimSuffix(line, "\n")
		for range 3 {
			own = own[:strings.LastIndexByte(own, ';')]
		}
		back.WriteString(own + "\n")
		lines++
	}
	if back.String() != text || lines != 13970 {
		t.Errorf("%d lines, %d bytes without the new fields, want 13970 and the %d of the input", lines, back.Len(), len(text))
	}
}

func BenchmarkWriting(b *testing.B) {
	path := writeTable(b, b.TempDir(), readertest.Random(8000, 10))
	var added []table.Field
	for i := range 12 {
		added = append(added, table.Field{Name: "n" + strconv.Itoa(i), Kind: table.Float})
	}
	for _, codec := range []string{"", "gzip", "zst"} {
		b.Run("codec="+codec, func(b *testing.B) {
			src, err := readers.OpenCSV(path, readers.CSVOptions{})
			if err != nil {
				b.Fatal(err)
			}
			defer src.Close()
			src.Select(nil, added)
			c, err := src.Next(b.Context())
			if err != nil {
				b.Fatal(err)
			}
			var batch table.Batch
			if err := src.Decode(c, &batch); err != nil {
				b.Fatal(err)
			}
			for i := range batch.Out {
				for row := range batch.Rows {
					batch.Out[i].Float[row] = math.Sqrt(float64(i*batch.Rows+row)) * 1000
				}
			}
			sink := writers.NewCSV(src, table.Spec{Added: added, Codec: codec})
			out := writertest.NewOutput(b)
			if err := sink.Begin(out); err != nil {
				b.Fatal(err)
			}
			b.ReportAllocs()
			for b.Loop() {
				p, err := sink.Encode(c, &batch)
				if err != nil {
					b.Fatal(err)
				}
				b.SetBytes(int64(len(p.Parts[0])))
				out.Bytes = out.Bytes[:0]
				if err := sink.Append(p, c, &batch); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(batch.Rows*b.N)/b.Elapsed().Seconds(), "rows/s")
		})
	}
}
