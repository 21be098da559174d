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
		{table.Spec{}, "ecd9644a44e03f6596d46ddfb211c6b2fffda8fd6f95417781a9a64a65352392"},
		{table.Spec{Encoding: "plain"}, "51150c0d0c71b762bbd4a02e5e7f3551d62504e17efa3031440113e3fb0824ab"},
		{table.Spec{Narrow: true}, "4c8b925604f2ceac08da5568be98799f441bdb85aa84ece6929a2b85ad75f931"},
		{table.Spec{Codec: "snappy"}, "d87aff867753c6e41e87f291bee972a7e4b1b9203f4ab114a162f318e39590b2"},
		{table.Spec{Codec: "none"}, "d28e82496cab85c7083671dc2441a29ad09eceb50f169403b82eb733b89d4a57"},
		{table.Spec{Codec: "zstd", Level: 3}, "5c547bbdce2c4fd36da8428688bad039221847ee6f280b45c3e87acb0dffda94"},
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
