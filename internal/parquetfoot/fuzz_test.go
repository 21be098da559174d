package parquetfoot

import (
	"bytes"
	"os"
	"path/filepath"
	"testing"
)

// FuzzExtend: whatever parses can be extended, and then parses again with
// everything that it had.
func FuzzExtend(f *testing.F) {
	f.Add(handmade(true, true))
	f.Add(handmade(false, false))
	files, _ := filepath.Glob("../../testdata/small/*.parquet")
	for _, name := range files {
		b, err := os.ReadFile(name)
		if err != nil {
			f.Fatal(err)
		}
		n := len(b) - 8
		size := int(b[n]) | int(b[n+1])<<8 | int(b[n+2])<<16
		f.Add(b[n-size : n])
	}
	f.Fuzz(func(t *testing.T, raw []byte) {
		foot, err := Parse(raw, 1<<40)
		if err != nil {
			return
		}
		var same, more bytes.Buffer
		if _, err := foot.Extend(&same, none(foot)); err != nil {
			t.Fatalf("extending by nothing: %v", err)
		}
		if _, err := Parse(same.Bytes(), 1<<40); err != nil {
			t.Fatalf("what was extended by nothing does not parse: %v", err)
		}
		if _, err := foot.Extend(&more, graft(foot)); err != nil {
			t.Fatal(err)
		}
		g, err := Parse(more.Bytes(), 1<<40)
		if err != nil {
			t.Fatalf("the extended footer does not parse: %v", err)
		}
		if len(g.Leaves) != len(foot.Leaves)+2 || g.Rows != foot.Rows || g.Groups() != foot.Groups() {
			t.Fatalf("%d leaves became %d", len(foot.Leaves), len(g.Leaves))
		}
		for i := range foot.Leaves {
			if foot.Leaves[i] != g.Leaves[i] {
				t.Fatalf("leaf %+v became %+v", foot.Leaves[i], g.Leaves[i])
			}
		}
		for i := range foot.groups {
			chunks, err := foot.Chunks(i, nil)
			if err != nil {
				t.Fatal(err)
			}
			leaves := make([]int, len(chunks))
			for l := range leaves {
				leaves[l] = l
			}
			if _, err := Parse(foot.Subset(i, leaves, chunks), 1<<40); err != nil && foot.Groups() > 0 {
				t.Fatalf("the subset of row group %d does not parse: %v", i, err)
			}
		}
	})
}
