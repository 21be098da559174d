package writers

import (
	"encoding/json"
	"encoding/xml"
	"errors"
	"fmt"
	"regexp"
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
	"IVOA.VOTable-Parquet.content":              votable,
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
	run := nextRun(foot.Entries)
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
				continue
			}
			e = parquetfoot.Entry{Key: e.Key, Value: value}
		}
		all = append(all, e)
	}
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

// votable adds FIELDs to the first TABLE of a VOTable (VOTable 1.4; Parquet in
// the VO, IVOA Note 1.0), where there must be one for each top-level column.
func votable(doc string, k *newKeys) (string, error) {
	d := xml.NewDecoder(strings.NewReader(doc))
	depth, within, fields := 0, 0, 0 // within is the depth of the TABLE we are in
	at, prefix := int64(-1), ""
scan:
	for {
		t, err := d.RawToken()
		if err != nil {
			return "", fmt.Errorf("it has no complete TABLE: %w", err)
		}
		switch t := t.(type) {
		case xml.StartElement:
			depth++
			switch {
			case within == 0 && t.Name.Local == "TABLE":
				within, prefix = depth, t.Name.Space
			case within > 0 && depth == within+1 && t.Name.Local == "FIELD":
				fields++
			}
		case xml.EndElement:
			if within > 0 && depth == within+1 && t.Name.Local == "FIELD" {
				at = d.InputOffset()
			}
			if depth--; within > 0 && depth < within {
				break scan
			}
		}
	}
	if fields != k.top || at < 0 {
		return "", fmt.Errorf("it has %d FIELDs for %d columns", fields, k.top)
	}
	if prefix != "" {
		prefix += ":"
	}
	return doc[:at] + strings.Join(k.each(func(f *table.Field, c *newColumn) string { return fieldElement(prefix, f, c) }), "") + doc[at:], nil
}

// fieldElement renders one FIELD.
func fieldElement(prefix string, f *table.Field, c *newColumn) string {
	types := map[parquetfoot.Physical]string{parquetfoot.Double: "double", parquetfoot.Float: "float",
		parquetfoot.Int32: "int", parquetfoot.Boolean: "boolean"}
	var b strings.Builder
	escaped := func(before, text, after string) {
		b.WriteString(before)
		xml.EscapeText(&b, []byte(text)) // a Builder cannot fail
		b.WriteString(after)
	}
	escaped("\n<"+prefix+`FIELD name="`, f.Name, `" datatype="`+types[c.physical]+`"`)
	if f.Unit != "" {
		escaped(` unit="`, f.Unit, `"`)
	}
	if f.UCD != "" {
		escaped(` ucd="`, f.UCD, `"`)
	}
	escaped("><"+prefix+"DESCRIPTION>", f.Description, "</"+prefix+"DESCRIPTION></"+prefix+"FIELD>")
	return b.String()
}
