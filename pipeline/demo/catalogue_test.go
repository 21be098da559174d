package demo

import (
	"bufio"
	"encoding/csv"
	"errors"
	"io"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"testing"
)

// A row is a record of the default survey with the truth about it.
type row struct{ seen, true map[string]string }

// number reads a cell of the catalogue; NaN for a missing value, the sentinel
// -99 included.
func (r row) number(column string) float64 {
	v, err := strconv.ParseFloat(r.seen[column], 64)
	if err != nil || v == -99 {
		return math.NaN()
	}
	return v
}

func (r row) fact(column string) float64 {
	v, err := strconv.ParseFloat(r.true[column], 64)
	if err != nil {
		return math.NaN()
	}
	return v
}

// good says that the row has a reliable redshift of a source that expands, and
// nothing else is wrong with it.
func (r row) good(field string) bool {
	return r.seen["field"] == field && r.true["defect"] == "" && r.fact("z_cos") > 0 &&
		(r.seen["zflag"] == "3" || r.seen["zflag"] == "4")
}

type defaultSurvey struct {
	rows   []row
	broken [][]string
	header string // of the truth
}

// theSurvey writes and reads the default survey once for all tests.
var theSurvey = sync.OnceValues(func() (*defaultSurvey, error) {
	dir, err := os.MkdirTemp("", "quillridge")
	if err != nil {
		return nil, err
	}
	defer os.RemoveAll(dir)
	if _, err := Write(dir, Options{}); err != nil {
		return nil, err
	}
	header, truths, err := readTruth(join(dir, Truth))
	if err != nil {
		return nil, err
	}
	s := &defaultSurvey{header: header}
	return s, s.readCatalogue(filepath.Join(dir, Catalogue), truths)
})

func survey20k(t *testing.T) *defaultSurvey {
	t.Helper()
	s, err := theSurvey()
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func readTruth(path string) (header string, truths map[string]map[string]string, err error) {
	f, err := os.Open(path)
	if err != nil {
		return "", nil, err
	}
	defer f.Close()
	b := bufio.NewReader(f)
	for {
		if c, err := b.Peek(1); err != nil || c[0] != '#' {
			break
		}
		line, _ := b.ReadString('\n')
		header += line
	}
	truths = make(map[string]map[string]string)
	return header, truths, readRecords(b, func(names, fields []string) error {
		if len(names) != len(fields) {
			return errors.New("a broken record in the truth")
		}
		truths[fields[0]] = asMap(names, fields)
		return nil
	})
}

func (s *defaultSurvey) readCatalogue(path string, truths map[string]map[string]string) error {
	f, err := os.Open(path)
	if err != nil {
		return err
	}
	defer f.Close()
	return readRecords(f, func(names, fields []string) error {
		if len(fields) != len(names) {
			s.broken = append(s.broken, fields)
			return nil
		}
		r := row{asMap(names, fields), truths[fields[0]]}
		if r.true == nil {
			return errors.New("the truth does not know " + fields[0])
		}
		s.rows = append(s.rows, r)
		return nil
	})
}

// readRecords reads CSV by encoding/csv, which knows nothing of our reader.
func readRecords(r io.Reader, each func(names, fields []string) error) error {
	in := csv.NewReader(r)
	in.FieldsPerRecord = -1
	names, err := in.Read()
	for err == nil {
		var fields []string
		if fields, err = in.Read(); err == nil {
			err = each(names, fields)
		}
	}
	if err == io.EOF {
		return nil
	}
	return err
}

func asMap(names, fields []string) map[string]string {
	m := make(map[string]string, len(names))
	for i, name := range names {
		m[name] = fields[i]
	}
	return m
}

// TestDefects counts in the catalogue alone what README.txt says is wrong.
func TestDefects(t *testing.T) {
	s := survey20k(t)
	is := func(column string, texts ...string) func(row) bool {
		return func(r row) bool {
			for _, x := range texts {
				if r.seen[column] == x {
					return true
				}
			}
			return false
		}
	}
	for _, c := range []struct {
		name string
		want int
		has  func(r row) bool
	}{
		{"negative redshifts", 120, func(r row) bool { z := r.number("z_best"); return z < 0 && z > -1 }},
		{"stars", 100, is("template", "star")},
		{"z_best empty", 60, is("z_best", "")},
		{"z_best -99", 80, is("z_best", "-99")},
		{"z_best NaN", 20, is("z_best", "NaN")},
		{"z_best zero", 12, is("z_best", "0")},
		{"z_best above 12", 6, func(r row) bool { return r.number("z_best") > 12 }},
		{"z_best text", 5, is("z_best", "0.4.1", "1.2e", "??", "see note", "0,31")},
		{"z_best -9", 5, is("z_best", "-9")},
		{"mag_r -99", 200, is("mag_r", "-99")},
		{"mag_g empty", 150, is("mag_g", "")},
		{"flux_i NaN", 60, is("flux_i", "NaN")},
		{"flux_i negative", 40, func(r row) bool { return r.number("flux_i") < 0 }},
		{"magerr_r -99 alone", 50, func(r row) bool { return r.seen["magerr_r"] == "-99" && r.seen["mag_r"] != "-99" }},
		{"template empty", 40, is("template", "")},
		{"ebv empty", 30, is("ebv", "")},
		{"z_err empty alone", 30, func(r row) bool { return r.seen["z_err"] == "" && r.seen["z_lower"] != "" }},
		{"positions empty", 6, func(r row) bool { return r.seen["ra"] == "" && r.seen["dec"] == "" }},
		{"positions out of range", 3, func(r row) bool { return r.number("dec") > 90 }},
		{"quantiles reversed", 25, func(r row) bool { return r.number("z_lower") > r.number("z_upper") }},
	} {
		n := 0
		for _, r := range s.rows {
			if c.has(r) {
				n++
			}
		}
		if n != c.want {
			t.Errorf("%s: %d rows, README.txt says %d", c.name, n, c.want)
		}
	}
	short, long := 0, 0
	for _, fields := range s.broken {
		if len(fields) < columnCount {
			short++
		} else {
			long++
		}
	}
	if short != 4 || long != 3 || len(s.rows)+len(s.broken) != DefaultRows {
		t.Errorf("%d rows, %d short and %d long records; want 4 and 3 of %d", len(s.rows), short, long, DefaultRows)
	}
}

// TestTruthHeader holds that the counts in the truth's header are those of the
// rows, at the default size and at another.
func TestTruthHeader(t *testing.T) {
	for _, rows := range []int{2000, 50000} {
		dir := t.TempDir()
		if _, err := Write(dir, Options{Rows: rows}); err != nil {
			t.Fatal(err)
		}
		header, truths, err := readTruth(join(dir, Truth))
		if err != nil {
			t.Fatal(err)
		}
		if len(truths) != rows {
			t.Errorf("%d distinct objects in the truth, want %d", len(truths), rows)
		}
		counts := make(map[string]int)
		for _, f := range truths {
			counts[f["defect"]]++
		}
		for _, d := range defects[1:] {
			if line := "#   " + d.name + ": " + strconv.Itoa(counts[d.name]) + ": "; counts[d.name] == 0 || !strings.Contains(header, line) {
				t.Errorf("%d rows: the truth has %d of %s; its header:\n%s", rows, counts[d.name], d.name, header)
			}
		}
	}
}

// TestShape holds what a reader of the catalogue relies on.
func TestShape(t *testing.T) {
	s := survey20k(t)
	far, lines, quotes := 0, 0, 0
	for _, r := range s.rows {
		if id := r.seen["object_id"]; len(id) != 19 || strings.Trim(id, "0123456789") != "" {
			t.Fatalf("object_id %q: want 19 digits", id)
		}
		if r.good("deep") && r.number("z_best") > 1.9 {
			far++
		}
		if strings.Contains(r.seen["remarks"], "\n") {
			lines++
		}
		if strings.Contains(r.seen["remarks"], `"`) {
			quotes++
		}
	}
	// planck2018's event horizon is at z = 1.8 (Davis & Lineweaver 2004, for a similar model; from memory).
	if far < 500 || lines < 20 || quotes < 20 {
		t.Errorf("%d rows beyond z = 1.9, %d remarks with a line break, %d with quotes: want at least 500, 20, 20", far, lines, quotes)
	}
}
