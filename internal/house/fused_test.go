package house

import (
	"os"
	"os/exec"
	"regexp"
	"testing"
)

// TestNothingFuses looks for fused multiply-adds in what the compiler makes of
// the packages on a path to an output, for arm64, where it fuses all it may.
// A product that feeds a sum is written float64(x*y) + w, or the bits of the
// output depend on the machine; the compiler fuses across statements and
// through inlined functions too.
func TestNothingFuses(t *testing.T) {
	if testing.Short() {
		t.Skip("compiles for another machine")
	}
	fused := regexp.MustCompile(`([a-z_]+\.go:\d+)\)\s+FN?M(?:ADD|SUB)[SD]\s`)
	judge := regexp.MustCompile(`^direct(_model)?\.go:`) // judge outputs, and make none
	for _, pkg := range []string{
		"internal/exact", "internal/number", "internal/delim", "cosmo", "cosmo/frame", "cosmo/photo", "cosmo/selection", "cosmo/spread",
		"pipeline/columns", "pipeline/ledger", "pipeline/demo", "pipeline/report",
	} {
		build := exec.Command("go", "build", "-gcflags=catenrich/"+pkg+"=-S", "catenrich/"+pkg)
		build.Env = append(os.Environ(), "GOOS=linux", "GOARCH=arm64", "CGO_ENABLED=0")
		listing, err := build.CombinedOutput()
		if err != nil {
			t.Fatalf("compiling %s for arm64: %v\n%.2000s", pkg, err, listing)
		}
		if len(listing) == 0 {
			t.Fatalf("compiling %s for arm64 listed nothing", pkg)
		}
		seen := make(map[string]bool)
		for _, at := range fused.FindAllSubmatch(listing, -1) {
			place := string(at[1])
			if !seen[place] && !judge.MatchString(place) {
				t.Errorf("%s: a product is fused into a sum at %s: write float64(x*y) + w", pkg, place)
			}
			seen[place] = true
		}
	}
}
