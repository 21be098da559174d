package job

import (
	"bytes"
	"errors"
	"fmt"
	"reflect"
	"regexp"
	"strings"

	"github.com/pelletier/go-toml/v2"
	"github.com/pelletier/go-toml/v2/unstable"

	"catenrich/internal/fault"
	"catenrich/internal/table"
)

// Parse reads a job file. name is its path, for messages and for the paths in
// it. An unknown key, a wrong type or bad syntax is an error with line and
// column; what the keys say is judged later, by [File.Resolve].
func Parse(name string, text []byte) (*File, error) {
	f := &File{Name: name}
	decoder := toml.NewDecoder(bytes.NewReader(text)).DisallowUnknownFields()
	if err := decoder.Decode(f); err != nil {
		return nil, fault.Config.Wrap(explain(name, text, err))
	}
	f.places = positions(name, text)
	return f, nil
}

// explain rewrites the TOML library's errors as name:line:column: reason, one
// a line.
func explain(name string, text []byte, err error) error {
	if strict := new(toml.StrictMissingError); errors.As(err, &strict) {
		// The library leaves the name of an inline table out of a key in it.
		paths := make(map[[2]int][]string)
		eachKey(text, func(path string, line, column int) {
			paths[[2]int{line, column}] = strings.Split(elements.ReplaceAllString(path, ""), ".")
		})
		var all []error
		for i := range strict.Errors {
			line, column := strict.Errors[i].Position()
			all = append(all, fmt.Errorf("%s:%d:%d: %s", name, line, column, unknownKey(paths[[2]int{line, column}])))
		}
		return errors.Join(all...)
	}
	if decode := new(toml.DecodeError); errors.As(err, &decode) {
		line, column := decode.Position()
		return fmt.Errorf("%s:%d:%d: %s", name, line, column, strings.TrimPrefix(decode.Error(), "toml: "))
	}
	return fmt.Errorf("%s: %w", name, err)
}

// unknownKey says that the last element of key is no key of its table, and
// which keys come nearest to it.
func unknownKey(key []string) string {
	last := len(key) - 1
	if last < 0 {
		return "unknown key"
	}
	message := fmt.Sprintf("unknown key %q", strings.Join(key, "."))
	if known := keysOf(reflect.TypeFor[File](), key[:last]); len(known) > 0 {
		message += ": the nearest are " + table.Quote(table.Nearest(key[last], known, 3))
	}
	return message
}

// keysOf lists the toml keys of the struct that path leads to from t.
func keysOf(t reflect.Type, path []string) []string {
	for _, step := range path {
		next, ok := fieldByKey(t, step)
		if !ok {
			return nil
		}
		t = next
	}
	var keys []string
	for i := range t.NumField() {
		if key := tomlKey(t.Field(i)); key != "" {
			keys = append(keys, key)
		}
	}
	return keys
}

// fieldByKey returns the struct type below t's key, through pointers and slices.
func fieldByKey(t reflect.Type, key string) (reflect.Type, bool) {
	for i := range t.NumField() {
		if tomlKey(t.Field(i)) != key {
			continue
		}
		below := t.Field(i).Type
		for below.Kind() == reflect.Pointer || below.Kind() == reflect.Slice {
			below = below.Elem()
		}
		return below, below.Kind() == reflect.Struct
	}
	return nil, false
}

func tomlKey(f reflect.StructField) string {
	key, _, _ := strings.Cut(f.Tag.Get("toml"), ",")
	if key == "-" {
		return ""
	}
	return key
}

// elements are the places in lists within a key path.
var elements = regexp.MustCompile(`\[\d+\]`)

// positions maps each key path of a document, such as cosmology[1].h0, to
// "name:line: path". The document has been decoded, so it is well formed.
func positions(name string, text []byte) map[string]string {
	places := make(map[string]string)
	eachKey(text, func(path string, line, _ int) { places[path] = fmt.Sprintf("%s:%d: %s", name, line, path) })
	return places
}

// eachKey visits the keys and tables of a well-formed document, those of
// inline tables included, with the place of each key's first letter.
func eachKey(text []byte, visit func(path string, line, column int)) {
	w := keyWalk{Parser: new(unstable.Parser), visit: visit}
	w.Reset(text)
	tables := make(map[string]int) // array tables seen so far, by path
	prefix := ""
	for w.NextExpression() {
		node := w.Expression()
		switch node.Kind {
		case unstable.Table:
			prefix = keyPath("", node, tables)
		case unstable.ArrayTable:
			bare := keyPath("", node, tables)
			prefix = fmt.Sprintf("%s[%d]", bare, tables[bare])
			tables[bare]++
		case unstable.KeyValue:
			w.key(prefix, node)
			continue
		default:
			continue
		}
		w.at(prefix, node)
	}
}

// A keyWalk is one call of eachKey.
type keyWalk struct {
	*unstable.Parser
	visit func(path string, line, column int)
}

// at visits a node by the place of its key.
func (w *keyWalk) at(path string, node *unstable.Node) {
	if keys := node.Key(); keys.Next() {
		start := w.Shape(keys.Node().Raw).Start
		w.visit(path, start.Line, start.Column)
	}
}

// key visits one key and, if its value is an inline table or an array of
// them, the keys within.
func (w *keyWalk) key(prefix string, node *unstable.Node) {
	path := keyPath(prefix, node, nil)
	w.at(path, node)
	w.value(path, node.Value())
}

func (w *keyWalk) value(path string, value *unstable.Node) {
	children := value.Children()
	switch value.Kind {
	case unstable.InlineTable:
		for children.Next() {
			w.key(path, children.Node())
		}
	case unstable.Array:
		for i := 0; children.Next(); i++ {
			if child := children.Node(); child.Kind == unstable.InlineTable {
				w.value(fmt.Sprintf("%s[%d]", path, i), child)
			}
		}
	}
}

// keyPath joins prefix and the node's key. A table below an array table
// belongs to the last element of it.
func keyPath(prefix string, node *unstable.Node, tables map[string]int) string {
	path := prefix
	for parts := node.Key(); parts.Next(); {
		if n := tables[path]; n > 0 {
			path = fmt.Sprintf("%s[%d]", path, n-1)
		}
		if path != "" {
			path += "."
		}
		path += string(parts.Node().Data)
	}
	return path
}

// Flagged records that a flag set the key at path, so that messages about the
// key name the flag.
func (f *File) Flagged(path, flag string) {
	if f.places == nil {
		f.places = make(map[string]string)
	}
	f.places[path] = flag
}

// Place names the setting at path as the user knows it: file, line and key, or
// the flag. A key that is absent is named by the nearest table that is there.
func (f *File) Place(path string) string {
	if place, ok := f.places[path]; ok {
		return place
	}
	for outer := path; ; {
		cut := strings.LastIndexAny(outer, ".[")
		if cut < 0 {
			break
		}
		outer = outer[:cut]
		if place, ok := f.places[outer]; ok && strings.HasSuffix(place, outer) {
			return strings.TrimSuffix(place, outer) + path
		}
	}
	if f.Name != "" {
		return f.Name + ": " + path
	}
	return path
}
