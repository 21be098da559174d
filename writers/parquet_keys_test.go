package writers

import (
	"bytes"
	"encoding/base64"
	"encoding/json"
	"slices"
	"strings"
	"testing"

	"github.com/apache/arrow-go/v18/arrow"
	"github.com/apache/arrow-go/v18/arrow/ipc"
	"github.com/apache/arrow-go/v18/arrow/memory"
	"github.com/apache/arrow-go/v18/parquet/metadata"

	"catenrich/internal/table"
)

// graftKeys grafts onto a file with the given metadata and returns what the
// output has, in order, and the warnings.
func graftKeys(t *testing.T, spec table.Spec, pairs ...string) (keys, values, warnings []string) {
	t.Helper()
	var kv metadata.KeyValueMetadata
	for i := 0; i < len(pairs); i += 2 {
		kv.Append(pairs[i], pairs[i+1])
	}
	s := shape{groups: []int{10}, keys: kv}
	out := newFileOutput(t)
	spec.Added = added
	job := graftJob{path: s.make(t), want: []string{"z"}, spec: spec, kernel: fill, workers: 1}
	sink, err := job.run(out)
	if err != nil {
		t.Fatal(err)
	}
	got := openArrow(t, out.f.Name()).MetaData().KeyValueMetadata()
	return got.Keys(), got.Values(), sink.Warnings()
}

func valueOf(keys, values []string, key string) string {
	for i := range keys {
		if keys[i] == key {
			return values[i]
		}
	}
	return ""
}

// withoutVOTable leaves out what every file gets.
func withoutVOTable(keys []string) []string {
	return slices.DeleteFunc(slices.Clone(keys), func(key string) bool { return key == votableVersion || key == votableContent })
}

func arrowValue(t *testing.T, s *arrow.Schema) string {
	t.Helper()
	var b bytes.Buffer
	p := ipc.GetSchemaPayload(s, memory.DefaultAllocator)
	if _, err := p.WritePayload(&b); err != nil {
		t.Fatal(err)
	}
	return base64.StdEncoding.EncodeToString(b.Bytes())
}

func TestArrowSchemaIsExtended(t *testing.T) {
	more := arrow.NewMetadata([]string{"unit"}, []string{"km"})
	whole := arrow.NewMetadata([]string{"survey"}, []string{"Quill Ridge"})
	old := arrow.NewSchema([]arrow.Field{
		{Name: "z", Type: &arrow.DictionaryType{IndexType: arrow.PrimitiveTypes.Int8, ValueType: arrow.PrimitiveTypes.Float64}, Nullable: true},
		{Name: "id", Type: &arrow.TimestampType{Unit: arrow.Nanosecond, TimeZone: "UTC"}, Metadata: more},
	}, &whole)
	keys, values, warnings := graftKeys(t, table.Spec{}, "ARROW:schema", arrowValue(t, old))
	if len(warnings) != 0 {
		t.Errorf("warnings %q", warnings)
	}
	raw, err := base64.StdEncoding.DecodeString(valueOf(keys, values, "ARROW:schema"))
	if err != nil {
		t.Fatal(err)
	}
	r, err := ipc.NewReader(bytes.NewReader(raw))
	if err != nil {
		t.Fatal(err)
	}
	got := r.Schema()
	if got.NumFields() != 6 || !got.Field(0).Equal(old.Field(0)) || !got.Field(1).Equal(old.Field(1)) || !got.Metadata().Equal(whole) {
		t.Errorf("the old fields changed: %v", got)
	}
	for i, want := range []arrow.DataType{arrow.PrimitiveTypes.Float64, arrow.PrimitiveTypes.Float64, arrow.FixedWidthTypes.Boolean, arrow.PrimitiveTypes.Int32} {
		if f := got.Field(2 + i); f.Name != added[i].Name || f.Type.ID() != want.ID() || !f.Nullable {
			t.Errorf("field %v, want %s of %v", f, added[i].Name, want)
		}
	}
}

func TestJSONSchemasAreExtended(t *testing.T) {
	spark := `{"type":"struct","fields":[{"name":"z","type":"double","nullable":true,"metadata":{}}, {"name":"id","type":"long","nullable":false,"metadata":{"k":[1]}}]}`
	pandas := `{"index_columns": [], "columns": [{"name": "z"}, {"name": "id"}], "pandas_version": "2.1.0"}`
	avro := `{"type":"record","name":"r","fields":[{"name":"z","type":["null","double"]},{"name":"id","type":"long"}]}`
	keys, values, warnings := graftKeys(t, table.Spec{}, "org.apache.spark.sql.parquet.row.metadata", spark, "pandas", pandas, "parquet.avro.schema", avro, "note", "stays")
	if len(warnings) != 0 || valueOf(keys, values, "note") != "stays" {
		t.Errorf("warnings %q, keys %q", warnings, keys)
	}
	for key, list := range map[string]string{"org.apache.spark.sql.parquet.row.metadata": "fields", "pandas": "columns", "parquet.avro.schema": "fields"} {
		var doc map[string]any
		if err := json.Unmarshal([]byte(valueOf(keys, values, key)), &doc); err != nil {
			t.Errorf("%s: %v", key, err)
			continue
		}
		items := doc[list].([]any)
		if len(items) != 6 || items[2].(map[string]any)["name"] != "twice" || items[5].(map[string]any)["name"] != "new_state" {
			t.Errorf("%s: %v", key, items)
		}
	}
	if got := valueOf(keys, values, "org.apache.spark.sql.parquet.row.metadata"); !strings.HasPrefix(got, spark[:len(spark)-2]) {
		t.Errorf("what stood there changed: %s", got)
	}
}

// TestSchemasThatCannotBeExtended are left out, with a warning that names them.
func TestSchemasThatCannotBeExtended(t *testing.T) {
	one := arrow.NewSchema([]arrow.Field{{Name: "z", Type: arrow.PrimitiveTypes.Float64}}, nil)
	whole, _ := base64.StdEncoding.DecodeString(arrowValue(t, one))
	for _, c := range []struct{ key, value string }{
		{"ARROW:schema", "not base64"},
		{"ARROW:schema", base64.StdEncoding.EncodeToString([]byte("garbage of some length"))},
		{"ARROW:schema", base64.StdEncoding.EncodeToString(whole[:len(whole)-8])},
		{"ARROW:schema", arrowValue(t, one)}, // one field for two columns
		{"pandas", `{"columns": 7}`},
		{"pandas", `[]`},
		{"avro.schema", `{"fields":[{"name":"z"}]}`},
		{"org.apache.spark.sql.parquet.row.metadata", `{"fields":[`},
		{"parquet.proto.descriptor", "x"},
	} {
		keys, _, warnings := graftKeys(t, table.Spec{}, "before", "1", c.key, c.value, "after", "2")
		if len(warnings) != 1 || !strings.Contains(warnings[0], c.key) || strings.Join(withoutVOTable(keys), " ") != "before after" {
			t.Errorf("%s %.30s: keys %q, warnings %q", c.key, c.value, keys, warnings)
		}
	}
}

func TestEarlierRunsAreKeptAside(t *testing.T) {
	spec := table.Spec{Metadata: []table.KeyValue{{Key: "catenrich.config_hash", Value: "new"}, {Key: "catenrich.columns", Value: "[]"}}}
	keys, values, _ := graftKeys(t, spec, "catenrich.1.config_hash", "first", "catenrich.config_hash", "second", "catenrich.columns", "[1]", "other", "x")
	want := "catenrich.1.config_hash=first catenrich.2.config_hash=second catenrich.2.columns=[1] other=x catenrich.config_hash=new catenrich.columns=[]"
	var got []string
	for _, key := range withoutVOTable(keys) {
		got = append(got, key+"="+valueOf(keys, values, key))
	}
	if strings.Join(got, " ") != want {
		t.Errorf("%q, want %q", got, want)
	}
}

// FuzzKeys: no value of a known key may do worse than be left out.
func FuzzKeys(f *testing.F) {
	f.Add("IVOA.VOTable-Parquet.content", votableOfTwo)
	f.Add("pandas", `{"columns": [{}]}`)
	f.Fuzz(func(t *testing.T, key, value string) {
		extend, ok := wholeSchemas[key]
		if !ok {
			extend = arrowSchema
		}
		k := &newKeys{fields: added, top: 2}
		for i := range added {
			k.columns = append(k.columns, newColumnOf(&added[i], false, false))
		}
		out, err := safely(extend, value, k)
		if err == nil && len(out) < len(value) {
			t.Errorf("%d bytes became %d", len(value), len(out))
		}
	})
}
