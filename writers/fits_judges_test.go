package writers

import (
	"bytes"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"testing"

	"catenrich/internal/table"
)

// The judges are programs of Debian: fitsverify, which checks a file against
// the standard, and python3-fitsio, which reads it. Both stand on CFITSIO, which
// shares nothing with this code. Where they are absent their tests are skipped,
// but not under CI=true.

// need skips a test whose judge is absent.
func need(t testing.TB, present bool, debian string) {
	t.Helper()
	if present {
		return
	}
	if os.Getenv("CI") == "true" {
		t.Fatalf("%s is not installed, and CI=true: nothing is skipped", debian)
	}
	t.Skipf("%s is not installed (apt-get install %s)", debian, debian)
}

// python is an interpreter that has fitsio; "" where there is none.
var python = sync.OnceValue(func() string {
	for _, name := range []string{"python3", "/usr/bin/python3"} {
		if exec.Command(name, "-c", "import fitsio, numpy").Run() == nil {
			return name
		}
	}
	return ""
})

// verifyFITS runs fitsverify; -e leaves out the warnings.
func verifyFITS(t testing.TB, path string) {
	t.Helper()
	if out, err := exec.Command("fitsverify", "-q", "-e", path).CombinedOutput(); err != nil || !bytes.Contains(out, []byte("verification OK")) {
		t.Errorf("fitsverify %s: %v\n%s", filepath.Base(path), err, out)
	}
}

func runPython(t testing.TB, script string, args ...string) {
	t.Helper()
	c := exec.Command(python(), append([]string{filepath.Join("testdata", script)}, args...)...)
	if out, err := c.CombinedOutput(); err != nil {
		t.Fatalf("%s %s: %v\n%s", script, strings.Join(args, " "), err, out)
	}
}

// TestJudges: whatever CFITSIO writes without an error comes out without one,
// and CFITSIO reads in it what was there and what was added.
func TestJudges(t *testing.T) {
	_, err := exec.LookPath("fitsverify")
	need(t, err == nil, "fitsverify")
	need(t, python() != "", "python3-fitsio")
	dir := t.TempDir()
	runPython(t, "make_fits.py", dir)
	inputs, err := filepath.Glob(filepath.Join(dir, "*.fits*"))
	if err != nil || len(inputs) < 5 {
		t.Fatalf("%d inputs were made, %v", len(inputs), err)
	}
	for _, in := range inputs {
		for suffix, codec := range map[string]string{"": "", ".gz": "gzip"} {
			t.Run(filepath.Base(in)+" to fits"+suffix, func(t *testing.T) {
				verifyFITS(t, in)
				content, err := os.ReadFile(in)
				if err != nil {
					t.Fatal(err)
				}
				enriched, _ := enrichFITS(t, content, table.Spec{Codec: codec})
				out := writeTemp(t, t.TempDir(), "out.fits"+suffix, enriched)
				verifyFITS(t, out)
				runPython(t, "compare_fits.py", in, out)
			})
		}
	}
}
