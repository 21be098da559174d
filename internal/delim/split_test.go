package delim

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"
)

// A line of text as the tests see it: its place, and its fields if it is a
// record that can be split.
type parsedLine struct {
	start, end, next int
	fields           []string // nil for blanks and comments
	bad              bool
}

// parse walks text with the code under test.
func parse(d *Dialect, text []byte) (lines []parsedLine) {
	l := d.Lines(text)
	for pos := 0; pos < len(text); {
		end, next := l.Next(pos)
		p := parsedLine{start: pos, end: end, next: next}
		if line := text[pos:end]; !d.IsBlank(line) && !d.IsComment(line) {
			n, err := d.Locate(line, l.Quotes(), nil)
			at := make([]Span, n)
			d.Locate(line, l.Quotes(), at)
			p.bad = err != nil
			p.fields = []string{}
			for _, f := range at {
				p.fields = append(p.fields, string(d.Value(line[f.Start:f.End])))
			}
		}
		lines = append(lines, p)
		pos = next
	}
	return lines
}

// parsePlainly is the judge: the same by one state machine that looks at every
// byte once. open is the place of a quote that is not closed, or -1.
func parsePlainly(d *Dialect, text []byte) (lines []parsedLine, open int) {
	i := 0
	for i < len(text) {
		p := parsedLine{start: i}
		comment := d.IsComment(text[i:])
		inQuotes, afterQuotes, fresh, quotedAt := false, false, true, 0
		var fields []string
		var field []byte
		flush := func() {
			if d.aligned() && fresh && !afterQuotes {
				return
			}
			fields = append(fields, strings.Trim(string(field), " \t"))
			field, afterQuotes, fresh = nil, false, true
		}
		for ; i < len(text); i++ {
			c := text[i]
			if inQuotes {
				if c != '"' {
					field = append(field, c)
				} else if i+1 < len(text) && text[i+1] == '"' {
					field = append(field, c)
					i++
				} else {
					inQuotes, afterQuotes = false, true
				}
				continue
			}
			if c == '\n' || c == '\r' {
				break
			}
			separates := c == d.Delimiter || d.aligned() && c == '\t'
			switch {
			case separates:
				flush()
			case c == '"' && d.Quote && !comment && fresh && !afterQuotes:
				inQuotes, fresh, quotedAt = true, false, i
			case afterQuotes:
				if c != ' ' && c != '\t' {
					p.bad = true
				}
			default:
				field = append(field, c)
				fresh = false
			}
		}
		if inQuotes {
			return lines, quotedAt
		}
		flush()
		p.end = i
		if i < len(text) {
			i++
			if text[i-1] == '\r' && i < len(text) && text[i] == '\n' {
				i++
			}
		}
		p.next = i
		if line := text[p.start:p.end]; comment || d.IsBlank(line) {
			p.bad = false
		} else {
			p.fields = append([]string{}, fields...)
		}
		lines = append(lines, p)
	}
	return lines, -1
}

// checkSplit compares the code under test with the judge, whole and by blocks.
func checkSplit(t *testing.T, d *Dialect, text []byte) {
	t.Helper()
	want, wantOpen := parsePlainly(d, text)
	n, open := d.Cut(text, true)
	if open != wantOpen {
		t.Fatalf("%+v %q: the open quote is at %d, want %d", *d, text, open, wantOpen)
	}
	if open < 0 && n != len(text) {
		t.Fatalf("%+v %q: cut at %d of %d", *d, text, n, len(text))
	}
	if open >= 0 && len(want) > 0 && n != want[len(want)-1].next {
		t.Fatalf("%+v %q: cut at %d before the open quote, want %d", *d, text, n, want[len(want)-1].next)
	}
	got := parse(d, text[:n])
	for i := range got {
		if i >= len(want) || !sameLine(got[i], want[i]) {
			t.Fatalf("%+v %q: line %d is %+v, want %+v", *d, text, i, got[i], want[min(i, len(want)-1)])
		}
	}
	if len(got) != len(want) {
		t.Fatalf("%+v %q: %d lines, want %d", *d, text, len(got), len(want))
	}
	for size := 1; size <= len(text)+1; size = size*2 + 1 {
		if blocks := parseInBlocks(d, text, size); !reflect.DeepEqual(blocks, got) && len(got) > 0 {
			t.Fatalf("%+v %q in blocks of %d: %+v, want %+v", *d, text, size, blocks, got)
		}
	}
}

func sameLine(a, b parsedLine) bool {
	if a.bad != b.bad || a.start != b.start || a.end != b.end || a.next != b.next || (a.fields == nil) != (b.fields == nil) {
		return false
	}
	return a.bad || fmt.Sprintf("%q", a.fields) == fmt.Sprintf("%q", b.fields)
}

// parseInBlocks cuts text as a reader does, and parses piece by piece.
func parseInBlocks(d *Dialect, text []byte, size int) (lines []parsedLine) {
	ends := 0
	for pos := 0; pos < len(text); {
		n := 0
		for take := size; ; take *= 2 {
			part := text[pos:min(pos+take, len(text))]
			all := pos+take > len(text)
			if n, _ = d.Cut(part, all); n > 0 || all {
				break
			}
		}
		if n == 0 {
			break
		}
		for _, p := range parse(d, text[pos:pos+n]) {
			p.start, p.end, p.next = p.start+pos, p.end+pos, p.next+pos
			lines = append(lines, p)
		}
		ends += CountLineEnds(text[pos : pos+n])
		pos += n
	}
	if whole := CountLineEnds(text); len(lines) > 0 && lines[len(lines)-1].next == len(text) && ends != whole {
		return nil
	}
	return lines
}

var dialects = []Dialect{
	{Delimiter: ',', Quote: true},
	{Delimiter: ',', Quote: true, Comment: "#"},
	{Delimiter: ';', Comment: "//"},
	{Delimiter: '\t', Quote: true},
	{Delimiter: ' ', Quote: true, Comment: "#"},
	{Delimiter: ' '},
}

func TestSplitCases(t *testing.T) {
	for _, text := range []string{
		"", "a", "a,b\n", "a,b\r\nc,d\r\n", "a,b\rc,d\r", "a\nb\r\nc\rd", "\r\r\n\n", "a,\"b\nc\",d\n",
		"\"a\"\"b\",c\n", "a,\"b", "a,b\"c\nd,e\n", "a, \"b\nc\"\n", "#\"x\na,b\n", "a,b\n#\"\n\"#\n\",c\n",
		"\"a\"x,b\n", "\"a\" ,b\n", "\"\",\"\"\n", "  \n\t\n , \n", "a\tb\t\"c\td\"\n", "a  \"b c\"\t d \n",
		"a,b\r", "a,\"b\r\n\"\r\n", "a\x00b,\xff\xfe\n", ",\n,,\n", "\"a\n", "x\n\"a\nb\nc", "\"\r\",\"\n\"\r", "#", "/", "//;\n;/\n",
	} {
		for i := range dialects {
			checkSplit(t, &dialects[i], []byte(text))
		}
	}
}

func TestSplitRandomText(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	const alphabet = "ab1,;\t  \"\"\n\n\r#/\x00\xff"
	for range 60_000 {
		text := make([]byte, r.IntN(40))
		for i := range text {
			text[i] = alphabet[r.IntN(len(alphabet))]
		}
		checkSplit(t, &dialects[r.IntN(len(dialects))], text)
	}
}

func FuzzSplit(f *testing.F) {
	f.Add([]byte("a,\"b\nc\"\r\n#x\n"), uint8(1))
	f.Add([]byte("a  b\rc \"d e\"\n"), uint8(4))
	f.Fuzz(func(t *testing.T, text []byte, which uint8) {
		if len(text) > 2000 {
			return // every size of block is tried: long texts say no more
		}
		checkSplit(t, &dialects[int(which)%len(dialects)], text)
	})
}

// TestEncodingCSVAgrees has the standard library write records, and read them
// again: on well-formed input there is one right answer.
func TestEncodingCSVAgrees(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 9))
	d := &Dialect{Delimiter: ',', Quote: true}
	words := []string{"", "x", "0.5", "a,b", "a\"b", "two\nlines", "\"", "é", "#", ",\n\""}
	for range 2000 {
		var b bytes.Buffer
		w := csv.NewWriter(&b)
		w.UseCRLF = r.IntN(2) == 0
		columns := 2 + r.IntN(5)
		for range 1 + r.IntN(5) {
			record := make([]string, columns)
			for i := range record {
				record[i] = words[r.IntN(len(words))]
			}
			w.Write(record)
		}
		w.Flush()
		want, err := csv.NewReader(bytes.NewReader(b.Bytes())).ReadAll()
		if err != nil {
			t.Fatal(err)
		}
		var got [][]string
		for _, line := range parse(d, b.Bytes()) {
			for i := range line.fields { // encoding/csv turns CRLF within quotes into LF
				line.fields[i] = strings.ReplaceAll(line.fields[i], "\r\n", "\n")
			}
			got = append(got, line.fields)
		}
		if !reflect.DeepEqual(got, want) {
			t.Fatalf("%q: %q, encoding/csv has %q", b.Bytes(), got, want)
		}
	}
}

func TestAppendFieldReadsBack(t *testing.T) {
	for i := range dialects {
		d := &dialects[i]
		for _, value := range []string{"x", "a,b", "a;b", "a b", "a\tb", "#x", "//", "q\"q", "\"q\"", "l\nl", "l\rl", ""} {
			record, ok := d.AppendField(nil, []byte(value))
			if !ok {
				if d.Quote {
					t.Errorf("%+v: %q was refused", *d, value)
				}
				continue
			}
			record = append(append(record, d.Delimiter), 'z')
			if value == "" && d.Delimiter == ' ' && !d.Quote {
				continue
			}
			lines := parse(d, record)
			if len(lines) != 1 || len(lines[0].fields) != 2 || lines[0].fields[0] != value {
				t.Errorf("%+v: %q was written as %q and read as %+v", *d, value, record, lines)
			}
		}
	}
}

func TestDialectValidate(t *testing.T) {
	for _, d := range []Dialect{{Delimiter: '"'}, {Delimiter: '\n'}, {Delimiter: '5'}, {Delimiter: 'e'}, {Delimiter: '-'},
		{Delimiter: 0xe9}, {Delimiter: ',', Comment: "\n"}, {Delimiter: ',', Comment: "\""}, {Delimiter: ',', Comment: " #"}} {
		if d.Validate() == nil {
			t.Errorf("%+v was accepted", d)
		}
	}
	for i := range dialects {
		if err := dialects[i].Validate(); err != nil {
			t.Error(err)
		}
	}
}

func BenchmarkSplit(b *testing.B) {
	d := &Dialect{Delimiter: ',', Quote: true}
	for _, c := range []struct{ name, record string }{
		{"plain", "QR123456,150.1234567,2.2345678,0.523456,0.0012,21.3456,20.1234,0.0213,3,abc\n"},
		{"quoted", "QR123456,150.1234567,2.2345678,0.523456,0.0012,21.3456,20.1234,0.0213,3,\"a,c\"\n"},
	} {
		text := bytes.Repeat([]byte(c.record), 1<<20/len(c.record))
		b.Run("cut/"+c.name, func(b *testing.B) {
			b.SetBytes(int64(len(text)))
			for b.Loop() {
				d.Cut(text[:len(text)-5], false)
			}
		})
		b.Run("locate4/"+c.name, func(b *testing.B) {
			b.SetBytes(int64(len(text)))
			at := make([]Span, 4)
			rows := 0
			for b.Loop() {
				l := d.Lines(text)
				for pos := 0; pos < len(text); {
					end, next := l.Next(pos)
					d.Locate(text[pos:end], l.Quotes(), at)
					pos = next
					rows++
				}
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(rows), "ns/row")
		})
	}
}
