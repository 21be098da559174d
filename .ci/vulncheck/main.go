// Command vulncheck looks for known faults in the modules that catenrich is
// built from:
//
//	go run .ci/vulncheck/main.go [DATABASE VERSION]
//
// The database is the module golang.org/x/vulndb, from the module proxy like
// any other; nothing else is asked. A finding in a module that go.mod names
// fails, whether the faulty code is called or not: there is a version to raise.
// One in the standard library is printed only, because the Go release that
// builds the program is the builder's choice, and mends it.
package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"maps"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
)

// Raise both from time to time; the first argument tries another database,
// such as latest.
const (
	databaseVersion = "v0.0.0-20261105234957-e22db6528018" // golang.org/x/vulndb
	scannerVersion  = "v1.9.0"                             // golang.org/x/vuln
)

func main() {
	version := databaseVersion
	if len(os.Args) > 1 {
		version = os.Args[1]
	}
	ok, err := check(version)
	if err != nil {
		fmt.Fprintln(os.Stderr, "vulncheck:", err)
		os.Exit(2)
	}
	if !ok {
		os.Exit(1)
	}
}

// check scans the module in the working directory.
func check(version string) (ok bool, err error) {
	dir, err := os.MkdirTemp("", "vulndb")
	if err != nil {
		return false, err
	}
	defer os.RemoveAll(dir)
	n, err := makeDatabase(version, dir)
	if err != nil {
		return false, err
	}
	out, err := output("go", "run", "golang.org/x/vuln/cmd/govulncheck@"+scannerVersion, "-db", "file://"+filepath.ToSlash(dir), "-format", "json", "./...")
	if err != nil {
		return false, err
	}
	found, err := findings(out)
	if err != nil {
		return false, err
	}
	ours := 0
	for _, line := range slices.Sorted(maps.Keys(found)) {
		fmt.Println(line)
		if found[line] {
			ours++
		}
	}
	fmt.Printf("%d entries looked through: %d findings in modules of go.mod, %d in the standard library\n", n, ours, len(found)-ours)
	return ours == 0, nil
}

// entry is what an index needs of an OSV file (https://ossf.github.io/osv-schema).
type entry struct {
	ID       string `json:"id"`
	Modified string `json:"modified"`
	Affected []struct {
		Package struct {
			Name string `json:"name"`
		} `json:"package"`
	} `json:"affected"`
}

// makeDatabase lays out the OSV files of golang.org/x/vulndb as a scanner reads
// them (https://go.dev/doc/security/vuln/database), and says how many there are.
func makeDatabase(version, dir string) (n int, err error) {
	out, err := output("go", "mod", "download", "-json", "golang.org/x/vulndb@"+version)
	if err != nil {
		return 0, err
	}
	var module struct{ Dir string }
	if err := json.Unmarshal(out, &module); err != nil {
		return 0, err
	}
	files, err := filepath.Glob(filepath.Join(module.Dir, "data", "osv", "*.json"))
	if err != nil || len(files) == 0 {
		return 0, fmt.Errorf("%s has no data/osv (%v)", module.Dir, err)
	}
	type vuln struct {
		ID       string `json:"id"`
		Modified string `json:"modified"`
	}
	type affected struct {
		Path  string `json:"path"`
		Vulns []vuln `json:"vulns"`
	}
	modules, newest := map[string]*affected{}, ""
	for _, d := range []string{"ID", "index"} {
		if err := os.Mkdir(filepath.Join(dir, d), 0o777); err != nil {
			return 0, err
		}
	}
	for _, file := range files {
		text, err := os.ReadFile(file)
		if err != nil {
			return 0, err
		}
		var e entry
		if err := json.Unmarshal(text, &e); err != nil || e.ID == "" {
			return 0, fmt.Errorf("%s: %q (%v)", file, e.ID, err)
		}
		newest = max(newest, e.Modified)
		for _, a := range e.Affected {
			m := modules[a.Package.Name]
			if m == nil {
				m = &affected{Path: a.Package.Name}
				modules[a.Package.Name] = m
			}
			if v := (vuln{e.ID, e.Modified}); !slices.Contains(m.Vulns, v) {
				m.Vulns = append(m.Vulns, v)
			}
		}
		if err := os.WriteFile(filepath.Join(dir, "ID", e.ID+".json"), text, 0o666); err != nil {
			return 0, err
		}
	}
	index := make([]*affected, 0, len(modules))
	for _, name := range slices.Sorted(maps.Keys(modules)) {
		index = append(index, modules[name])
	}
	return len(files), errors.Join(
		writeJSON(filepath.Join(dir, "index", "modules.json"), index),
		writeJSON(filepath.Join(dir, "index", "db.json"), map[string]string{"modified": newest}))
}

// findings reads the scanner's stream, and says of each finding whether it is
// in a module that go.mod names. The scanner tells of the same fault three
// times: of its module, its package and its function.
func findings(stream []byte) (map[string]bool, error) {
	found, scanned := map[string]bool{}, false
	for d := json.NewDecoder(bytes.NewReader(stream)); ; {
		var message struct {
			SBOM    *struct{ Modules []struct{ Path string } }
			Finding *struct {
				OSV          string
				FixedVersion string `json:"fixed_version"`
				Trace        []struct{ Module, Version string }
			}
		}
		err := d.Decode(&message)
		if err == io.EOF {
			break
		}
		if err != nil {
			return nil, err
		}
		scanned = scanned || message.SBOM != nil && len(message.SBOM.Modules) > 1
		if f := message.Finding; f != nil && len(f.Trace) > 0 {
			at := f.Trace[0]
			line := fmt.Sprintf("%s in %s %s, mended in %s", f.OSV, at.Module, at.Version, f.FixedVersion)
			found[line] = at.Module != "stdlib" && at.Module != "toolchain"
		}
	}
	if !scanned {
		return nil, errors.New("the scanner names no modules: did it see the program?")
	}
	return found, nil
}

// output runs a command, whose messages go to standard error.
func output(name string, args ...string) ([]byte, error) {
	c := exec.Command(name, args...)
	c.Stderr = os.Stderr
	out, err := c.Output()
	if err != nil {
		err = fmt.Errorf("%s: %w", strings.Join(c.Args, " "), err)
	}
	return out, err
}

func writeJSON(path string, v any) error {
	text, err := json.Marshal(v)
	if err != nil {
		return err
	}
	return os.WriteFile(path, text, 0o666)
}
