package writers

import (
	"encoding/json"
	"errors"
	"fmt"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"catenrich/internal/parquetfoot"
	"catenrich/internal/table"
)

// A wholeSchema key holds a description of every column of the file, which its
// readers take at its word: left short, some lose the new columns, some lose
// the types of all, some crash. It is extended, or left out with a warning.
type wholeSchema func(value string, k *newKeys) (string, error)

var wholeSchemas = map[string]wholeSchema{
	"ARROW:schema": arrowSchema,
	"org.apache.spark.sql.parquet.row.metadata": sparkSchema,
	"parquet.avro.schema":                       avroSchema,
	"avro.schema":                               avroSchema,
	"pandas":                                    pandasSchema,
	votableContent:                              votable,
	"parquet.proto.descriptor":                  notExtended,
	"thrift.descriptor":                         notExtended,
	"iceberg.schema":                            notExtended,
}

// newKeys is what an extension of a schema needs to know.
type newKeys struct {
	fields  []table.Field
	columns []newColumn
	top     int // top-level columns of the input
}

// each renders something for every new column.
func (k *newKeys) each(render func(f *table.Field, c *newColumn) string) []string {
	all := make([]string, len(k.columns))
	for i := range k.columns {
		all[i] = render(&k.fields[i], &k.columns[i])
	}
	return all
}

// extendEntries returns the key-value metadata of the output: the input's,
// descriptions of the whole schema extended, an earlier run's entries under
// other names, and then the new ones.
func extendEntries(foot *parquetfoot.Footer, fields []table.Field, columns []newColumn, more []table.KeyValue) (all []parquetfoot.Entry, warnings []string) {
	k := &newKeys{fields: fields, columns: columns}
	for i := range foot.Columns {
		if foot.Columns[i].Depth == 1 {
			k.top++
		}
	}
	run, dropped := nextRun(foot.Entries), make(map[string]bool)
	for _, e := range foot.Entries {
		extend, whole := wholeSchemas[e.Key]
		rest, ours := strings.CutPrefix(e.Key, ourPrefix)
		switch {
		case ours && !numbered.MatchString(e.Key):
			e = parquetfoot.Entry{Key: ourPrefix + strconv.Itoa(run) + "." + rest, Value: e.Value}
		case whole && len(columns) > 0:
			value, err := safely(extend, e.Value, k)
			if err != nil {
				warnings = append(warnings, fmt.Sprintf("the metadata %q describes all columns and cannot be extended by the new ones (%v): the output is without it", e.Key, err))
				dropped[e.Key] = true
				continue
			}
			e = parquetfoot.Entry{Key: e.Key, Value: value}
		}
		all = append(all, e)
	}
	if dropped[votableContent] {
		all = slices.DeleteFunc(all, func(e parquetfoot.Entry) bool { return e.Key == votableVersion })
	}
	all = append(all, newVOTable(foot, k)...)
	for _, m := range more {
		all = append(all, parquetfoot.Entry{Key: m.Key, Value: m.Value})
	}
	return all, warnings
}

// ourPrefix begins the keys that runs of this program leave; an earlier run's
// have its number behind it.
const ourPrefix = "catenrich."

var numbered = regexp.MustCompile(`^catenrich\.([0-9]{1,9})\.`)

// nextRun returns the number for the entries of the run before this one.
func nextRun(entries []parquetfoot.Entry) int {
	run := 1
	for i := range entries {
		if m := numbered.FindStringSubmatch(entries[i].Key); m != nil {
			n, _ := strconv.Atoi(m[1])
			run = max(run, n+1)
		}
	}
	return run
}

// safely turns a panic over a damaged value into an error.
func safely(extend wholeSchema, value string, k *newKeys) (out string, err error) {
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("it is damaged: %v", r)
		}
	}()
	return extend(value, k)
}

func notExtended(string, *newKeys) (string, error) {
	return "", errors.New("it is in a form that is not supported")
}

func quoteJSON(s string) string {
	b, _ := json.Marshal(s) // a string cannot fail
	return string(b)
}

func sparkSchema(value string, k *newKeys) (string, error) {
	types := map[parquetfoot.Physical]string{parquetfoot.Double: "double", parquetfoot.Float: "float",
		parquetfoot.Int32: "integer", parquetfoot.Boolean: "boolean"}
	return appendToArray(value, "fields", k.top, k.each(func(f *table.Field, c *newColumn) string {
		return fmt.Sprintf(`{"name":%s,"type":"%s","nullable":true,"metadata":{}}`, quoteJSON(f.Name), types[c.physical])
	}))
}

var avroName = regexp.MustCompile(`^[A-Za-z_][A-Za-z0-9_]*$`)

func avroSchema(value string, k *newKeys) (string, error) {
	types := map[parquetfoot.Physical]string{parquetfoot.Double: "double", parquetfoot.Float: "float",
		parquetfoot.Int32: "int", parquetfoot.Boolean: "boolean"}
	for i := range k.fields {
		if !avroName.MatchString(k.fields[i].Name) {
			return "", fmt.Errorf("%q is no name in it", k.fields[i].Name)
		}
	}
	return appendToArray(value, "fields", k.top, k.each(func(f *table.Field, c *newColumn) string {
		return fmt.Sprintf(`{"name":%s,"type":["null","%s"],"default":null}`, quoteJSON(f.Name), types[c.physical])
	}))
}

func pandasSchema(value string, k *newKeys) (string, error) {
	types := map[parquetfoot.Physical][2]string{parquetfoot.Double: {"float64", "float64"}, parquetfoot.Float: {"float32", "float32"},
		parquetfoot.Int32: {"int32", "int32"}, parquetfoot.Boolean: {"bool", "object"}}
	return appendToArray(value, "columns", -1, k.each(func(f *table.Field, c *newColumn) string {
		t := types[c.physical]
		return fmt.Sprintf(`{"name":%s,"field_name":%[1]s,"pandas_type":"%s","numpy_type":"%s","metadata":null}`, quoteJSON(f.Name), t[0], t[1])
	}))
}

// appendToArray adds items to an array of a JSON object and keeps every other
// byte. The array must have the given number of items, unless that is -1.
func appendToArray(doc, key string, items int, more []string) (string, error) {
	if !json.Valid([]byte(doc)) {
		return "", errors.New("it is not JSON")
	}
	d := json.NewDecoder(strings.NewReader(doc))
	if t, err := d.Token(); err != nil || t != json.Delim('{') {
		return "", errors.New("it is no JSON object")
	}
	var skipped json.RawMessage
	for d.More() {
		name, err := d.Token()
		if err != nil {
			return "", err
		}
		if name != key {
			if err := d.Decode(&skipped); err != nil {
				return "", err
			}
			continue
		}
		if t, err := d.Token(); err != nil || t != json.Delim('[') {
			return "", fmt.Errorf("its %q is no array", key)
		}
		n := 0
		for ; d.More(); n++ {
			if err := d.Decode(&skipped); err != nil {
				return "", err
			}
		}
		if items >= 0 && n != items {
			return "", fmt.Errorf("it describes %d columns and there are %d", n, items)
		}
		if _, err := d.Token(); err != nil {
			return "", err
		}
		at := d.InputOffset() - 1 // of the closing bracket
		if n > 0 {
			more[0] = "," + more[0]
		}
		return doc[:at] + strings.Join(more, ",") + doc[at:], nil
	}
	return "", fmt.Errorf("it has no %q", key)
}
