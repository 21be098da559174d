package readers_test

import (
	"bytes"
	"context"
	"fmt"
	"io"
	"math"
	"os"
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
)

// csvText spells a table as text.
func csvText(tb readertest.Table) []byte {
	var b bytes.Buffer
	b.WriteString(strings.Join(tb.Names, ",") + "\n")
	for row := range tb.Rows() {
		for i := range tb.Columns {
			if i > 0 {
				b.WriteByte(',')
			}
			if v := tb.Columns[i][row]; v == v {
				b.WriteString(strconv.FormatFloat(v, 'g', -1, 64))
			}
		}
		b.WriteByte('\n')
	}
	return b.Bytes()
}

func gzipped(t testing.TB, members ...[]byte) []byte {
	var b bytes.Buffer
	for _, m := range members {
		z := gzip.NewWriter(&b)
		if _, err := z.Write(m); err != nil {
			t.Fatal(err)
		}
		z.Close()
	}
	return b.Bytes()
}

func zstandard(t testing.TB, frames ...[]byte) []byte {
	z, err := zstd.NewWriter(nil)
	if err != nil {
		t.Fatal(err)
	}
	var out []byte
	for _, f := range frames {
		out = z.EncodeAll(f, out)
	}
	return out
}

func TestSuite(t *testing.T) {
	pack := map[string]func([]byte) []byte{
		".csv":     func(p []byte) []byte { return p },
		".csv.gz":  func(p []byte) []byte { return gzipped(t, p[:len(p)/3], p[len(p)/3:]) },
		".csv.zst": func(p []byte) []byte { return zstandard(t, p[:len(p)/2], p[len(p)/2:]) },
	}
	for suffix, f := range pack {
		t.Run(suffix, func(t *testing.T) {
			readertest.Test(t, readertest.Format{
				Lines: true,
				Open: func(path string) (table.Source, error) {
					s, err := readers.OpenCSV(path, readers.CSVOptions{BlockSize: 64 << 10})
					if err != nil {
						return nil, err
					}
					return s, nil
				},
				Write: func(t testing.TB, dir string, tb readertest.Table) string {
					return writeFile(t, dir, "in"+suffix, f(csvText(tb)))
				},
			})
		})
	}
}

func writeFile(t testing.TB, dir, name string, content []byte) string {
	t.Helper()
	path := filepath.Join(dir, name)
	if err := os.WriteFile(path, content, 0o666); err != nil {
		t.Fatal(err)
	}
	return path
}

// A cell is a value with its state, spelled for comparison.
func cell(c *table.Column, row int) string {
	switch {
	case c.State[row] == table.Missing:
		return "missing"
	case c.State[row] == table.Malformed:
		return "malformed"
	case c.Kind == table.Bytes:
		return string(c.Bytes[row])
	}
	return strconv.FormatFloat(c.Float[row], 'g', -1, 64)
}

// readAll reads a text: its columns' names, then the cells of one of them in
// every row with their lines, then the rejects.
func readAll(text string, o readers.CSVOptions, column string, as table.Kind) (names, cells, rejects []string, err error) {
	s, err := readers.NewCSV("in.csv", io.NopCloser(strings.NewReader(text)), o)
	if err != nil {
		return nil, nil, nil, err
	}
	defer s.Close()
	names = s.Schema().Names()
	var wants []table.Want
	if column != "" {
		i, err := s.Schema().Index(column, "test")
		if err != nil {
			return names, nil, nil, err
		}
		wants = []table.Want{{Field: i, As: as}}
	}
	if err := s.Select(wants, nil); err != nil {
		return names, nil, nil, err
	}
	var b table.Batch
	for {
		c, err := s.Next(context.Background())
		if err == io.EOF {
			return names, cells, rejects, nil
		}
		if err != nil {
			return names, cells, rejects, err
		}
		if err := s.Decode(c, &b); err != nil {
			return names, cells, rejects, err
		}
		for row := range b.Rows {
			if wants == nil {
				cells = append(cells, strconv.FormatInt(b.Marks[row], 10))
			} else {
				cells = append(cells, fmt.Sprintf("%d:%s", b.Marks[row], cell(&b.In[0], row)))
			}
		}
		for _, r := range b.Rejects {
			rejects = append(rejects, fmt.Sprintf("%d@%d:%s", r.Line, r.Offset, r.Record))
		}
		s.Release(c)
	}
}

func TestReading(t *testing.T) {
	commented := readers.CSVOptions{Header: readers.HeaderCommented, HeaderDelimiter: '\t'}
	for _, c := range []struct {
		name    string
		text    string
		options readers.CSVOptions
		column  string
		as      table.Kind
		names   string // joined by |
		cells   string // joined by |, each with its line
		rejects string // joined by |, each line@offset:record
	}{
		{name: "plain", text: "a,z\nx,0.5\ny,1\n", column: "z", names: "a|z", cells: "2:0.5|3:1"},
		{name: "no final newline", text: "a,z\nx,0.5\ny,1", column: "z", names: "a|z", cells: "2:0.5|3:1"},
		{name: "header alone", text: "a,z\n", column: "z", names: "a|z"},
		{name: "header alone, no newline", text: "a,z", column: "z", names: "a|z"},
		{name: "CRLF", text: "a,z\r\nx,0.5\r\ny,1\r\n", column: "z", names: "a|z", cells: "2:0.5|3:1"},
		{name: "CR", text: "a,z\rx,0.5\ry,1\r", column: "z", names: "a|z", cells: "2:0.5|3:1"},
		{name: "mixed line ends", text: "a,z\r\nx,0.5\ny,1\rw,2", column: "z", names: "a|z", cells: "2:0.5|3:1|4:2"},
		{name: "byte order mark", text: "\ufeffz,a\n0.5,x\n", column: "z", names: "z|a", cells: "2:0.5"},
		{name: "byte order mark, no header", text: "\ufeff0.5,x\n", options: readers.CSVOptions{Header: readers.HeaderNone}, column: "1", names: "1|2", cells: "1:0.5"},
		{name: "blanks around names and numbers", text: " a ,\t z \n x ,  0.5\t\n", column: "z", names: "a|z", cells: "2:0.5"},
		{name: "quotes", text: "\"a\",\"z\"\n\"x,\"\"y\"\"\n\",\"0.5\"\nw,2\n", column: "z", names: "a|z", cells: "2:0.5|4:2"},
		{name: "quoted text", text: "a,z\n\"x,\"\"y\"\"\n\",1\n", column: "a", as: table.Bytes, names: "a|z", cells: "2:x,\"y\"\n"},
		{name: "a quote within a field", text: "a,z\n5\" disc,0.5\n", column: "z", names: "a|z", cells: "2:0.5"},
		{name: "text after a quote", text: "a,z\n\"x\"y,0.5\nw,1\n", column: "z", names: "a|z", cells: "3:1", rejects: `2@4:"x"y,0.5`},
		{name: "no quotes", text: "a,z\n\"x,0.5\n", options: readers.CSVOptions{NoQuote: true}, column: "z", names: "a|z", cells: "2:0.5"},
		{name: "ragged", text: "a,z\nx\ny,1\nw,1,2\n", column: "z", names: "a|z", cells: "3:1", rejects: "2@4:x|4@10:w,1,2"},
		{name: "blank lines", text: "\n a,z\n\n  \nx,0.5\n\t\n\n", column: "z", names: "a|z", cells: "5:0.5"},
		{name: "a tab is a field where tabs delimit", text: "a\tz\n\t\n \n", options: readers.CSVOptions{Delimiter: '\t'}, column: "z", names: "a|z", cells: "2:missing"},
		{name: "comments", text: "# one\na,z\nx,0.5\n# \"two\ny,1\n#", options: readers.CSVOptions{Comment: "#"}, column: "z", names: "a|z", cells: "3:0.5|5:1"},
		{name: "a comment sign within quotes", text: "a,z\n\"x\n# y\",1\n", options: readers.CSVOptions{Comment: "#"}, column: "z", names: "a|z", cells: "2:1"},
		{name: "header behind a sign, other delimiter", text: "# by hand\n# a \t z\nx,0.5\n", options: commented, column: "z", names: "a|z", cells: "3:0.5"},
		{name: "header behind a sign, no records", text: "#a\tz\n", options: commented, column: "z", names: "a|z"},
		{name: "comments after the first record are no header", text: "#a\tz\nx,1\n#b\n", options: commented, column: "z", names: "a|z", cells: "2:1"},
		{name: "space-aligned", text: "  a   z\n  x 0.5\n\"y w\"\t1  \n  # no\n", options: readers.CSVOptions{Delimiter: ' '}, column: "z", names: "a|z", cells: "2:0.5|3:1|4:malformed"},
		{name: "space-aligned behind a sign", text: "# a z\n 1 nan\n", options: readers.CSVOptions{Delimiter: ' ', Header: readers.HeaderCommented}, column: "z", names: "a|z", cells: "2:missing"},
		{name: "semicolons and names given", text: "a;z\nx;1\n", options: readers.CSVOptions{Delimiter: ';', Names: []string{"id", "red"}}, column: "red", names: "id|red", cells: "2:1"},
		{name: "no header, names given", text: "x|1\n", options: readers.CSVOptions{Delimiter: '|', Header: readers.HeaderNone, Names: []string{"id", "z"}}, column: "z", names: "id|z", cells: "1:1"},
		{name: "no header, no records", text: "\n", options: readers.CSVOptions{Header: readers.HeaderNone, Names: []string{"z"}}, column: "z", names: "z"},
		{name: "states", text: "z\n1D2\nNaN\nx\n-inf\n1e999\n\"\"\n", column: "z", names: "z", cells: "2:100|3:missing|4:malformed|5:malformed|6:malformed|7:missing"},
		{name: "a repeated name nobody asks for", text: "a,a,z\n1,2,3\n", column: "z", names: "a|a|z", cells: "2:3"},
		{name: "NUL and invalid UTF-8 elsewhere", text: "a,z\n\x00\xff\xfe,2\n", column: "z", names: "a|z", cells: "2:2"},
		{name: "a CR before CRLF ends a blank line", text: "z\r\r\n1\r\r\n2\r\r\n", column: "z", names: "z", cells: "3:1|5:2"},
	} {
		t.Run(c.name, func(t *testing.T) {
			for _, size := range []int{0, 1, 2, 3, 5, 8, 13} {
				c.options.BlockSize = size
				names, cells, rejects, err := readAll(c.text, c.options, c.column, c.as)
				if err != nil {
					t.Fatal(err)
				}
				for _, x := range [][2]string{{strings.Join(names, "|"), c.names}, {strings.Join(cells, "|"), c.cells}, {strings.Join(rejects, "|"), c.rejects}} {
					if x[0] != x[1] {
						t.Errorf("blocks of %d: got %q, want %q", size, x[0], x[1])
					}
				}
			}
		})
	}
}

func TestRefusals(t *testing.T) {
	for _, c := range []struct {
		name, text string
		options    readers.CSVOptions
		class      fault.Class
		want       string // within the message
	}{
		{"empty", "", readers.CSVOptions{}, fault.Data, "is empty"},
		{"only blanks", "\n\n", readers.CSVOptions{}, fault.Data, "no header"},
		{"only comments", "#\n", readers.CSVOptions{Comment: "#"}, fault.Data, "no header"},
		{"a byte order mark alone", "\ufeff", readers.CSVOptions{}, fault.Data, "no header"},
		{"no commented header", "a,z\n", readers.CSVOptions{Header: readers.HeaderCommented}, fault.Data, `no line begins with "#"`},
		{"UTF-16", "\xff\xfea\x00", readers.CSVOptions{}, fault.Data, "UTF-16"},
		{"open quote", "a,z\nx,1\n\ny,\"1\n2\n3\n", readers.CSVOptions{}, fault.Data, "in.csv:4: a quote opens here"},
		{"open quote behind a field with lines", "a,z\n\"x\ny\",\"1\n2\n3\n", readers.CSVOptions{}, fault.Data, "in.csv:3: a quote opens here"},
		{"open quote in the header", "a\n,\"z\n", readers.CSVOptions{Comment: "#"}, fault.Data, "in.csv:2: a quote opens here"},
		{"text after a quote in the header", "\"a\"b,c\n", readers.CSVOptions{}, fault.Data, "header cannot be split"},
		{"too few names", "a,b\n", readers.CSVOptions{Names: []string{"x"}}, fault.Data, "1 names are given"},
		{"too many names", "1,2\n", readers.CSVOptions{Header: readers.HeaderNone, Names: []string{"x", "y", "z"}}, fault.Data, "3 names are given"},
		{"no names, no records", "\n", readers.CSVOptions{Header: readers.HeaderNone}, fault.Data, "input.csv.names"},
		{"a digit as delimiter", "a\n", readers.CSVOptions{Delimiter: '1'}, fault.Config, "cannot stand in a number"},
	} {
		t.Run(c.name, func(t *testing.T) {
			for _, size := range []int{0, 1, 4} {
				c.options.BlockSize = size
				_, _, _, err := readAll(c.text, c.options, "", 0)
				if err == nil || fault.Of(err) != c.class || !strings.Contains(err.Error(), c.want) {
					t.Errorf("blocks of %d: class %d, %v, want class %d, …%s…", size, fault.Of(err), err, c.class, c.want)
				}
			}
		})
	}
}

// TestRowsBeforeAnOpenQuote: the error is of the file, and comes in its place.
func TestRowsBeforeAnOpenQuote(t *testing.T) {
	_, cells, _, err := readAll("z\n1\n2\n\"3\n4\n", readers.CSVOptions{}, "z", table.Float)
	if got := strings.Join(cells, "|"); got != "2:1|3:2" || err == nil {
		t.Errorf("%s and %v, want 2:1|3:2 and an error", got, err)
	}
}

// oneByOne hands out a byte at a time: the chunks must not depend on it.
type oneByOne struct{ io.Reader }

func (r oneByOne) Read(p []byte) (int, error) { return r.Reader.Read(p[:1]) }
func (oneByOne) Close() error                 { return nil }

func TestChunksDoNotDependOnReads(t *testing.T) {
	text := string(csvText(readertest.Random(400, 5)))
	chunks := func(r io.ReadCloser) (places []string) {
		s, err := readers.NewCSV("in", r, readers.CSVOptions{BlockSize: 1000})
		if err != nil {
			t.Fatal(err)
		}
		defer s.Close()
		for {
			c, err := s.Next(context.Background())
			if err == io.EOF {
				return places
			}
			if err != nil {
				t.Fatal(err)
			}
			places = append(places, fmt.Sprint(c.Seq, c.Offset, c.Line, len(c.Raw)))
			if got := text[c.Offset : c.Offset+int64(len(c.Raw))]; got != string(c.Raw) {
				t.Fatalf("chunk %d holds %q, want %q", c.Seq, c.Raw, got)
			}
		}
	}
	whole, single := chunks(io.NopCloser(strings.NewReader(text))), chunks(oneByOne{strings.NewReader(text)})
	if fmt.Sprint(whole) != fmt.Sprint(single) || len(whole) < 10 {
		t.Errorf("%q\nread by single bytes: %q", whole, single)
	}
}

func TestCellErrors(t *testing.T) {
	long := strings.Repeat("x", 1000)
	s, err := readers.NewCSV("quillridge.csv", io.NopCloser(strings.NewReader("id,z\na,1\nb,0.4.1\n\nc,"+long+"\nd,1e999\n")), readers.CSVOptions{})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	s.Select([]table.Want{{Field: 1, As: table.Float}}, nil)
	c, err := s.Next(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	var b table.Batch
	if err := s.Decode(c, &b); err != nil {
		t.Fatal(err)
	}
	want := []string{
		`quillridge.csv:3: row 2, column "z": value "0.4.1": not a number (row kept, derived columns left empty)`,
		`quillridge.csv:5: row 3, column "z": value "` + long[:80] + `…": not a number (row kept, derived columns left empty)`,
		`quillridge.csv:6: row 4, column "z": value "1e999": beyond the range of numbers (row kept, derived columns left empty)`,
	}
	if len(b.Cells) != len(want) {
		t.Fatalf("%d messages, want %d", len(b.Cells), len(want))
	}
	for i := range want {
		if got := b.Cells[i].Error(); got != want[i] {
			t.Errorf("got  %s\nwant %s", got, want[i])
		}
	}
}

// TestEventCatalogue reads an open catalogue as it is published.
func TestEventCatalogue(t *testing.T) {
	s, err := readers.OpenCSV("../testdata/catalogues/gw-events.txt", readers.CSVOptions{Header: readers.HeaderCommented, HeaderDelimiter: '\t'})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	rows, sum := readColumn(t, s, "redshift")
	if rows != 57 || !(sum > 5 && sum < 57) {
		t.Errorf("%d redshifts with sum %g, want the 57 of the catalogue", rows, sum)
	}
}

func TestNebulae(t *testing.T) {
	s, err := readers.OpenCSV("../testdata/catalogues/nebulae-and-galaxies.csv.gz", readers.CSVOptions{Delimiter: ';'})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	i, err := s.Schema().Index("Redshift", "test")
	if err != nil {
		t.Fatal(err)
	}
	if err := s.Select([]table.Want{{Field: i, As: table.Float}}, nil); err != nil {
		t.Fatal(err)
	}
	var b table.Batch
	rows, missing, negative := 0, 0, 0
	for {
		c, err := s.Next(context.Background())
		if err == io.EOF {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		if err := s.Decode(c, &b); err != nil || len(b.Rejects) > 0 {
			t.Fatal(err, b.Rejects)
		}
		for row := range b.Rows {
			switch {
			case b.In[0].State[row] == table.Missing:
				missing++
			case b.In[0].Float[row] < 0:
				negative++
			}
		}
		rows += b.Rows
		s.Release(c)
	}
	// The counts stand in testdata/catalogues/README.md.
	if rows != 13969 || missing != 3386 || negative != 370 {
		t.Errorf("%d rows, %d missing, %d negative, want 13969, 3386, 370", rows, missing, negative)
	}
}

func readColumn(t *testing.T, s *readers.CSV, column string) (rows int, sum float64) {
	t.Helper()
	i, err := s.Schema().Index(column, "test")
	if err != nil {
		t.Fatal(err)
	}
	if err := s.Select([]table.Want{{Field: i, As: table.Float}}, nil); err != nil {
		t.Fatal(err)
	}
	var b table.Batch
	for {
		c, err := s.Next(context.Background())
		if err == io.EOF {
			return rows, sum
		}
		if err != nil {
			t.Fatal(err)
		}
		if err := s.Decode(c, &b); err != nil {
			t.Fatal(err)
		}
		for row := range b.Rows {
			if v := b.In[0].Float[row]; !math.IsNaN(v) {
				rows++
				sum += v
			}
		}
		s.Release(c)
	}
}

func FuzzCSV(f *testing.F) {
	f.Add("a,z\nx,0.5\n\"y\n\",1", uint8(0), uint8(3))
	f.Add("#a z\n 1 2\r", uint8(4), uint8(2))
	f.Fuzz(func(t *testing.T, text string, dialect, block uint8) {
		o := []readers.CSVOptions{{}, {Comment: "#"}, {NoQuote: true}, {Header: readers.HeaderNone}, {Delimiter: ' ', Header: readers.HeaderCommented}}[int(dialect)%5]
		names, cells, rejects, err := readAll(text, o, "", 0)
		o.BlockSize = 1 + int(block)
		names2, cells2, rejects2, err2 := readAll(text, o, "", 0)
		a, b := fmt.Sprintf("%q %q %q %v", names, cells, rejects, err), fmt.Sprintf("%q %q %q %v", names2, cells2, rejects2, err2)
		if a != b {
			t.Errorf("%s\nin blocks of %d: %s", a, o.BlockSize, b)
		}
	})
}

func BenchmarkReading(b *testing.B) {
	text := csvText(readertest.Random(100_000, 10))
	path := writeFile(b, b.TempDir(), "in.csv", text)
	for _, column := range []int{0, 3, 9} {
		b.Run(fmt.Sprintf("column=%d", column), func(b *testing.B) {
			b.SetBytes(int64(len(text)))
			b.ReportAllocs()
			var batch table.Batch
			rows := 0
			for b.Loop() {
				s, err := readers.OpenCSV(path, readers.CSVOptions{})
				if err != nil {
					b.Fatal(err)
				}
				s.Select([]table.Want{{Field: column, As: table.Float}}, nil)
				for {
					c, err := s.Next(context.Background())
					if err == io.EOF {
						break
					}
					if err := s.Decode(c, &batch); err != nil {
						b.Fatal(err)
					}
					rows += batch.Rows
					s.Release(c)
				}
				s.Close()
			}
			b.ReportMetric(float64(rows)/b.Elapsed().Seconds(), "rows/s")
		})
	}
}
