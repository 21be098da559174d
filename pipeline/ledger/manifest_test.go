package ledger

import (
	"bytes"
	"crypto/sha256"
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
	"catenrich/internal/table"
)

// batch is a made-up batch of one float and one flag column.
func batch(r *rand.Rand, rows int) (status []int32, distance, faster *table.Column) {
	distance, faster = new(table.Column), new(table.Column)
	distance.Resize(table.Float, rows)
	faster.Resize(table.Flag, rows)
	status = make([]int32, rows)
	for i := range rows {
		distance.Float[i], faster.Flag[i] = r.Float64()*5000, uint8(r.IntN(2))
		if r.IntN(10) == 0 {
			first, second := r.IntN(15), r.IntN(15)
			status[i] = 1<<first | 1<<second
			distance.Float[i] = math.NaN()
			faster.Flag[i] = table.Null
		}
	}
	return status, distance, faster
}

func newTally() *Tally {
	return &Tally{
		Columns:    []*Column{NewColumn("luminosity_distance", true), NewColumn("superluminal_now", false)},
		Extents:    map[string]*Extent{"distance": {}},
		Sums:       map[string]*Sum{"distance": {}},
		Histograms: map[string]*Histogram{"distance": NewHistogram(Linear("distance, Mpc", 1, 0, 100))},
	}
}

func (t *Tally) addBatch(status []int32, distance, faster *table.Column) {
	t.AddRows(status)
	t.Columns[0].Add(distance, status)
	t.Columns[1].Add(faster, status)
	t.Extents["distance"].Add(distance.Float)
	t.Sums["distance"].Add(distance.Float)
	t.Histograms["distance"].Add(distance.Float)
}

func canonicalText(t *testing.T, v any) string {
	t.Helper()
	text, err := canonical(v)
	if err != nil {
		t.Fatal(err)
	}
	return string(text)
}

// TestTallyOrder: batches counted by any number of workers in any order, and
// merged in any order, also into a tally that knows no columns yet.
func TestTallyOrder(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 1))
	type one struct {
		status           []int32
		distance, faster *table.Column
	}
	var batches []one
	want := newTally()
	for range 40 {
		var b one
		b.status, b.distance, b.faster = batch(r, 1+r.IntN(500))
		batches = append(batches, b)
		want.addBatch(b.status, b.distance, b.faster)
	}
	for range 20 {
		r.Shuffle(len(batches), func(i, j int) { batches[i], batches[j] = batches[j], batches[i] })
		workers := make([]*Tally, 1+r.IntN(7))
		for i := range workers {
			workers[i] = want.Empty()
		}
		for _, b := range batches {
			workers[r.IntN(len(workers))].addBatch(b.status, b.distance, b.faster)
		}
		got := new(Tally)
		for _, w := range workers {
			if err := got.Merge(w); err != nil {
				t.Fatal(err)
			}
		}
		if g, w := canonicalText(t, got), canonicalText(t, want); g != w {
			t.Fatalf("%d workers counted\n%.400s, want\n%.400s", len(workers), g, w)
		}
	}
	other := newTally()
	other.Columns[0].Name = "comoving_distance"
	if err := want.Merge(other); fault.Of(err) != fault.Data {
		t.Errorf("tallies of different columns: %v", err)
	}
}

func TestColumnCounts(t *testing.T) {
	c, flags := NewColumn("d", true), NewColumn("f", false)
	cells, flag := new(table.Column), new(table.Column)
	cells.Resize(table.Float, 4)
	flag.Resize(table.Flag, 4)
	copy(cells.Float, []float64{1.5, 0, 2.5, 0})
	cells.Float[1] = math.NaN()
	cells.Float[3] = math.NaN()
	copy(flag.Flag, []uint8{table.True, table.Null, table.False, table.True})
	status := []int32{0, 1, 512, 1 | 4}
	c.Add(cells, status)
	flags.Add(flag, status)
	got := canonicalText(t, []*Column{c, flags})
	want := `[{"extent":{"count":2,"max":2.5,"min":1.5},"name":"d","null_reasons":{"1":2,"4":1},"nulls":2,"sum":{"count":2,"exact":"0x1p+2","value":4},"values":2},` +
		`{"name":"f","null_reasons":{"1":1},"nulls":1,"true":2,"values":3}]`
	if got != want {
		t.Errorf("counted\n%s, want\n%s", got, want)
	}
}

// sample is a manifest with everything in it.
func sample(t *testing.T) *Manifest {
	t.Helper()
	r := rand.New(rand.NewPCG(2, 2))
	tally := newTally()
	tally.addBatch(batch(r, 300))
	tally.Rejects = 2
	settings := json.RawMessage(`{"columns":{"redshift":"z"},"outputVersion":1,"prefix":"é<&"}`)
	info := func(s string) publish.FileInfo {
		return publish.FileInfo{Size: int64(len(s)), SHA256: sha256.Sum256([]byte(s)), Quick: sha256.Sum256([]byte("quick" + s))}
	}
	return &Manifest{
		ConfigHash: sha256.Sum256(settings), Settings: settings, OutputVersion: 1, Unit: "field 7/a.csv",
		Input: File{info("in"), 302}, Output: File{info("out"), 300},
		Verbatim: &Prefix{2, sha256.Sum256([]byte("in"))},
		Sidecars: []publish.Sidecar{{Suffix: ".rejects.csv", FileInfo: info("rejects")}},
		Tally:    *tally,
	}
}

func TestManifestRoundTrip(t *testing.T) {
	text, err := Encode(sample(t))
	if err != nil {
		t.Fatal(err)
	}
	m, err := Parse(text)
	if err != nil {
		t.Fatal(err)
	}
	again, err := Encode(m)
	if err != nil || !bytes.Equal(again, text) {
		t.Fatalf("read and written again (%v):\n%s, want\n%s", err, again, text)
	}
	// "self" by its description, with nothing of this package.
	line := bytes.TrimSuffix(text, []byte("\n"))
	self := regexp.MustCompile(`"self":"([0-9a-f]{64})",`)
	found := self.FindSubmatch(line)
	if found == nil {
		t.Fatalf("no self in %s", line)
	}
	if got := publish.Digest(sha256.Sum256(self.ReplaceAll(line, nil))); got.String() != string(found[1]) {
		t.Errorf("the rest has the digest %v, self says %s", got, found[1])
	}
}

// TestManifestFlips changes every byte of a manifest, twice.
func TestManifestFlips(t *testing.T) {
	text, err := Encode(sample(t))
	if err != nil {
		t.Fatal(err)
	}
	r := rand.New(rand.NewPCG(4, 4))
	for i := range text {
		for _, mask := range []byte{1 << r.IntN(8), byte(1 + r.IntN(255))} {
			text[i] ^= mask
			if _, err := Parse(text); fault.Of(err) != fault.Data || err == nil {
				t.Errorf("byte %d of %d changed by %#x: %v", i, len(text), mask, err)
			}
			text[i] ^= mask
		}
	}
	if _, err := Parse(text); err != nil {
		t.Errorf("unchanged: %v", err)
	}
	for _, cut := range [][]byte{nil, text[:len(text)-1], text[:len(text)/2], append([]byte(" "), text...), append(bytes.Clone(text), '\n')} {
		if _, err := Parse(cut); fault.Of(err) != fault.Data || err == nil {
			t.Errorf("%d of %d bytes were believed", len(cut), len(text))
		}
	}
}

// TestManifestNulls: a manifest that is signed but holds nulls where a
// statistic belongs is refused, since merging it would fail.
func TestManifestNulls(t *testing.T) {
	for _, old := range []string{`"extents":{"distance":{`, `"sums":{"distance":{`, `"histograms":{"distance":{`, `"columns":[{`} {
		m := sample(t)
		switch {
		case strings.HasPrefix(old, `"extents`):
			m.Tally.Extents["distance"] = nil
		case strings.HasPrefix(old, `"sums`):
			m.Tally.Sums["distance"] = nil
		case strings.HasPrefix(old, `"hist`):
			m.Tally.Histograms["distance"] = nil
		default:
			text, err := canonical(map[string]any{"columns": []any{nil}})
			if err != nil {
				t.Fatal(err)
			}
			if err := json.Unmarshal(text, &m.Tally); err != nil || m.Tally.complete() == nil {
				t.Errorf("a null column was believed (%v)", err)
			}
			continue
		}
		text, err := Encode(m)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := Parse(text); fault.Of(err) != fault.Data || err == nil {
			t.Errorf("a null instead of %s was believed", old)
		}
	}
}

func TestManifestAccounts(t *testing.T) {
	for name, wrong := range map[string]func(*Manifest){
		"a row lost":         func(m *Manifest) { m.Output.Rows--; m.Tally.Rows-- },
		"a reject forgotten": func(m *Manifest) { m.Tally.Rejects-- },
		"a row not counted":  func(m *Manifest) { m.Tally.Rows-- },
		"a cell not counted": func(m *Manifest) { m.Tally.Columns[0].Values-- },
	} {
		m := sample(t)
		wrong(m)
		if _, err := Encode(m); fault.Of(err) != fault.Internal || err == nil {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// TestManifestIsPublished: what Encode writes is what publication reads.
func TestManifestIsPublished(t *testing.T) {
	target := filepath.Join(t.TempDir(), "a.csv")
	r, err := publish.Begin(publish.OS, target, publish.Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer r.Abort()
	for _, suffix := range []string{"", ".rejects.csv"} {
		o, err := r.Create(suffix)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := o.Write([]byte("text of " + suffix)); err != nil {
			t.Fatal(err)
		}
	}
	m := sample(t)
	if err := r.Commit(func(record publish.Record) ([]byte, error) { m.Set(record); return Encode(m) }); err != nil {
		t.Fatal(err)
	}
	s, err := publish.Look(publish.OS, target)
	if err != nil || !s.Whole {
		t.Fatalf("published as %+v, %v", s, err)
	}
	if _, err := Parse(s.Manifest); err != nil {
		t.Error(err)
	}
	if text, err := os.ReadFile(target); err != nil || m.Output.SHA256 != publish.Digest(sha256.Sum256(text)) {
		t.Errorf("recorded %v for %q (%v)", m.Output.SHA256, text, err)
	}
}
