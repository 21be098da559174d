package report

import (
	"errors"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
	"catenrich/pipeline/ledger"
)

const (
	manifestSuffix = ".manifest.json"
	pendingSuffix  = ".manifest.pending"
	maxManifest    = 64 << 20
)

// Load reads a release: every manifest below a directory, or the one manifest
// that path names or that stands beside the output it names. A manifest that
// is damaged, or whose publication was interrupted, is listed as missing.
// Without any manifest it is a fault of class [fault.NoInput].
func Load(path string) (*Release, error) {
	var b Builder
	info, err := os.Stat(path)
	if err != nil {
		return nil, fault.NoInput.Wrap(err)
	}
	if !info.IsDir() {
		if !strings.HasSuffix(path, manifestSuffix) {
			path = publish.ManifestPath(path)
		}
		m, err := read(path)
		if err != nil {
			return nil, err
		}
		if err := b.Add(m); err != nil {
			return nil, err
		}
		return b.Release()
	}
	if err := walk(path, &b); err != nil {
		return nil, err
	}
	if len(b.groups)+len(b.missing) == 0 {
		return nil, fault.NoInput.Errorf("%s holds no manifest (*%s): name the directory that `catenrich run` wrote to", path, manifestSuffix)
	}
	return b.Release()
}

// walk finds the manifests below dir.
func walk(dir string, b *Builder) error {
	err := filepath.WalkDir(dir, func(path string, e fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		name, err := filepath.Rel(dir, path)
		if err != nil || !e.Type().IsRegular() {
			return err
		}
		name = filepath.ToSlash(name)
		if output, ok := strings.CutSuffix(name, pendingSuffix); ok {
			b.Miss(output, "its publication was interrupted: run the job again")
			return nil
		}
		output, ok := strings.CutSuffix(name, manifestSuffix)
		if !ok {
			return nil
		}
		if e.Name() == ledger.ReleaseName && isRelease(path) {
			return nil
		}
		m, err := read(path)
		switch {
		case fault.Of(err) == fault.Data:
			b.Miss(output, "its manifest is damaged, or was not written by this program")
			return nil
		case err != nil:
			return err
		}
		return b.Add(m)
	})
	return fault.NoInput.Wrap(err)
}

// isRelease reports whether the file is the manifest of a whole release, which
// describes no output.
func isRelease(path string) bool {
	text, err := os.ReadFile(path)
	return err == nil && ledger.IsRelease(text)
}

// read reads one manifest.
func read(path string) (*ledger.Manifest, error) {
	f, err := os.Open(path)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, fault.NoInput.Errorf("%s does not exist: name a directory of outputs, an output of `catenrich run`, or its manifest", path)
	}
	if err != nil {
		return nil, fault.NoInput.Wrap(err)
	}
	defer f.Close()
	text, err := io.ReadAll(io.LimitReader(f, maxManifest+1))
	if err != nil {
		return nil, fault.IO.Wrap(err)
	}
	if len(text) > maxManifest {
		return nil, fault.Data.Errorf("%s is larger than any manifest", path)
	}
	m, err := ledger.Parse(text)
	if err != nil {
		return nil, fault.Data.Errorf("%s: %w", path, err)
	}
	return m, nil
}
