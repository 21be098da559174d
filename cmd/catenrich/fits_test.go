package main

import (
	"bytes"
	"encoding/binary"
	"encoding/csv"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"

	"catenrich/readers/fitstest"
)

// fitsCatalogue makes a FITS file with every kind of trouble in its redshifts,
// and sums, a heap and other units around it.
func fitsCatalogue(rows int, seed uint64) []byte {
	r := rand.New(rand.NewPCG(seed, 3))
	z, id := make([]float64, rows), make([]int32, rows)
	for i := range rows {
		id[i], z[i] = int32(i), r.ExpFloat64()
		if i%50 < 4 {
			z[i] = []float64{math.NaN(), -99, -0.01, math.Inf(1)}[i%50]
		}
	}
	tb := fitstest.Table{Rows: rows, Heap: bytes.Repeat([]byte("heap "), 50_000), Gap: 3,
		Columns: []fitstest.Column{{Name: "id", Form: "J", Cells: fitstest.Big(id)}, fitstest.Doubles("z", z...)},
		Cards:   []string{fitstest.Text("EXTNAME", "CAT"), fitstest.Text("CHECKSUM", "0"), fitstest.Text("DATASUM", "0")}}
	return fitstest.File(fitstest.Image("BEFORE", 100_000), tb.HDU(), fitstest.Image("AFTER", 100_000))
}

// TestFITSSameBytes: output and manifest do not depend on how the work is
// carried out.
func TestFITSSameBytes(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in/a.fits", string(fitsCatalogue(700_000, 1)))
	writeFile(t, "job.toml", strings.Replace(propertyJob, `"in/*.csv"`, `"in/a.fits"`, 1))
	writeFile(t, "gzip.toml", strings.NewReplacer(`"in/*.csv"`, `"in/a.fits"`, `output.directory = "out"`, `output.file = "out/packed.fits.gz"`).Replace(propertyJob))
	var want map[string][]byte
	for _, options := range []string{"--workers 1", "--workers 2", "--workers 7", "--workers 64", "--workers 7 --memory 64M"} {
		os.RemoveAll("out")
		for _, job := range []string{"job.toml", "gzip.toml"} {
			mustRun(t, append([]string{"run", job, "--quiet"}, strings.Fields(options)...)...)
		}
		tree := published(t, "out")
		if want == nil {
			want = tree
			if len(want) != 6 {
				t.Fatalf("2 outputs, manifests, a release manifest and a report are wanted, and there are\n%s", listing(t, "out"))
			}
			// The codec is a setting: the config hash in the header differs, and with
			// it the checksums.
			unlike := regexp.MustCompile(`[0-9a-f]{64}|(CHECKSUM|DATASUM )= '[^']*'( / [^=]{40})?`)
			packed, plain := unpack(t, "x.gz", want["packed.fits.gz"]), want["a.fits"]
			if !bytes.Equal(unlike.ReplaceAll(packed, nil), unlike.ReplaceAll(plain, nil)) {
				t.Error("the compressed output holds another file than the plain one")
			}
		}
		sameTrees(t, options, tree, want)
	}
	again := mustRun(t, "run", "job.toml", "--check", "full")
	if !strings.Contains(again.stderr, "0 written, 1 up to date") {
		t.Errorf("a second run says\n%s", again.stderr)
	}
}

// TestQuillRidgeAsFITS: the demo's catalogue gets the same derived values, bit
// for bit, from its CSV and from a FITS table of the same numbers.
func TestQuillRidgeAsFITS(t *testing.T) {
	t.Chdir(t.TempDir())
	mustRun(t, "demo", "d", "--rows", "3000", "--quiet")
	rejected, rows := csvRows(t, "d/enriched/quill_ridge.csv.rejects.csv"), csvRows(t, "d/enriched/quill_ridge.csv")
	if len(rejected) < 2 || len(rows) < 2900 {
		t.Fatalf("%d rows and %d rejects", len(rows)-1, len(rejected)-1)
	}
	names, rows := rows[0], rows[1:]
	added := slices.Index(names, "comoving_distance")
	tb := fitstest.Table{Rows: len(rows), Columns: []fitstest.Column{
		fitstest.Doubles("z_best", numbersOf(rows, slices.Index(names, "z_best"))...),
		fitstest.Doubles("zflag", numbersOf(rows, slices.Index(names, "zflag"))...),
	}}
	writeFile(t, "d/quill_ridge.fits", string(fitstest.File(tb.HDU())))
	job := string(readFile(t, "d/quill_ridge.toml"))
	job = strings.Replace(job, `files = ["quill_ridge.csv", "quill_ridge_wide.parquet"]`, `files = ["quill_ridge.fits"]`, 1)
	writeFile(t, "d/fits.toml", job)
	mustRun(t, "run", "d/fits.toml", "--quiet")

	u := fitstest.Split(t, readFile(t, "d/enriched/quill_ridge.fits"))[1]
	if want := 2 + len(names) - added; int(u.Int(t, "TFIELDS")) != want {
		t.Fatalf("%d columns, want %d", u.Int(t, "TFIELDS"), want)
	}
	compared := 0
	for i, name := range names[added:] {
		if got, _ := u.Value(fmt.Sprintf("TTYPE%d", i+3)); got != name {
			t.Fatalf("column %d is %q, want %q", i+3, got, name)
		}
		cells, want := u.Column(t, i+3), numbersOf(rows, added+i)
		for row := range rows {
			got, want := cells[row], want[row]
			if name == "enrich_status" { // text that is no number is missing in FITS
				got, want = float64(int(got)&^3), float64(int(want)&^3)
			}
			if math.Float64bits(got) != math.Float64bits(want) && (got == got || want == want) {
				t.Fatalf("row %d, %s: %v in FITS, %v in CSV", row+1, name, got, want)
			}
			compared++
		}
	}
	if compared < 40*2900 {
		t.Errorf("only %d cells were compared", compared)
	}
}

func csvRows(t *testing.T, path string) [][]string {
	t.Helper()
	r := csv.NewReader(bytes.NewReader(readFile(t, path)))
	r.Comment, r.FieldsPerRecord = '#', -1
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	return rows
}

// numbersOf reads one column: NaN for what is no number, 0 and 1 for false and
// true.
func numbersOf(rows [][]string, column int) []float64 {
	cells := make([]float64, len(rows))
	for i, row := range rows {
		v, err := strconv.ParseFloat(row[column], 64)
		if b, flag := map[string]float64{"false": 0, "true": 1}[row[column]]; flag {
			v = b
		} else if err != nil {
			v = math.NaN()
		}
		cells[i] = v
	}
	return cells
}

// TestHDU chooses a table by flag and by key; each choice is another config.
func TestHDU(t *testing.T) {
	t.Chdir(t.TempDir())
	table := func(name string, z float64) []byte {
		tb := fitstest.Table{Rows: 1, Columns: []fitstest.Column{fitstest.Doubles("z", z)}, Cards: []string{fitstest.Text("EXTNAME", name)}}
		return tb.HDU()
	}
	writeFile(t, "in.fits", string(fitstest.File(table("FIRST", 0.5), table("SECOND", 1))))
	status := func(unit int) uint32 { // of the only row, behind two doubles
		u := fitstest.Split(t, readFile(t, "out.fits"))[unit]
		if u.Int(t, "TFIELDS") != 3 {
			t.Fatalf("unit %d has %d columns, want 3", unit, u.Int(t, "TFIELDS"))
		}
		return binary.BigEndian.Uint32(u.Data[16:])
	}
	hashes := make(map[string]bool)
	for _, c := range []struct {
		args []string
		unit int
	}{{nil, 1}, {[]string{"--hdu", "1"}, 1}, {[]string{"--hdu", "2"}, 2}, {[]string{"--hdu", "second"}, 2}} {
		os.RemoveAll("out.fits")
		r := mustRun(t, append([]string{"run", "in.fits", "--redshift", "z", "--add", "luminosity_distance", "-o", "out.fits", "--replace"}, c.args...)...)
		if got := status(c.unit); got != 0 {
			t.Errorf("%v: status %d", c.args, got)
		}
		mustRun(t, "verify", "out.fits", "--input", ".")
		hashes[configHash.FindString(r.stderr)] = true
	}
	if len(hashes) != 4 {
		t.Errorf("%d config hashes of 4 choices", len(hashes))
	}
	job := "input.files = [\"in.fits\"]\ncolumns.redshift = \"z\"\nadd.columns = [\"luminosity_distance\"]\noutput.file = \"out.fits\"\n"
	for key, want := range map[string]int{"2": 0, `"SECOND"`: 0, `""`: 78, "-1": 78, "1.5": 78, "9": 65, "0": 65, `"THIRD"`: 65} {
		writeFile(t, "job.toml", job+"input.hdu = "+key+"\n")
		if r := runHere(t, []string{"run", "job.toml", "--quiet", "--replace"}, nil); r.code != want || want > 0 && !strings.Contains(r.stderr, "input.hdu") {
			t.Errorf("input.hdu = %s: exit %d, want %d\n%s", key, r.code, want, r.stderr)
		}
	}
}
