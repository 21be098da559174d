package publish

import (
	"crypto/sha256"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

func second[T any](_ T, err error) error { return err }

func itoa(n int) string { return strconv.Itoa(n) }

// sha is the SHA-256 of the parts joined.
func sha(parts ...[]byte) [32]byte {
	h := sha256.New()
	for _, p := range parts {
		h.Write(p)
	}
	return [32]byte(h.Sum(nil))
}

// snapshotDir lists names, kinds and contents in a directory.
func snapshotDir(t *testing.T, dir string) string {
	t.Helper()
	entries, err := os.ReadDir(dir)
	if err != nil {
		t.Fatal(err)
	}
	var b strings.Builder
	for _, e := range entries {
		content, _ := os.ReadFile(filepath.Join(dir, e.Name()))
		fmt.Fprintf(&b, "%s %v %q\n", e.Name(), e.Type(), content)
	}
	return b.String()
}
