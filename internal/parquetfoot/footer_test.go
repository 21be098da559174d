package parquetfoot

import (
	"bytes"
	"errors"
	"io"
	"strings"
	"testing"
)

const handmadeEnd = 1000

func parse(t testing.TB, raw []byte) *Footer {
	t.Helper()
	f, err := Parse(raw, handmadeEnd)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// none is an extension that changes nothing.
func none(f *Footer) *Extension {
	return &Extension{Entries: f.Entries, Group: func(int) (GroupExtension, error) { return GroupExtension{}, nil }}
}

// graft is an extension of two columns whose chunks have recognisable bytes.
func graft(f *Footer) *Extension {
	return &Extension{
		Columns: []Column{{"new_d", Double}, {"new_b", Boolean}},
		Entries: append(f.Entries[:len(f.Entries):len(f.Entries)], Entry{Key: "added", Value: "later"}),
		Group: func(g int) (GroupExtension, error) {
			x := GroupExtension{Uncompressed: 60, Compressed: 40}
			_, rows := f.GroupRows(g)
			for _, p := range []Physical{Double, Boolean} {
				var e Encoder
				k := Chunk{Physical: p, Values: rows, Uncompressed: 30, Compressed: 20, DataPage: 500 + int64(g)}
				e.outer = append(e.outer, 0)
				k.encode(&e, "new")
				x.Chunks = append(x.Chunks, e.B)
			}
			return x, nil
		},
	}
}

func TestExtendByNothingKeepsEveryByte(t *testing.T) {
	for _, orders := range []bool{false, true} {
		for _, entries := range []bool{false, true} {
			raw := handmade(orders, entries)
			f := parse(t, raw)
			var out bytes.Buffer
			if n, err := f.Extend(&out, none(f)); err != nil || n != int64(len(raw)) || !bytes.Equal(out.Bytes(), raw) {
				t.Errorf("orders %v, entries %v: %d bytes, %v; equal to the input: %v", orders, entries, n, err, bytes.Equal(out.Bytes(), raw))
			}
		}
	}
}

func TestExtendKeepsUnknownFieldsAndAnnotations(t *testing.T) {
	for _, orders := range []bool{false, true} {
		for _, entries := range []bool{false, true} {
			raw := handmade(orders, entries)
			f := parse(t, raw)
			var out bytes.Buffer
			if _, err := f.Extend(&out, graft(f)); err != nil {
				t.Fatal(err)
			}
			if was, is := bytes.Count(raw, []byte("from the future")), bytes.Count(out.Bytes(), []byte("from the future")); was != is {
				t.Errorf("%d unknown fields became %d", was, is)
			}
			g := parse(t, out.Bytes())
			for i := range f.Leaves {
				if f.Leaves[i] != g.Leaves[i] {
					t.Errorf("leaf %d was %+v, is %+v", i, f.Leaves[i], g.Leaves[i])
				}
			}
			if len(g.Leaves) != 7 || g.Leaves[5].Name != "new_d" || g.Leaves[6].Physical != Boolean || g.Leaves[6].MaxDef != 1 {
				t.Errorf("new leaves: %+v", g.Leaves[5:])
			}
			if g.Ordered != orders || orders && g.orders != 7 {
				t.Errorf("column orders: %v, %d", g.Ordered, g.orders)
			}
			if n := len(g.Entries); n != len(f.Entries)+1 || g.Entries[n-1].Key != "added" || g.Entries[n-1].Value != "later" {
				t.Errorf("entries: %+v", g.Entries)
			}
			checkGroups(t, f, g)
		}
	}
}

// checkGroups compares the old chunks byte for byte and the sizes by value.
func checkGroups(t *testing.T, f, g *Footer) {
	for i := range f.groups {
		was := bytes.TrimSuffix(columnsOf(f, i), nil)
		if is := columnsOf(g, i); !bytes.HasPrefix(is, was) {
			t.Errorf("row group %d: the old chunks changed", i)
		}
		for _, id := range []int16{groupTotal, groupCompressed} {
			want := map[int16]int64{groupTotal: 560, groupCompressed: 490}[id]
			if got := numberOf(g, i, id); got != want {
				t.Errorf("row group %d, field %d: %d, want %d", i, id, got, want)
			}
		}
		chunks, err := g.Chunks(i, nil)
		if err != nil || chunks[5].DataPage != 500+int64(i) || chunks[6].Compressed != 20 {
			t.Errorf("row group %d: %+v, %v", i, chunks[5:], err)
		}
	}
}

// columnsOf returns the elements of a row group's list of columns.
func columnsOf(f *Footer, g int) []byte {
	c := &cursor{b: f.raw[:f.groups[g].to], pos: f.groups[g].from}
	for _, fd := range c.split(nil) {
		if fd.id == groupColumns {
			in := &cursor{b: f.raw, pos: fd.value}
			in.list()
			return f.raw[in.pos:fd.end]
		}
	}
	return nil
}

func numberOf(f *Footer, g int, id int16) int64 {
	c := &cursor{b: f.raw[:f.groups[g].to], pos: f.groups[g].from}
	for _, fd := range c.split(nil) {
		if fd.id == id {
			in := &cursor{b: f.raw, pos: fd.value}
			return in.integer()
		}
	}
	return -1
}

func TestLogicalTypes(t *testing.T) {
	f := parse(t, handmade(true, true))
	want := []Logical{Float16, Opaque, Opaque, Decimal, Unsigned}
	for i, l := range f.Leaves {
		if l.Logical != want[i] {
			t.Errorf("leaf %d: %d, want %d", i, l.Logical, want[i])
		}
	}
	if f.Leaves[3].Scale != 3 || f.Leaves[0].Length != 2 || f.Leaves[1].MaxDef != 1 {
		t.Errorf("%+v", f.Leaves)
	}
}

func TestSubsetHasOnlyWhatWasAsked(t *testing.T) {
	f := parse(t, handmade(true, true))
	chunks, err := f.Chunks(1, nil)
	if err != nil {
		t.Fatal(err)
	}
	s := parse(t, f.Subset(1, []int{2, 4}, chunks))
	if s.Rows != 10 || s.Groups() != 1 || len(s.Leaves) != 2 || s.Leaves[1].Name != "c4" || s.Leaves[1].Logical != Plain {
		t.Errorf("%+v", s.Leaves)
	}
	if bytes.Contains(s.raw, []byte("future")) || !bytes.Contains(s.raw, []byte("by hand")) {
		t.Error("the subset keeps unknown fields, or loses created_by")
	}
}

func TestRefusals(t *testing.T) {
	file := func(footer []byte, magic string) []byte {
		b := append([]byte("PAR1"), make([]byte, handmadeEnd-4)...)
		b = append(b, footer...)
		return append(b, byte(len(footer)), byte(len(footer)>>8), byte(len(footer)>>16), 0, magic[0], magic[1], magic[2], magic[3])
	}
	good := handmade(true, true)
	swap := func(old, new string) []byte { return bytes.Replace(good, []byte(old), []byte(new), 1) }
	cases := []struct {
		name string
		file []byte
		want string
	}{
		{"empty", nil, "at least 12 bytes"},
		{"not Parquet", []byte("z,ra,dec\n0.1,2,3\n"), "not Parquet"},
		{"bytes after the end", append(file(good, "PAR1"), "more"...), "bytes were appended"},
		{"encrypted footer", file(good, "PARE"), "encrypted"},
		{"encrypted columns", file(append(good[:len(good)-1:len(good)-1], append(appendHeader(nil, 900, 8, typeStruct), 0, 0)...), "PAR1"), "encrypted"},
		{"footer length", append(file(good, "PAR1")[:handmadeEnd+len(good)], 255, 255, 255, 127, 'P', 'A', 'R', '1'), "footer says it has"},
		{"rows", file(swap("\x16\x28\x19\x2c", "\x16\x2a\x19\x2c"), "PAR1"), "footer says 21 rows"},
	}
	for _, c := range cases {
		_, err := Read(bytes.NewReader(c.file), int64(len(c.file)))
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want %q", c.name, err, c.want)
		}
	}
	if _, err := Read(bytes.NewReader(file(good, "PAR1")), int64(len(file(good, "PAR1")))); err != nil {
		t.Errorf("the good one: %v", err)
	}
}

func TestExtendRefusesHugeFooter(t *testing.T) {
	f := parse(t, handmade(true, true))
	n, err := f.Extend(io.Discard, graft(f))
	if err != nil {
		t.Fatal(err)
	}
	if _, err := f.extend(io.Discard, graft(f), n); err != nil {
		t.Errorf("at the limit: %v", err)
	}
	if _, err := f.extend(io.Discard, graft(f), n-1); !errors.Is(err, ErrTooLarge) {
		t.Errorf("beyond the limit: %v, want ErrTooLarge", err)
	}
}

func TestTruncatedFooterIsAnError(t *testing.T) {
	raw := handmade(true, true)
	for n := range raw {
		if _, err := Parse(raw[:n:n], handmadeEnd); err == nil {
			t.Fatalf("the first %d of %d bytes pass as a footer", n, len(raw))
		}
	}
}

// TestMovedIndexes: only the offsets of page indexes change in old chunks.
func TestMovedIndexes(t *testing.T) {
	raw := handmadeFooter(true, true, true)
	f := parse(t, raw)
	chunks, err := f.Chunks(0, nil)
	if err != nil || chunks[0].OffsetIndex != (Place{100, 20}) || chunks[4].ColumnIndex != (Place{200, 30}) || !f.Indexed {
		t.Fatalf("%+v, indexed %v, %v", chunks[0], f.Indexed, err)
	}
	x := none(f)
	x.Group = func(int) (GroupExtension, error) {
		moved := make([]MovedIndexes, len(chunks))
		for i := range moved {
			moved[i] = MovedIndexes{OffsetIndex: 600 + int64(i), ColumnIndex: 700 + int64(i)}
		}
		return GroupExtension{Moved: moved}, nil
	}
	var out bytes.Buffer
	if _, err := f.Extend(&out, x); err != nil {
		t.Fatal(err)
	}
	g := parse(t, out.Bytes())
	after, err := g.Chunks(1, nil)
	if err != nil {
		t.Fatal(err)
	}
	for i := range after {
		if after[i].OffsetIndex != (Place{600 + int64(i), 20}) || after[i].ColumnIndex != (Place{700 + int64(i), 30}) {
			t.Errorf("chunk %d: %+v", i, after[i])
		}
	}
	if was, is := bytes.Count(raw, []byte("future")), bytes.Count(out.Bytes(), []byte("future")); was != is {
		t.Errorf("%d unknown fields became %d", was, is)
	}
}
