package job

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
)

func TestReadAtMost(t *testing.T) {
	path := filepath.Join(t.TempDir(), "job.toml")
	if err := os.WriteFile(path, []byte("12345"), 0o666); err != nil {
		t.Fatal(err)
	}
	if text, err := readAtMost(path, 5); err != nil || string(text) != "12345" {
		t.Errorf("%q, %v", text, err)
	}
	if _, err := readAtMost(path, 4); err == nil || !strings.Contains(err.Error(), path) {
		t.Errorf("a file that is too long: %v", err)
	}
	if _, err := os.Stat("/dev/zero"); err != nil {
		t.Skip(err)
	}
	if _, err := Read("/dev/zero"); err == nil {
		t.Error("a file without end was read")
	}
}
