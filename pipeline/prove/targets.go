package prove

import (
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
	"catenrich/pipeline/ledger"
)

// Targets lists the outputs that paths mean, each once: a file stands for
// itself, a manifest or a sidecar for its output, a directory for every output with a
// manifest in or below it, the missing ones too. A directory without any is a
// fault.NoInput.
func Targets(paths []string) ([]string, error) {
	var all []string
	for _, path := range paths {
		info, err := os.Stat(path)
		if err != nil || !info.IsDir() {
			all = append(all, outputOf(path))
			continue
		}
		below, err := outputsIn(path)
		if err != nil {
			return nil, fault.NoInput.Wrap(err)
		}
		if len(below) == 0 {
			return nil, fault.NoInput.Errorf("%s: no output with a manifest is in it", path)
		}
		all = append(all, below...)
	}
	seen := make(map[string]bool)
	return slices.DeleteFunc(all, func(path string) bool {
		again := seen[path]
		seen[path] = true
		return again
	}), nil
}

// outputOf takes the ending of a manifest off a path, or that of a sidecar
// whose output has a manifest.
func outputOf(path string) string {
	for _, ending := range []string{publish.ManifestPath(""), publish.PendingPath("")} {
		if output, ok := strings.CutSuffix(path, ending); ok && output != "" {
			return output
		}
	}
	for _, ending := range publish.Suffixes {
		output, ok := strings.CutSuffix(path, ending)
		if _, err := os.Stat(publish.ManifestPath(output)); ok && err == nil {
			return output
		}
	}
	return path
}

// isRelease reports whether a path is the manifest of a whole release, which
// describes no output.
func isRelease(path string) bool {
	if filepath.Base(path) != ledger.ReleaseName {
		return false
	}
	text, err := os.ReadFile(path)
	return err == nil && ledger.IsRelease(text)
}

// outputsIn lists the outputs in and below a directory, in order.
func outputsIn(dir string) ([]string, error) {
	var found []string
	err := filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
		if err != nil {
			if errors.Is(err, fs.ErrNotExist) {
				return nil
			}
			return err
		}
		if d.IsDir() && d.Name() == publish.LockDir {
			return filepath.SkipDir
		}
		if output := outputOf(path); output != path && !d.IsDir() && !isRelease(path) {
			found = append(found, output)
		}
		return nil
	})
	slices.Sort(found)
	return slices.Compact(found), err
}
