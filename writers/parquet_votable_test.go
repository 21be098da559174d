package writers

import (
	"bytes"
	"encoding/xml"
	"strings"
	"testing"

	"github.com/apache/arrow-go/v18/parquet"
	"github.com/apache/arrow-go/v18/parquet/file"
	"github.com/apache/arrow-go/v18/parquet/schema"

	"catenrich/internal/parquetfoot"
	"catenrich/internal/table"
)

const votableOfTwo = `<?xml version="1.0" encoding="UTF-8"?>
<v:VOTABLE xmlns:v="http://www.ivoa.net/xml/VOTable/v1.3" version="1.4"><v:RESOURCE><v:TABLE>
<v:DESCRIPTION>invented</v:DESCRIPTION><v:PARAM name="FIELD" datatype="int" value="1"/>
<v:FIELD name="z" datatype="double"/><v:FIELD name="id" datatype="long"><v:DESCRIPTION>&lt;FIELD&gt;</v:DESCRIPTION></v:FIELD>
</v:TABLE><v:TABLE><v:FIELD name="other" datatype="int"/></v:TABLE></v:RESOURCE></v:VOTABLE>`

// A votableDoc is a VOTable as far as the note asks for one.
type votableDoc struct {
	XMLName xml.Name
	Version string `xml:"version,attr"`
	Tables  []struct {
		Fields []struct {
			Name        string `xml:"name,attr"`
			Datatype    string `xml:"datatype,attr"`
			Arraysize   string `xml:"arraysize,attr"`
			Unit        string `xml:"unit,attr"`
			UCD         string `xml:"ucd,attr"`
			Description string `xml:"DESCRIPTION"`
		} `xml:"FIELD"`
		Data []struct{} `xml:"DATA"`
	} `xml:"RESOURCE>TABLE"`
}

// parseVOTable checks what the note demands of the document itself.
func parseVOTable(t *testing.T, content string) votableDoc {
	t.Helper()
	var doc votableDoc
	if err := xml.Unmarshal([]byte(content), &doc); err != nil {
		t.Fatalf("%v in %s", err, content)
	}
	if doc.XMLName.Local != "VOTABLE" || doc.XMLName.Space != "http://www.ivoa.net/xml/VOTable/v1.3" || doc.Version == "" {
		t.Errorf("the root is %v, version %q", doc.XMLName, doc.Version)
	}
	if len(doc.Tables) == 0 || len(doc.Tables[0].Data) > 0 {
		t.Fatalf("no TABLE, or one with DATA: %s", content)
	}
	return doc
}

func TestVOTableIsExtended(t *testing.T) {
	keys, values, warnings := graftKeys(t, table.Spec{}, votableVersion, "1.0", votableContent, votableOfTwo)
	if len(warnings) != 0 {
		t.Errorf("warnings %q", warnings)
	}
	doc := parseVOTable(t, valueOf(keys, values, votableContent))
	if len(keys) != 2 || len(doc.Tables) != 2 || len(doc.Tables[0].Fields) != 6 || len(doc.Tables[1].Fields) != 1 {
		t.Fatalf("%q %+v", keys, doc)
	}
	f := doc.Tables[0].Fields
	if f[2].Name != "twice" || f[2].Datatype != "double" || f[2].Unit != "Mpc" || f[2].UCD != "pos.distance" || f[2].Description != added[0].Description+" (source: invented & <escaped>)" {
		t.Errorf("%+v", f[2])
	}
	if f[4].Datatype != "boolean" || f[5].Datatype != "int" {
		t.Errorf("%+v", f)
	}
}

// TestVOTableIsMade: a flat file without a VOTable gets one, a FIELD for each
// column in their order. A second run extends it.
func TestVOTableIsMade(t *testing.T) {
	keys, values, warnings := graftKeys(t, table.Spec{Narrow: true})
	if len(warnings) != 0 || valueOf(keys, values, votableVersion) != "1.0" {
		t.Errorf("warnings %q, keys %q", warnings, keys)
	}
	made := valueOf(keys, values, votableContent)
	var got []string
	for _, f := range parseVOTable(t, made).Tables[0].Fields {
		got = append(got, f.Name+" "+f.Datatype)
	}
	if want := "z double,id long,twice float,noise float,new_flag boolean,new_state int"; strings.Join(got, ",") != want {
		t.Errorf("%q, want %q", got, want)
	}
	k := &newKeys{fields: added[:1], columns: []newColumn{newColumnOf(&added[0], false, false)}, top: 6}
	again, err := votable(made, k)
	if err != nil {
		t.Fatal(err)
	}
	if n := len(parseVOTable(t, again).Tables[0].Fields); n != 7 {
		t.Errorf("%d FIELDs after a second run, want 7", n)
	}
}

// TestVOTableIsLeft: no VOTable beside columns that it could not describe, and
// none in the place of somebody else's.
func TestVOTableIsLeft(t *testing.T) {
	optional := parquet.Repetitions.Optional
	double := func(name string) schema.Node { return schema.NewFloat64Node(name, optional, -1) }
	k := &newKeys{fields: added, top: 1}
	for i := range added {
		k.columns = append(k.columns, newColumnOf(&added[i], false, false))
	}
	for _, c := range []struct {
		name   string
		column schema.Node
		kv     []parquetfoot.Entry
		made   bool
	}{
		{name: "flat", column: double("z"), made: true},
		{name: "a name with signs", column: double(`z"<&>é`), made: true},
		{name: "a name with a tab", column: double("z\tz")},
		{name: "a name with a blank at its end", column: double("z ")},
		{name: "a struct", column: schema.MustGroup(schema.NewGroupNode("s", optional, schema.FieldList{double("z")}, -1)), made: true},
		{name: "a version without a content", column: double("z"), kv: []parquetfoot.Entry{{Key: votableVersion, Value: "2.0"}}},
	} {
		foot := footOf(t, c.column)
		foot.Entries = c.kv
		if got := newVOTable(foot, k); (len(got) == 2) != c.made || len(got) == 1 {
			t.Errorf("%s: %q", c.name, got)
		} else if c.made {
			if f := parseVOTable(t, got[1].Value).Tables[0].Fields; len(f) != 5 || f[0].Name != c.column.Name() {
				t.Errorf("%s: %+v", c.name, f)
			}
		}
	}
	for _, content := range []string{"<VOTABLE><TABLE><FIELD/></TABLE></VOTABLE>", "<VOTABLE><TABLE><FIELD/><FIELD/>"} {
		keys, _, warnings := graftKeys(t, table.Spec{}, votableVersion, "1.0", "a", "1", votableContent, content)
		if len(warnings) != 1 || !strings.Contains(warnings[0], votableContent) || strings.Join(keys, " ") != "a" {
			t.Errorf("%s: keys %q, warnings %q", content, keys, warnings)
		}
	}
}

// footOf is the footer of an empty file with one column.
func footOf(t *testing.T, column schema.Node) *parquetfoot.Footer {
	t.Helper()
	var b bytes.Buffer
	root := schema.MustGroup(schema.NewGroupNode("schema", parquet.Repetitions.Required, schema.FieldList{column}, -1))
	if err := file.NewParquetWriter(&b, root).Close(); err != nil {
		t.Fatal(err)
	}
	foot, err := parquetfoot.Read(bytes.NewReader(b.Bytes()), int64(b.Len()))
	if err != nil {
		t.Fatal(err)
	}
	return foot
}

// TestOldDatatypes: the VOTable type of each kind of leaf holds its values.
func TestOldDatatypes(t *testing.T) {
	const text = textDatatype
	for _, c := range []struct {
		leaf parquetfoot.Leaf
		want string
	}{
		{parquetfoot.Leaf{Physical: parquetfoot.Boolean}, "boolean"},
		{parquetfoot.Leaf{Physical: parquetfoot.Int32}, "int"},
		{parquetfoot.Leaf{Physical: parquetfoot.Int32, Logical: parquetfoot.Integer}, "int"},
		{parquetfoot.Leaf{Physical: parquetfoot.Int32, Logical: parquetfoot.Unsigned}, "long"},
		{parquetfoot.Leaf{Physical: parquetfoot.Int64}, "long"},
		{parquetfoot.Leaf{Physical: parquetfoot.Int64, Logical: parquetfoot.Unsigned}, text},
		{parquetfoot.Leaf{Physical: parquetfoot.Int64, Logical: parquetfoot.Decimal}, text},
		{parquetfoot.Leaf{Physical: parquetfoot.Int64, Logical: parquetfoot.Opaque}, text}, // a time
		{parquetfoot.Leaf{Physical: parquetfoot.Int96}, text},
		{parquetfoot.Leaf{Physical: parquetfoot.Float}, "float"},
		{parquetfoot.Leaf{Physical: parquetfoot.Double}, "double"},
		{parquetfoot.Leaf{Physical: parquetfoot.Double, MaxRep: 1}, text},
		{parquetfoot.Leaf{Physical: parquetfoot.ByteArray, Logical: parquetfoot.String}, text},
		{parquetfoot.Leaf{Physical: parquetfoot.FixedLenByteArray, Length: 2, Logical: parquetfoot.Float16}, "float"},
	} {
		if got := oldDatatype(&c.leaf); got != c.want {
			t.Errorf("%+v: %s, want %s", c.leaf, got, c.want)
		}
	}
}
