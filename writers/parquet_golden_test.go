package writers

import (
	"crypto/sha256"
	"encoding/hex"
	"math"
	"testing"

	"github.com/apache/arrow-go/v18/parquet"
	"github.com/apache/arrow-go/v18/parquet/compress"
	"github.com/apache/arrow-go/v18/parquet/file"

	"catenrich/internal/table"
)

// TestGoldenBytes holds the SHA-256 of outputs. They must be the same on every
// machine; where they change on purpose, so must the program's outputVersion.
func TestGoldenBytes(t *testing.T) {
	// Uncompressed, since snappy by assembly and snappy by Go differ.
	s := shape{groups: []int{70000, 300}, props: []parquet.WriterProperty{parquet.WithCompression(compress.Codecs.Uncompressed)}}
	path := s.make(t)
	for _, c := range []struct {
		spec table.Spec
		want string
	}{
		{table.Spec{}, "88854881361a6fa792c7595792ade7ec8824afc03c50b58e01a68ae240283a8c"},
		{table.Spec{Encoding: "plain"}, "bce8de0d8284c114ed54911c3b11c41cea154878d263de8d724ecc68a8f829db"},
		{table.Spec{Narrow: true}, "1be2b6aaec486f30831202fcb3f58479c569a23883cdb42ee4fd810d2b3b377d"},
		{table.Spec{Codec: "snappy"}, "8c686dc714adb5cbbe87f1dbdd01855625003dc285d49ceab60573be65925991"},
		{table.Spec{Codec: "none"}, "707ca163cbe7822e1e5c806b5d850be1c13a562f0d1c67bf4b5256d4d42eeb2a"},
		{table.Spec{Codec: "zstd", Level: 3}, "f6b50c7e7861bc86137b18abcce12f6659ab3a9699ad5abbf0cf647b7a81b5a8"},
	} {
		c.spec.Added = added
		out := newFileOutput(t)
		job := graftJob{path: path, want: []string{"z"}, spec: c.spec, kernel: fill, workers: 2}
		sink, err := job.run(out)
		if err != nil {
			t.Fatal(err)
		}
		in, _ := sink.Verbatim() // the input is arrow-go's affair
		if got := sumAfter(t, out, in); got != c.want {
			t.Errorf("%q %q narrow %v: %s, want %s", c.spec.Encoding, c.spec.Codec, c.spec.Narrow, got, c.want)
		}
	}
}

// sumAfter is the digest of the output from an offset on.
func sumAfter(t *testing.T, o *fileOutput, from int64) string {
	t.Helper()
	rest := make([]byte, o.offset-from)
	if _, err := o.f.ReadAt(rest, from); err != nil {
		t.Fatal(err)
	}
	sum := sha256.Sum256(rest)
	return hex.EncodeToString(sum[:])
}

func TestNarrow(t *testing.T) {
	for _, encoding := range []string{"", "plain"} {
		s := shape{groups: []int{65536, 9}}
		out := newFileOutput(t)
		job := graftJob{path: s.make(t), want: []string{"z"}, spec: table.Spec{Added: added, Narrow: true, Encoding: encoding}, kernel: fill, workers: 1}
		if _, err := job.run(out); err != nil {
			t.Fatal(err)
		}
		r := openArrow(t, out.f.Name())
		row := int64(0)
		for g := range r.NumRowGroups() {
			n := int(r.RowGroup(g).NumRows())
			c, err := r.RowGroup(g).Column(3)
			if err != nil {
				t.Fatal(err)
			}
			values, defs := make([]float32, n), make([]int16, n)
			if _, _, err := c.(*file.Float32ColumnChunkReader).ReadBatch(int64(n), values, defs, nil); err != nil {
				t.Fatal(err)
			}
			next := 0
			for i := range n {
				got := float32(math.NaN())
				if defs[i] == 1 {
					got = values[next]
					next++
				}
				if want := float32(expectNoise(row)); math.Float32bits(got) != math.Float32bits(want) && !(got != got && want != want) {
					t.Fatalf("row %d: %v, want %v", row, got, want)
				}
				row++
			}
		}
	}
}
