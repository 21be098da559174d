package main

import (
	"bytes"
	"flag"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"

	"catenrich/internal/publish"
)

var update = flag.Bool("update", false, "rewrite the want files of testdata/cases")

// casesDir holds one folder a golden case; its README.md says what is in them.
const casesDir = "../../testdata/cases"

func TestCases(t *testing.T) {
	root, err := filepath.Abs(casesDir)
	if err != nil {
		t.Fatal(err)
	}
	entries, err := os.ReadDir(root)
	if err != nil {
		t.Fatal(err)
	}
	for _, e := range entries {
		if e.IsDir() {
			t.Run(e.Name(), func(t *testing.T) { testCase(t, filepath.Join(root, e.Name())) })
		}
	}
}

// testCase runs one folder in a copy of it.
func testCase(t *testing.T, folder string) {
	work := t.TempDir()
	before := copyInputs(t, folder, work)
	t.Chdir(work)
	result := runHere(t, caseArgs(t, folder), bytes.NewReader(before["stdin"]))
	after := readTree(t, work)

	for path, content := range before {
		if now, ok := after[path]; path != "stdin" && (!ok || !bytes.Equal(now, content)) {
			t.Errorf("the run changed %s, which was there before it", path)
		}
		delete(after, path)
	}
	wants := map[string][]byte{
		"want.code":   []byte(strconv.Itoa(result.code) + "\n"),
		"want.stdout": []byte(normalize(result.stdout, work)),
		"want.stderr": []byte(normalize(result.stderr, work)),
	}
	for path, content := range after {
		switch {
		case strings.HasPrefix(path, publish.LockDir+"/"):
			if len(content) > 0 {
				t.Errorf("the lock file %s is not empty", path)
			}
		case result.code != 0:
			t.Errorf("the run failed, and left %s behind", path)
		case strings.HasSuffix(path, ".manifest.json"): // TestManifest looks into these
		case strings.HasSuffix(path, ".columns.csv"): // and TestDescribed into these
		case strings.HasSuffix(path, ".rejects.csv"):
			wants["want.rejects.csv"] = content
		case strings.HasPrefix(path, "out."):
			wants["want.csv"] = unpack(t, path, content)
		default:
			t.Errorf("the run left %s", path)
		}
	}
	compareWants(t, folder, wants)
}

// compareWants compares what a run gave with the want files; a file that is
// not there stands for an empty one.
func compareWants(t *testing.T, folder string, got map[string][]byte) {
	for _, name := range []string{"want.csv", "want.rejects.csv", "want.stdout", "want.stderr", "want.code"} {
		path := filepath.Join(folder, name)
		if *update {
			if len(got[name]) == 0 {
				os.Remove(path)
			} else if err := os.WriteFile(path, got[name], 0o666); err != nil {
				t.Fatal(err)
			}
			continue
		}
		want, err := os.ReadFile(path)
		if err != nil && !os.IsNotExist(err) {
			t.Fatal(err)
		}
		if !bytes.Equal(got[name], want) {
			t.Errorf("%s differs\n got: %q\nwant: %q", name, got[name], want)
		}
	}
}

// copyInputs copies a case without its want files and arguments, and returns
// what it copied; the file called stdin stays away from the disk.
func copyInputs(t *testing.T, folder, work string) map[string][]byte {
	inputs := readTree(t, folder)
	for path, content := range inputs {
		switch {
		case strings.HasPrefix(path, "want.") || path == "args":
			delete(inputs, path)
		case path == "stdin":
		default:
			to := filepath.Join(work, path)
			if err := os.MkdirAll(filepath.Dir(to), 0o777); err != nil {
				t.Fatal(err)
			}
			if err := os.WriteFile(to, content, 0o666); err != nil {
				t.Fatal(err)
			}
		}
	}
	return inputs
}

// caseArgs reads the file args, one argument a line; without it the case is a
// job file.
func caseArgs(t *testing.T, folder string) []string {
	text, err := os.ReadFile(filepath.Join(folder, "args"))
	if os.IsNotExist(err) {
		return []string{"run", "job.toml", "--quiet"}
	}
	if err != nil {
		t.Fatal(err)
	}
	return strings.Split(strings.TrimSuffix(string(text), "\n"), "\n")
}

// readTree returns the files below dir by their paths.
func readTree(t testing.TB, dir string) map[string][]byte {
	t.Helper()
	tree := make(map[string][]byte)
	err := filepath.WalkDir(dir, func(path string, e fs.DirEntry, err error) error {
		if err != nil || e.IsDir() {
			return err
		}
		content, err := os.ReadFile(path)
		if err != nil {
			return err
		}
		name, err := filepath.Rel(dir, path)
		tree[filepath.ToSlash(name)] = content
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return tree
}

// unpack undoes the compression that a path's suffix speaks of.
func unpack(t testing.TB, path string, content []byte) []byte {
	t.Helper()
	var text []byte
	var err error
	switch filepath.Ext(path) {
	case ".gz":
		var z *gzip.Reader
		if z, err = gzip.NewReader(bytes.NewReader(content)); err == nil {
			text, err = io.ReadAll(z)
		}
	case ".zst":
		var z *zstd.Decoder
		if z, err = zstd.NewReader(nil); err == nil {
			text, err = z.DecodeAll(content, nil)
		}
	default:
		return content
	}
	if err != nil {
		t.Fatalf("%s: %v", path, err)
	}
	return text
}

var (
	elapsed    = regexp.MustCompile(` in [0-9.]+ s\n`)
	configHash = regexp.MustCompile(`\b[0-9a-f]{64}\b`)
)

// normalize replaces what differs between runs, and the config hash, which
// moves with every setting that a release adds.
func normalize(text, work string) string {
	text = strings.ReplaceAll(text, work, "/CASE")
	text = elapsed.ReplaceAllString(text, " in TIME s\n")
	return configHash.ReplaceAllString(text, "CONFIG-HASH")
}

// A runResult is what a run said.
type runResult struct {
	code           int
	stdout, stderr string
}

// runHere runs the program in process, in the working directory.
func runHere(t testing.TB, args []string, stdin io.Reader) runResult {
	t.Helper()
	if stdin == nil {
		stdin = strings.NewReader("")
	}
	var stdout, stderr bytes.Buffer
	code := run(args, io.NopCloser(stdin), &stdout, &stderr)
	return runResult{code, stdout.String(), stderr.String()}
}

// mustRun is runHere for runs that must succeed.
func mustRun(t testing.TB, args ...string) runResult {
	t.Helper()
	r := runHere(t, args, nil)
	if r.code != 0 {
		t.Fatalf("catenrich %s: exit %d\n%s", strings.Join(args, " "), r.code, r.stderr)
	}
	return r
}

// writeFile writes a file below the working directory.
func writeFile(t testing.TB, path, text string) {
	t.Helper()
	if err := os.MkdirAll(filepath.Dir(path), 0o777); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(path, []byte(text), 0o666); err != nil {
		t.Fatal(err)
	}
}

func readFile(t testing.TB, path string) []byte {
	t.Helper()
	content, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return content
}

// listing names every file below dir, sorted, one a line.
func listing(t testing.TB, dir string) string {
	t.Helper()
	var names []string
	for path := range readTree(t, dir) {
		names = append(names, path)
	}
	slices.Sort(names)
	return fmt.Sprintln(strings.Join(names, "\n"))
}
