package demo

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
)

// smallDigest is the SHA-256 of all that is generated for 2000 rows: catalogue,
// truth, and the files in templates. It moves only when the demo is meant to
// change.
const smallDigest = "4a35ea1eec9936761deb9295a173791f707a2989455417a720873ef1861a878d"

// smallSurvey returns the digest of a survey of 2000 rows.
func smallSurvey(t testing.TB) string {
	t.Helper()
	dir := t.TempDir()
	if _, err := Write(dir, Options{Rows: 2000}); err != nil {
		t.Fatal(err)
	}
	h := sha256.New()
	for _, name := range []string{Catalogue, Truth, KTable, SED, Bandpass} {
		content, err := os.ReadFile(join(dir, name))
		if err != nil {
			t.Fatal(err)
		}
		h.Write(content)
	}
	return hex.EncodeToString(h.Sum(nil))
}

func TestBytes(t *testing.T) {
	if got := smallSurvey(t); got != smallDigest {
		t.Errorf("SHA-256 of a small survey = %s, want %s: it has changed", got, smallDigest)
	}
}

// TestBytesWithoutFMA repeats TestBytes in a process that believes its
// processor has no fused multiply-add.
func TestBytesWithoutFMA(t *testing.T) {
	self, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	command := exec.Command(self, "-test.run=^TestBytes$", "-test.v")
	command.Env = append(os.Environ(), "GODEBUG=cpu.fma=off")
	out, err := command.CombinedOutput()
	if err != nil || !bytes.Contains(out, []byte("--- PASS: TestBytes")) {
		t.Errorf("with cpu.fma=off: %v\n%s", err, out)
	}
}

func TestSeedAndRowsMatter(t *testing.T) {
	base, err := os.ReadFile(write(t, Options{Rows: 2000}))
	if err != nil {
		t.Fatal(err)
	}
	again, _ := os.ReadFile(write(t, Options{Rows: 2000, Seed: DefaultSeed}))
	other, _ := os.ReadFile(write(t, Options{Rows: 2000, Seed: 1}))
	if !bytes.Equal(base, again) {
		t.Error("the default seed, spelt out, gives another survey")
	}
	if bytes.Equal(base, other) {
		t.Error("another seed gives the same survey")
	}
	for _, rows := range []int{-1, 1999, 1e9 + 1} {
		if _, err := Write(t.TempDir(), Options{Rows: rows}); err == nil || !strings.Contains(err.Error(), "rows") {
			t.Errorf("Rows %d: error %v, want one about rows", rows, err)
		}
	}
}

// write writes a survey and returns the catalogue's path.
func write(t testing.TB, o Options) string {
	t.Helper()
	dir := t.TempDir()
	if _, err := Write(dir, o); err != nil {
		t.Fatal(err)
	}
	return filepath.Join(dir, Catalogue)
}

func BenchmarkWrite(b *testing.B) {
	b.ReportAllocs()
	for b.Loop() {
		dir := b.TempDir()
		if _, err := Write(dir, Options{}); err != nil {
			b.Fatal(err)
		}
	}
}
