package house

import (
	"os/exec"
	"strings"
	"testing"
)

// allowed says which of our packages each package may import, directly or not.
// An entry that ends in a slash allows everything below it. cmd may import
// anything and is not listed; a package that is missing here fails the test.
var allowed = map[string][]string{
	"bench": {},

	"cosmo":           {"internal/exact"},
	"cosmo/frame":     {"internal/exact", "internal/fault", "internal/number", "internal/status"},
	"cosmo/photo":     {"cosmo", "internal/exact", "internal/fault", "internal/number", "internal/status"},
	"cosmo/selection": {"cosmo", "cosmo/photo", "internal/exact", "internal/fault", "internal/number", "internal/status"},
	"cosmo/spread":    {"cosmo", "cosmo/photo", "internal/exact", "internal/fault", "internal/number", "internal/status"},

	"internal/delim":          {"internal/fault", "internal/number"},
	"internal/exact":          {},
	"internal/fault":          {},
	"internal/fitshead":       {"internal/fault"},
	"internal/house":          {},
	"internal/number":         {},
	"internal/parquetfoot":    {"internal/fault"},
	"internal/publish":        {"internal/fault", "internal/table"},
	"internal/publish/faulty": {"internal/"},
	"internal/status":         {},
	"internal/table":          {"internal/fault"},

	"readers":            {"internal/"},
	"readers/readertest": {"internal/"},
	"readers/fitstest":   {},
	"writers":            {"internal/", "readers"},
	"writers/writertest": {"internal/", "readers", "readers/readertest"},

	"pipeline/job":     {"cosmo", "cosmo/", "internal/"},
	"pipeline/ledger":  {"internal/"},
	"pipeline/columns": {"cosmo", "cosmo/", "internal/", "pipeline/job", "pipeline/ledger"},
	"pipeline/demo":    {"cosmo", "cosmo/", "internal/"},
	"pipeline":         {"cosmo", "cosmo/", "internal/", "pipeline/job", "pipeline/columns", "pipeline/ledger", "pipeline/report"},
	"pipeline/report":  {"cosmo", "cosmo/", "internal/", "pipeline/job", "pipeline/columns", "pipeline/ledger"},
	"pipeline/prove":   {"cosmo", "cosmo/", "internal/", "pipeline", "pipeline/job", "pipeline/columns", "pipeline/ledger", "pipeline/report"},
}

func TestImportsPointDown(t *testing.T) {
	out, err := exec.Command("go", "list", "-f", `{{.ImportPath}} {{join .Deps " "}}`, "catenrich/...").Output()
	if err != nil {
		t.Fatalf("go list: %v", err)
	}
	seen := make(map[string]bool)
	for _, line := range strings.Split(strings.TrimSpace(string(out)), "\n") {
		words := strings.Fields(line)
		name := strings.TrimPrefix(words[0], "catenrich/")
		if strings.HasPrefix(name, "cmd/") {
			continue
		}
		seen[name] = true
		may, listed := allowed[name]
		if !listed {
			t.Errorf("%s is not in the table of this test: say what it may import", name)
		}
		for _, dep := range words[1:] {
			if ours, ok := strings.CutPrefix(dep, "catenrich/"); ok && !permits(may, ours) {
				t.Errorf("%s imports %s", name, ours)
			}
		}
	}
	for name := range allowed {
		if !seen[name] {
			t.Errorf("the table lists %s, which does not exist", name)
		}
	}
}

func permits(may []string, dep string) bool {
	for _, entry := range may {
		if dep == entry || strings.HasSuffix(entry, "/") && strings.HasPrefix(dep, entry) {
			return true
		}
	}
	return false
}

// TestPipelineNamesNoFormat holds that the pipeline learns formats from cmd.
func TestPipelineNamesNoFormat(t *testing.T) {
	out, err := exec.Command("go", "list", "-deps", "catenrich/pipeline").Output()
	if err != nil {
		t.Fatalf("go list: %v", err)
	}
	for _, dep := range strings.Fields(string(out)) {
		if strings.HasPrefix(dep, "github.com/apache/arrow-go") || dep == "catenrich/internal/delim" || dep == "catenrich/internal/parquetfoot" || dep == "catenrich/internal/fitshead" {
			t.Errorf("pipeline depends on %s", dep)
		}
	}
}
