// Package table holds what readers, workers and writers hand to one another:
// a [Schema], [Chunk]s of consecutive rows, the [Batch] that a worker fills,
// and the two interfaces that a file format implements, [Source] and [Sink].
//
// It knows no format and no science. readers/ implements Source, writers/
// implements Sink, pipeline/ drives both and never learns which format it has.
package table

import (
	"fmt"
	"math"
	"sort"
	"strings"

	"catenrich/internal/fault"
)

// A Type is what a column holds in its own file.
type Type uint8

// The types that matter to a reader of numbers. Float16 and Float32 are told
// apart from Float64 because a sentinel is rounded to the column's own type
// before it is compared.
const (
	Untyped Type = iota // text that may hold numbers: every CSV column
	Text
	Bool
	Integer
	Float16
	Float32
	Float64
	Decimal
	Other // lists, maps, timestamps, blobs: carried along, never read
)

// Numeric reports whether numbers can be asked of a column of type t.
func (t Type) Numeric() bool {
	switch t {
	case Untyped, Integer, Float16, Float32, Float64, Decimal:
		return true
	}
	return false
}

func (t Type) String() string {
	return [...]string{"untyped", "text", "boolean", "integer", "float16", "float32", "float64", "decimal", "other"}[t]
}

// A Field is one column, of an input or added to it.
type Field struct {
	Name string // as the file spells it; a leaf of a struct is named with dots
	Type Type
	Kind Kind // how a Batch holds it; for added columns only

	// For people and for other programs; empty where the file says nothing.
	Unit        string // VOUnits 1.1
	UCD         string // UCD list 1.6
	Description string
	Source      string // where the formula was published; added columns only
}

// Meaning is the description with its source, for a format that has one place
// for both.
func (f *Field) Meaning() string {
	if f.Source == "" {
		return f.Description
	}
	return f.Description + " (source: " + f.Source + ")"
}

// A Schema lists the columns of an input in file order.
type Schema struct {
	File   string // for messages
	Fields []Field
}

// Index finds the column called name, exactly. A name that is absent, or
// present twice, is an error that says what there is instead; setting is the
// key or flag that asked for the column.
func (s *Schema) Index(name, setting string) (int, error) {
	found := -1
	for i := range s.Fields {
		if s.Fields[i].Name != name {
			continue
		}
		if found >= 0 {
			return -1, fault.Data.Errorf("%s: the column %q (%s) stands more than once, as columns %d and %d: give them different names first",
				s.File, name, setting, found+1, i+1)
		}
		found = i
	}
	if found >= 0 {
		return found, nil
	}
	hint := "it has no columns at all"
	if len(s.Fields) > 0 {
		hint = "it has " + Quote(Nearest(name, s.Names(), 3))
	}
	return -1, fault.Data.Errorf("%s has no column %q (%s); %s: choose one with %s", s.File, name, setting, hint, setting)
}

// Names returns the names of all columns in file order.
func (s *Schema) Names() []string {
	names := make([]string, len(s.Fields))
	for i := range s.Fields {
		names[i] = s.Fields[i].Name
	}
	return names
}

// Clash returns the first name of added that the schema already has, compared
// without case, since many readers do not tell case apart; or "".
func (s *Schema) Clash(added []Field) string {
	have := make(map[string]bool, len(s.Fields))
	for i := range s.Fields {
		have[strings.ToLower(s.Fields[i].Name)] = true
	}
	for i := range added {
		if have[strings.ToLower(added[i].Name)] {
			return added[i].Name
		}
	}
	return ""
}

// Nearest returns up to n of names that may have been meant by name, blind to
// case: those that hold it first ("zspec" for "z"), each kind in order of edit
// distance; names at equal distance stay in their own order.
func Nearest(name string, names []string, n int) []string {
	type ranked struct {
		name     string
		holds    bool
		distance int
	}
	asked := strings.ToLower(name)
	all := make([]ranked, len(names))
	for i, s := range names {
		lower := strings.ToLower(s)
		all[i] = ranked{s, asked != "" && strings.Contains(lower, asked), editDistance(asked, lower)}
	}
	sort.SliceStable(all, func(i, j int) bool {
		if all[i].holds != all[j].holds {
			return all[i].holds
		}
		return all[i].distance < all[j].distance
	})
	near := make([]string, 0, n)
	for i := 0; i < len(all) && i < n; i++ {
		near = append(near, all[i].name)
	}
	return near
}

// editDistance counts the insertions, deletions and substitutions of bytes
// that turn a into b (Levenshtein 1966). Names longer than 64 bytes are cut: a
// hint is not worth more.
func editDistance(a, b string) int {
	a, b = a[:min(len(a), 64)], b[:min(len(b), 64)]
	row := make([]int, len(b)+1)
	for j := range row {
		row[j] = j
	}
	for i := range len(a) {
		diagonal := row[0]
		row[0] = i + 1
		for j := range len(b) {
			substitute := diagonal
			if a[i] != b[j] {
				substitute++
			}
			diagonal = row[j+1]
			row[j+1] = min(substitute, row[j]+1, row[j+1]+1)
		}
	}
	return row[len(b)]
}

// Quote lists names for a message: "a", "b" and "c".
func Quote(names []string) string {
	quoted := make([]string, len(names))
	for i, s := range names {
		quoted[i] = fmt.Sprintf("%q", s)
	}
	if n := len(quoted); n > 1 {
		return strings.Join(quoted[:n-1], ", ") + " and " + quoted[n-1]
	}
	return strings.Join(quoted, "")
}

// Round returns v as a column of type t would hold it, so that a sentinel
// written in decimal can be compared with what the file holds.
func (t Type) Round(v float64) float64 {
	switch t {
	case Float32:
		return float64(float32(v))
	case Float16:
		return roundHalf(v)
	}
	return v
}

// roundHalf rounds to the nearest IEEE 754 binary16, ties to even: 11
// significant bits, exponents from -14 (below it the spacing stays 2^-24).
func roundHalf(v float64) float64 {
	if v == 0 || math.IsNaN(v) || math.IsInf(v, 0) {
		return v
	}
	_, exponent := math.Frexp(v) // |v| in [2^(exponent-1), 2^exponent)
	unit := math.Ldexp(1, max(exponent-11, -24))
	rounded := math.RoundToEven(v/unit) * unit
	if math.Abs(rounded) > 65504 {
		return math.Inf(int(math.Copysign(1, v)))
	}
	return rounded
}
