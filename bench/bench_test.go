package main

import (
	"bytes"
	"context"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
)

// TestCataloguesComeFromTheSeed: the same name gives the same bytes.
func TestCataloguesComeFromTheSeed(t *testing.T) {
	for _, name := range []string{"csv-10-300.csv", "narrow-8-300.parquet", "wide-60-100.parquet"} {
		var first []byte
		for range 2 {
			path := filepath.Join(t.TempDir(), name)
			if err := makeCatalogue(path); err != nil {
				t.Fatal(err)
			}
			text, err := os.ReadFile(path)
			if err != nil {
				t.Fatal(err)
			}
			if first == nil {
				first = text
			}
			if !bytes.Equal(first, text) {
				t.Errorf("%s differs from one time to the next", name)
			}
		}
	}
	if err := makeCatalogue(filepath.Join(t.TempDir(), "csv.csv")); err == nil {
		t.Error("a name without columns and rows passes")
	}
}

// TestInTurn: each contender runs once a round, after the one before it, and
// its output is gone before the next.
func TestInTurn(t *testing.T) {
	dir := t.TempDir()
	diary, out := filepath.Join(dir, "diary"), filepath.Join(dir, "out")
	b := &bench{options: options{rounds: 3}, ctx: context.Background()}
	contenderOf := func(name, script string) contender {
		return contender{name: name, command: func(in, out string) *exec.Cmd {
			return exec.Command("sh", "-c", script, "sh", in, out)
		}}
	}
	note := `test ! -e "$2" || exit 1; echo NAME >> "$1"; echo x > "$2"; echo x > "$2.beside"`
	results, err := b.inTurn([]contender{
		contenderOf("a", strings.Replace(note, "NAME", "a", 1)),
		contenderOf("b", strings.Replace(note, "NAME", "b", 1)+"; sleep 0.2"),
	}, diary, out)
	if err != nil {
		t.Fatal(err)
	}
	if got, _ := os.ReadFile(diary); string(got) != "a\nb\na\nb\na\nb\n" {
		t.Errorf("they ran as %q", got)
	}
	if left, _ := filepath.Glob(out + "*"); left != nil {
		t.Errorf("left behind: %v", left)
	}
	if r := results[1]; len(r.Rounds) != 3 || r.Wall < 0.2 || r.Ratio <= 1 || r.Peak == 0 {
		t.Errorf("the slower one: %+v", r)
	}
	if _, err := b.inTurn([]contender{contenderOf("fails", "echo why >&2; exit 3")}, diary, out); err == nil || !strings.Contains(err.Error(), "why") {
		t.Errorf("a program that fails: %v", err)
	}
}

func TestVerdicts(t *testing.T) {
	for _, c := range []struct {
		v    verdict
		want string
	}{
		{verdict{Value: 5, Bar: 4, Aim: 6}, "bar reached"},
		{verdict{Value: 6, Bar: 4, Aim: 6}, "aim reached"},
		{verdict{Value: 3.9, Bar: 4, Aim: 6}, "MISSED"},
		{verdict{Value: 390, Bar: 400, Aim: 256, Below: true}, "bar reached"},
		{verdict{Value: 401, Bar: 400, Aim: 256, Below: true}, "MISSED"},
		{verdict{Value: 20, Bar: 30, Aim: 20, Below: true}, "aim reached"},
	} {
		if got := c.v.String(); !strings.Contains(got, c.want) {
			t.Errorf("%s, want %s", got, c.want)
		}
	}
	if m := median([]float64{9, 1, 5}); m != 5 {
		t.Errorf("median of three is %v", m)
	}
	if m := median([]float64{9, 1, 5, 3}); m != 4 {
		t.Errorf("median of four is %v", m)
	}
}
