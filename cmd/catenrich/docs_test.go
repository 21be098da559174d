package main

import (
	"errors"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
)

// TestDocsPages follows every page of docs/ in a directory of its own, as a
// reader would: blocks of sh are run by bash, in turn, with catenrich on the
// path, and what they print must be the block of text that follows, if one
// does; "sh exit=65" must fail so. Blocks of toml with a name are saved under
// it. `go test ./cmd/... -update` writes the printed text again.
func TestDocsPages(t *testing.T) {
	if testing.Short() {
		t.Skip("builds the program and follows all pages")
	}
	bin := t.TempDir()
	if out, err := exec.Command("go", "build", "-o", bin+"/catenrich", ".").CombinedOutput(); err != nil {
		t.Fatalf("go build: %v\n%s", err, out)
	}
	var pages []string
	for _, pattern := range []string{"*.md", "how-to/*.md", "explanation/*.md"} {
		found, err := filepath.Glob(filepath.Join(docsDir, pattern))
		if err != nil {
			t.Fatal(err)
		}
		pages = append(pages, found...)
	}
	if len(pages) < 9 {
		t.Errorf("only %d pages: %q", len(pages), pages)
	}
	for _, path := range pages {
		t.Run(strings.TrimPrefix(path, docsDir+"/"), func(t *testing.T) { followPage(t, path, bin) })
	}
}

// fence is a block of a page: its info string and its text.
var fence = regexp.MustCompile("(?ms)^```([a-z]+)([^\n]*)\n(.*?)^```$")

// followPage runs the blocks of one page.
func followPage(t *testing.T, path, bin string) {
	page := string(readFile(t, path))
	for _, tool := range []string{"bash", "python3"} {
		if _, err := exec.LookPath(tool); err != nil && (tool == "bash" || strings.Contains(page, tool)) {
			if os.Getenv("CI") != "" {
				t.Fatalf("%s is not installed", tool)
			}
			t.Skipf("%s is not installed", tool)
		}
	}
	work := t.TempDir()
	where := filepath.Join(t.TempDir(), "where") // the directory that blocks are in
	writeFile(t, where, work+"\n")
	var now strings.Builder
	end, printed := 0, ""
	for _, m := range fence.FindAllStringSubmatchIndex(page, -1) {
		language, info, text := page[m[2]:m[3]], strings.TrimSpace(page[m[4]:m[5]]), page[m[6]:m[7]]
		between := page[end:m[0]]
		now.WriteString(page[end:m[6]])
		switch {
		case language == "text" && strings.TrimSpace(between) == "```" && printed != "":
			if mask(printed) != mask(text) {
				if !*update {
					t.Errorf("%s: a block prints\n%s\nand the page says\n%s", path, printed, text)
				}
				text = printed
			}
		case language == "toml" && info != "":
			writeFile(t, filepath.Join(strings.TrimSpace(string(readFile(t, where))), info), text)
		}
		printed = ""
		if language == "sh" {
			printed = runBlock(t, path, bin, where, info, text)
		}
		now.WriteString(text)
		end = m[7]
	}
	now.WriteString(page[end:])
	if *update && now.String() != page {
		writeFile(t, path, now.String())
	}
}

// runBlock runs one block where the one before it ended.
func runBlock(t *testing.T, path, bin, where, info, text string) string {
	t.Helper()
	want := 0
	if code, ok := strings.CutPrefix(info, "exit="); ok {
		var err error
		if want, err = strconv.Atoi(code); err != nil {
			t.Fatalf("%s: %s", path, info)
		}
	}
	script := text
	if want == 0 {
		script = "set -euo pipefail\n" + text + "\npwd > \"$WHERE\"\n"
	}
	cmd := exec.Command("bash", "-c", script)
	cmd.Dir = strings.TrimSpace(string(readFile(t, where)))
	cmd.Env = append(os.Environ(), "PATH="+bin+":"+os.Getenv("PATH"), "WHERE="+where, "LC_ALL=C", "TERM=dumb")
	out, err := cmd.CombinedOutput()
	code := 0
	if exit := new(exec.ExitError); errors.As(err, &exit) {
		code = exit.ExitCode()
	} else if err != nil {
		t.Fatal(err)
	}
	if code != want {
		t.Fatalf("%s: exit %d, want %d, from\n%s\n%s", path, code, want, text, out)
	}
	return string(out)
}

var (
	timed  = regexp.MustCompile(`in [0-9.]+ s\b|at [0-9.]+ GB/s`) // differs from run to run
	digits = regexp.MustCompile(`([0-9]+\.[0-9]{10})[0-9]+`)      // the last may differ where a page shows what quadrature gives
	blanks = regexp.MustCompile(`[ \t]+`)                         // follow the digits
)

// mask takes off what may differ.
func mask(s string) string {
	s = timed.ReplaceAllString(strings.TrimSpace(s), "TIME")
	return blanks.ReplaceAllString(digits.ReplaceAllString(s, "$1"), " ")
}

// TestDocsLinks: links between pages lead somewhere.
func TestDocsLinks(t *testing.T) {
	link := regexp.MustCompile(`\]\(([^)#:]+)(#[^)]*)?\)`)
	pages, err := filepath.Glob("../../*.md")
	if err != nil {
		t.Fatal(err)
	}
	err = filepath.WalkDir(docsDir, func(path string, e os.DirEntry, err error) error {
		if strings.HasSuffix(path, ".md") {
			pages = append(pages, path)
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	for _, page := range pages {
		for _, m := range link.FindAllStringSubmatch(string(readFile(t, page)), -1) {
			if _, err := os.Stat(filepath.Join(filepath.Dir(page), m[1])); err != nil {
				t.Errorf("%s links to %s, which is not there", page, m[1])
			}
		}
	}
}
