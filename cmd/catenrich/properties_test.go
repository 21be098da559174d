package main

import (
	"bytes"
	"crypto/sha256"
	"encoding/csv"
	"fmt"
	"io"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"catenrich/internal/publish"
	"catenrich/pipeline/ledger"
)

// catalogue makes a text of rows with every kind of trouble in it: missing and
// negative redshifts, sentinels, words, comments, broken records, quotes that
// hold newlines. The same seed gives the same text.
func catalogue(rows int, seed uint64) string {
	r := rand.New(rand.NewPCG(seed, 2))
	var b strings.Builder
	b.WriteString("id,z,note\n")
	for i := range rows {
		switch r.IntN(60) {
		case 0:
			fmt.Fprintf(&b, "%d,,missing\n", i)
		case 1:
			fmt.Fprintf(&b, "%d,-99,sentinel\n", i)
		case 2:
			fmt.Fprintf(&b, "%d,unknown,word\n", i)
		case 3:
			fmt.Fprintf(&b, "%d,%.6f,\"two\nlines, \"\"quoted\"\"\"\n", i, r.Float64())
		case 4:
			fmt.Fprintf(&b, "%d,%.5f,negative\n", i, -r.Float64()/100)
		case 5:
			fmt.Fprintf(&b, "# comment %d\n\n", i)
		case 6:
			fmt.Fprintf(&b, "%d,broken\n", i)
		default:
			fmt.Fprintf(&b, "%d,%.7f,plain text of some length\n", i, r.ExpFloat64())
		}
	}
	return b.String()
}

// propertyJob is a job on the catalogue above.
const propertyJob = `
input.files = ["in/*.csv"]
input.csv.comment = "#"
columns.redshift = "z"
columns.redshift_missing = [-99]
add.columns = ["luminosity_distance", "lookback_time", "superluminal_now"]
output.directory = "out"
limits.max_rejects = 1000000
[[cosmology]]
set = "seventy-thirty"
[[cosmology]]
h0 = 73
omega_m = 0.3
suffix = "_h73"
`

// published returns what lies below dir, without the locks.
func published(t *testing.T, dir string) map[string][]byte {
	t.Helper()
	tree := readTree(t, dir)
	for path := range tree {
		if strings.Contains(path, publish.LockDir+"/") {
			delete(tree, path)
		}
	}
	return tree
}

func sameTrees(t *testing.T, what string, got, want map[string][]byte) {
	t.Helper()
	for path := range want {
		if !bytes.Equal(got[path], want[path]) {
			t.Errorf("%s: %s has %d bytes that differ from the %d of the first run", what, path, len(got[path]), len(want[path]))
		}
	}
	for path := range got {
		if _, ok := want[path]; !ok {
			t.Errorf("%s: %s appears", what, path)
		}
	}
}

// TestSameBytes: output, manifest and rejects do not depend on how the work is
// carried out.
func TestSameBytes(t *testing.T) {
	t.Chdir(t.TempDir())
	text := catalogue(120_000, 1)
	writeFile(t, "job.toml", strings.Replace(propertyJob, `"in/*.csv"`, `"-"`, 1))
	writeFile(t, "gzip.toml", strings.NewReplacer(`"in/*.csv"`, `"-"`, `output.directory = "out"`, `output.file = "out/packed.csv.gz"`).Replace(propertyJob))
	var want map[string][]byte
	for _, options := range []string{
		"--workers 1", "--workers 2", "--workers 7", "--workers 64 --memory 8G", "--workers 1 --memory 64M", "--workers 7 --memory 64M",
	} {
		os.RemoveAll("out")
		for _, job := range []string{"job.toml", "gzip.toml"} {
			args := append([]string{"run", job, "--quiet"}, strings.Fields(options)...)
			if r := runHere(t, args, strings.NewReader(text)); r.code != 0 {
				t.Fatalf("%s: exit %d\n%s", options, r.code, r.stderr)
			}
		}
		tree := published(t, "out")
		if want == nil {
			want = tree
			if len(want) != 10 {
				t.Fatalf("2 outputs, manifests, sidecars of columns and rejects, a release manifest and a report are wanted, and there are\n%s", listing(t, "out"))
			}
			if plain := want["standard-input"]; len(plain) < 6<<20 {
				t.Fatalf("%d bytes are too few for several chunks in flight", len(plain))
			}
			if !bytes.Equal(unpack(t, "x.gz", want["packed.csv.gz"]), want["standard-input"]) {
				t.Error("the compressed output holds another text than the plain one")
			}
		}
		sameTrees(t, options, tree, want)
	}
}

// TestSameBytesOfManyUnits: the same with many small units in flight.
func TestSameBytesOfManyUnits(t *testing.T) {
	t.Chdir(t.TempDir())
	for i := range 24 {
		writeFile(t, fmt.Sprintf("in/night-%02d.csv", i), catalogue(1+i*i*5, uint64(i)))
	}
	writeFile(t, "in/big.csv", catalogue(300_000, 99)) // two workers of its own
	writeFile(t, "job.toml", propertyJob)
	var want map[string][]byte
	for _, workers := range []string{"1", "7", "64"} {
		os.RemoveAll("out")
		mustRun(t, "run", "job.toml", "--quiet", "--workers", workers)
		tree := published(t, "out")
		if want == nil {
			want = tree
			if want["big.csv"] == nil || want["night-23.csv.manifest.json"] == nil {
				t.Fatalf("the outputs are not there:\n%s", listing(t, "out"))
			}
		}
		sameTrees(t, "--workers "+workers, tree, want)
	}
}

// TestChunkEdges: a row gets the same bytes wherever the cuts between chunks
// fall, seen by moving them with a comment of growing length.
func TestChunkEdges(t *testing.T) {
	t.Chdir(t.TempDir())
	body := strings.TrimPrefix(catalogue(60_000, 5), "id,z,note\n")
	var want string
	for _, shift := range []int{0, 1, 17, 4096, 300_000} {
		head := "id,z,note\n#" + strings.Repeat("x", shift) + "\n"
		r := runHere(t, []string{"run", "-", "--comment", "#", "--redshift", "z", "--add", "times", "--max-rejects", "99999", "-o", "-", "--quiet"}, strings.NewReader(head+body))
		if r.code != 0 {
			t.Fatal(r.stderr)
		}
		_, rows, _ := strings.Cut(r.stdout, "x\n")
		if shift == 0 {
			_, rows, _ = strings.Cut(r.stdout, "\n#\n")
			want = rows
		}
		if rows != want {
			t.Errorf("after a comment of %d bytes the rows are others", shift)
		}
	}
}

// TestUpToDate: a second run writes nothing, and a changed job, input or
// output is noticed.
func TestUpToDate(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in/a.csv", catalogue(500, 1))
	writeFile(t, "in/b.csv", catalogue(500, 2))
	writeFile(t, "job.toml", propertyJob)
	first := mustRun(t, "run", "job.toml")
	if !strings.Contains(first.stderr, "2 units: 2 written, 0 up to date") {
		t.Errorf("the first run says\n%s", first.stderr)
	}
	before, times := readTree(t, "out"), modTimes(t, "out")

	for _, args := range [][]string{{"run", "job.toml"}, {"run", "job.toml", "--check", "full", "--workers", "1", "--memory", "64M"}} {
		again := mustRun(t, args...)
		if !strings.Contains(again.stderr, "2 units: 0 written, 2 up to date") {
			t.Errorf("%v says\n%s", args, again.stderr)
		}
		if now := modTimes(t, "out"); now != times {
			t.Errorf("%v wrote:\n%s\nbefore:\n%s", args, now, times)
		}
	}

	t.Run("title and limit", func(t *testing.T) {
		writeFile(t, "job.toml", "title = \"another\"\n"+strings.Replace(propertyJob, "1000000", "2000000", 1))
		if r := mustRun(t, "run", "job.toml"); !strings.Contains(r.stderr, "0 written, 2 up to date") {
			t.Errorf("another title and limit: %s", r.stderr)
		}
	})
	t.Run("changed job", func(t *testing.T) {
		writeFile(t, "job.toml", strings.Replace(propertyJob, "73", "74", 1))
		if r := mustRun(t, "run", "job.toml"); !strings.Contains(r.stderr, "2 written, 0 up to date") {
			t.Errorf("a changed H0, without --replace: %s", r.stderr)
		}
		if bytes.Equal(readFile(t, "out/a.csv"), before["a.csv"]) {
			t.Error("the output is the old one")
		}
		writeFile(t, "job.toml", propertyJob)
		mustRun(t, "run", "job.toml")
		sameTrees(t, "the first job again", readTree(t, "out"), before)
	})
	t.Run("changed input", func(t *testing.T) {
		writeFile(t, "in/a.csv", catalogue(500, 3))
		if r := mustRun(t, "run", "job.toml"); !strings.Contains(r.stderr, "1 written, 1 up to date") {
			t.Errorf("one changed input: %s", r.stderr)
		}
		writeFile(t, "in/a.csv", catalogue(500, 1))
		mustRun(t, "run", "job.toml")
		sameTrees(t, "the first input again", readTree(t, "out"), before)
	})
	t.Run("damaged output", func(t *testing.T) {
		damaged := bytes.Replace(before["a.csv"], []byte("0."), []byte("1."), 1)
		writeFile(t, "out/a.csv", string(damaged))
		r := runHere(t, []string{"run", "job.toml"}, nil)
		if r.code != 73 || !bytes.Equal(readFile(t, "out/a.csv"), damaged) {
			t.Errorf("an output that was edited is no longer ours: exit %d, want 73\n%s", r.code, r.stderr)
		}
		mustRun(t, "run", "job.toml", "--replace")
		sameTrees(t, "with --replace", readTree(t, "out"), before)
	})
	t.Run("removed output", func(t *testing.T) {
		os.Remove("out/b.csv")
		mustRun(t, "run", "job.toml")
		sameTrees(t, "after a removal", readTree(t, "out"), before)
	})
	t.Run("fewer rejects", func(t *testing.T) { // the sidecar of the old output goes with it
		writeFile(t, "in/a.csv", "id,z,note\n1,0.5,x\n")
		mustRun(t, "run", "job.toml")
		if _, err := os.Stat("out/a.csv.rejects.csv"); !os.IsNotExist(err) {
			t.Errorf("the rejects of the old input are still there: %v", err)
		}
	})
}

// modTimes lists the files below dir with their modification times.
func modTimes(t *testing.T, dir string) string {
	t.Helper()
	var b strings.Builder
	for _, name := range strings.Fields(listing(t, dir)) {
		info, err := os.Lstat(filepath.Join(dir, name))
		if err != nil {
			t.Fatal(err)
		}
		fmt.Fprintln(&b, name, info.ModTime().Format(time.RFC3339Nano), info.Size())
	}
	return b.String()
}

// TestForeignOutput: what catenrich did not write it does not replace unasked,
// not even through a symbolic link, whose target it never touches.
func TestForeignOutput(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in.csv", "z\n0.5\n")
	writeFile(t, "precious.csv", "precious\n")
	if err := os.Symlink("precious.csv", "out.csv"); err != nil {
		t.Fatal(err)
	}
	args := []string{"run", "in.csv", "--redshift", "z", "--add", "times", "-o", "out.csv", "--quiet"}
	if r := runHere(t, args, nil); r.code != 73 {
		t.Errorf("a link in the output's place: exit %d, want 73\n%s", r.code, r.stderr)
	}
	mustRun(t, append(args, "--replace")...)
	if got := string(readFile(t, "precious.csv")); got != "precious\n" {
		t.Errorf("the link's target became %q", got)
	}
	if !strings.HasPrefix(string(readFile(t, "out.csv")), "z,lookback_time") {
		t.Error("--replace did not write the output")
	}
}

// TestOneUnitFails: the others are written, the error names the one.
func TestOneUnitFails(t *testing.T) {
	t.Chdir(t.TempDir())
	for i := range 6 {
		writeFile(t, fmt.Sprintf("in/%d.csv", i), "id,z,note\n1,0.5,x\n")
	}
	writeFile(t, "in/3.csv", "id,z,note\n1,\"0.5,x\n")
	writeFile(t, "job.toml", propertyJob)
	for _, workers := range []string{"1", "4"} {
		os.RemoveAll("out")
		r := runHere(t, []string{"run", "job.toml", "--workers", workers, "--quiet"}, nil)
		if r.code != 65 || !strings.Contains(r.stderr, "in/3.csv:2: a quote opens here") || !strings.Contains(r.stderr, "1 of 6 units failed; the others are written") {
			t.Errorf("exit %d, want 65\n%s", r.code, r.stderr)
		}
		tree := published(t, "out")
		if len(tree) != 16 || tree["3.csv"] != nil {
			t.Errorf("5 outputs with manifests and sidecars and a report are wanted, and there are\n%s", listing(t, "out"))
		}
		if page := string(tree["report.html"]); !strings.Contains(page, "Do not hand over") || !strings.Contains(page, "3.csv") {
			t.Error("the report does not say that the release lacks 3.csv")
		}
	}
}

// failingWriter fails after n bytes, as a full disk or a closed pipe does.
type failingWriter struct{ n int }

func (w *failingWriter) Write(p []byte) (int, error) {
	if w.n -= len(p); w.n < 0 {
		return 0, io.ErrClosedPipe
	}
	return len(p), nil
}

// TestStdoutFails: a reader of our output that goes away is an error of
// writing, exit 74.
func TestStdoutFails(t *testing.T) {
	var stderr bytes.Buffer
	code := run([]string{"run", "-", "--redshift", "z", "--add", "times", "--comment", "#", "--max-rejects", "99999", "-o", "-", "--quiet"},
		io.NopCloser(strings.NewReader(catalogue(100_000, 1))), &failingWriter{n: 1 << 20}, &stderr)
	if code != 74 || !strings.Contains(stderr.String(), "standard output") {
		t.Errorf("exit %d, want 74\n%s", code, stderr.String()[max(0, stderr.Len()-400):])
	}
}

// failingReader gives a text, and then an error.
type failingReader struct{ text io.Reader }

func (r failingReader) Read(p []byte) (int, error) {
	n, err := r.text.Read(p)
	if err == io.EOF {
		err = io.ErrUnexpectedEOF
	}
	return n, err
}

// TestStdinFails: an input that fails midway leaves no output, exit 74.
func TestStdinFails(t *testing.T) {
	t.Chdir(t.TempDir())
	r := runHere(t, []string{"run", "-", "--redshift", "z", "--add", "times", "--comment", "#", "--max-rejects", "99999", "-o", "out.csv", "--quiet"},
		failingReader{strings.NewReader(catalogue(100_000, 1))})
	if r.code != 74 || !strings.Contains(r.stderr, "standard input") {
		t.Errorf("exit %d, want 74\n%s", r.code, r.stderr)
	}
	if tree := published(t, "."); len(tree) > 0 {
		t.Errorf("left behind:\n%s", listing(t, "."))
	}
}

// TestManifest: rows are accounted for, and nothing of time, host or path is
// in it.
func TestManifest(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in/a.csv", catalogue(2000, 1))
	writeFile(t, "job.toml", propertyJob)
	mustRun(t, "run", "job.toml", "--quiet")
	here := published(t, "out")
	m, err := ledger.Parse(here["a.csv.manifest.json"])
	if err != nil {
		t.Fatal(err)
	}
	rows, rejects := countRecords(t, readFile(t, "in/a.csv"))
	if m.Output.Rows != rows || m.Tally.Rejects != rejects || m.Input.Rows != rows+rejects || m.Unit != "a.csv" {
		t.Errorf("unit %s: %d rows in, %d out, %d rejects; want a.csv, %d, %d, %d", m.Unit, m.Input.Rows, m.Output.Rows, m.Tally.Rejects, rows+rejects, rows, rejects)
	}
	if sum := sha256.Sum256(here["a.csv"]); m.Output.SHA256 != sum || m.Output.Size != int64(len(here["a.csv"])) {
		t.Error("the manifest has another digest or size of the output")
	}
	if sum := sha256.Sum256(readFile(t, "in/a.csv")); m.Input.SHA256 != sum {
		t.Error("the manifest has another digest of the input")
	}
	if sum := sha256.Sum256(m.Settings); m.ConfigHash != sum {
		t.Error("the config hash is not the SHA-256 of the settings")
	}
	elsewhere := t.TempDir()
	for path, content := range readTree(t, ".") {
		if !strings.HasPrefix(path, "out/") {
			writeFile(t, filepath.Join(elsewhere, path), string(content))
		}
	}
	t.Chdir(elsewhere)
	mustRun(t, "run", filepath.Join(elsewhere, "job.toml"), "--quiet", "--workers", "1")
	sameTrees(t, "in another directory", published(t, "out"), here)
}

// countRecords counts rows and broken records by another reader of CSV.
func countRecords(t *testing.T, text []byte) (rows, rejects int64) {
	t.Helper()
	r := csv.NewReader(bytes.NewReader(text))
	r.Comment, r.FieldsPerRecord = '#', -1
	records, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	for _, record := range records[1:] {
		if len(record) == len(records[0]) {
			rows++
		} else {
			rejects++
		}
	}
	return rows, rejects
}
