package writers

import (
	"encoding/xml"
	"fmt"
	"strings"
	"unicode/utf8"

	"catenrich/internal/parquetfoot"
	"catenrich/internal/table"
)

// Keys of a VOTable in the metadata of a Parquet file, and the version of the
// convention that is written (Parquet in the VO, IVOA Note 1.0, 2025).
const (
	votableVersion = "IVOA.VOTable-Parquet.version"
	votableContent = "IVOA.VOTable-Parquet.content"
	votableNote    = "1.0"
)

// votable adds FIELDs to the first TABLE of a VOTable, where there must be one
// for each top-level column: readers discard the whole where the counts differ.
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
	return doc[:at] + k.fieldElements(prefix) + doc[at:], nil
}

// newVOTable describes all columns of a file that has no VOTable yet: the old
// ones by name and type, the new ones by unit, UCD and description too. Where
// XML cannot spell a name there is none. Parquet's own types stay the
// authority, so what a VOTable has no type for, such as a struct, is a string
// there.
func newVOTable(foot *parquetfoot.Footer, k *newKeys) []parquetfoot.Entry {
	if len(k.columns) == 0 {
		return nil
	}
	for _, e := range foot.Entries {
		if e.Key == votableContent || e.Key == votableVersion {
			return nil
		}
	}
	var b strings.Builder
	b.WriteString(`<?xml version="1.0" encoding="UTF-8"?>
<VOTABLE version="1.4" xmlns="http://www.ivoa.net/xml/VOTable/v1.3">
<RESOURCE>
<TABLE>`)
	for i := range foot.Columns {
		c := &foot.Columns[i]
		if c.Depth > 1 {
			continue
		}
		if !spellable(c.Name) {
			return nil
		}
		datatype := textDatatype
		if c.Leaf >= 0 {
			datatype = oldDatatype(&foot.Leaves[c.Leaf])
		}
		writeField(&b, "", c.Name, datatype)
		b.WriteString("/>")
	}
	for i := range k.fields {
		if !spellable(k.fields[i].Name) {
			return nil
		}
	}
	b.WriteString(k.fieldElements("") + "\n</TABLE>\n</RESOURCE>\n</VOTABLE>\n")
	return []parquetfoot.Entry{{Key: votableVersion, Value: votableNote}, {Key: votableContent, Value: b.String()}}
}

// spellable reports whether an attribute gives a name back as it is: XML has no
// control characters, and the type of the attribute folds blanks.
func spellable(name string) bool {
	if !utf8.ValidString(name) || name == "" || strings.Join(strings.Fields(name), " ") != name {
		return false
	}
	return !strings.ContainsFunc(name, func(r rune) bool { return r < ' ' || r == '\ufffd' || r == '\ufffe' || r == '\uffff' })
}

// textDatatype is a string of any length.
const textDatatype = `char" arraysize="*`

// oldDatatype is the VOTable type that holds a leaf's values.
func oldDatatype(l *parquetfoot.Leaf) string {
	number := l.Logical == parquetfoot.Plain || l.Logical == parquetfoot.Integer
	switch {
	case l.MaxRep > 0:
		return textDatatype
	case l.Logical == parquetfoot.Float16:
		return "float"
	case l.Logical == parquetfoot.Unsigned && l.Physical == parquetfoot.Int32:
		return "long"
	case !number:
		return textDatatype
	}
	switch l.Physical {
	case parquetfoot.Boolean:
		return "boolean"
	case parquetfoot.Int32:
		return "int"
	case parquetfoot.Int64:
		return "long"
	case parquetfoot.Float:
		return "float"
	case parquetfoot.Double:
		return "double"
	}
	return textDatatype
}

// newDatatypes are the VOTable types of new columns.
var newDatatypes = map[parquetfoot.Physical]string{parquetfoot.Double: "double", parquetfoot.Float: "float",
	parquetfoot.Int32: "int", parquetfoot.Boolean: "boolean"}

// fieldElements renders a FIELD for every new column.
func (k *newKeys) fieldElements(prefix string) string {
	return strings.Join(k.each(func(f *table.Field, c *newColumn) string {
		var b strings.Builder
		writeField(&b, prefix, f.Name, newDatatypes[c.physical])
		if f.Unit != "" {
			writeEscaped(&b, ` unit="`, f.Unit, `"`)
		}
		if f.UCD != "" {
			writeEscaped(&b, ` ucd="`, f.UCD, `"`)
		}
		writeEscaped(&b, "><"+prefix+"DESCRIPTION>", f.Meaning(), "</"+prefix+"DESCRIPTION></"+prefix+"FIELD>")
		return b.String()
	}), "")
}

// writeField begins a FIELD.
func writeField(b *strings.Builder, prefix, name, datatype string) {
	writeEscaped(b, "\n<"+prefix+`FIELD name="`, name, `" datatype="`+datatype+`"`)
}

func writeEscaped(b *strings.Builder, before, text, after string) {
	b.WriteString(before)
	xml.EscapeText(b, []byte(text)) // a Builder cannot fail
	b.WriteString(after)
}
