package main

import (
	"flag"
	"os"
	"strings"
	"testing"
)

// TestReadmeColumns holds the README's table of columns to the table in the
// code; `go test ./cmd/... -update` rewrites it.
func TestReadmeColumns(t *testing.T) {
	const path, begin, end = "../../README.md", "<!-- columns -->\n", "<!-- /columns -->"
	text, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	before, rest, ok := strings.Cut(string(text), begin)
	_, after, ok2 := strings.Cut(rest, end)
	if !ok || !ok2 {
		t.Fatalf("README.md has no %q … %q", begin, end)
	}
	table := mustRun(t, "columns", "--markdown").stdout
	want := before + begin + table + end + after
	if want == string(text) {
		return
	}
	if flag.Lookup("update").Value.String() != "true" {
		t.Fatal("the README's table of columns is not what `catenrich columns --markdown` prints")
	}
	if err := os.WriteFile(path, []byte(want), 0o666); err != nil {
		t.Fatal(err)
	}
}
