// Command bench measures catenrich against the work of other programs: each
// line of its table is one job done by catenrich, and the same or less done by
// something else, in turn, on the same catalogue.
//
//	go run ./bench                      # the whole table: 20 GB of disk, an hour
//	go run ./bench --scale 0.02         # a look, in a minute
//	go run ./bench --only narrow,csv --rounds 5 --json table.json
//
// Catalogues come from a fixed seed, and are kept in the user's cache directory
// or in --dir for the next time. The others are DuckDB's COPY and a decoder and
// encoder of arrow-go (interop/theirs, for which a C compiler is needed), cp and
// sync, and script.py, which needs numpy, scipy and pandas. What is missing is
// said, and its line left out.
//
// Begin with lines.go, which has the table; measure.go runs the programs,
// catalogue.go makes the catalogues, small.go measures many small files, and
// table.go prints.
package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"os/signal"
	"path/filepath"
	"strings"

	"github.com/spf13/pflag"
)

// options are the flags.
type options struct {
	scale     float64
	rounds    int
	dir       string
	json      string
	only      []string
	catenrich string // a binary to measure instead of this tree's
	makes     string // internal: make this catalogue and exit
}

func main() {
	if err := run(); err != nil {
		fmt.Fprintln(os.Stderr, "bench:", err)
		os.Exit(1)
	}
}

func run() error {
	var o options
	pflag.Float64Var(&o.scale, "scale", 1, "multiply all numbers of rows")
	pflag.IntVar(&o.rounds, "rounds", 3, "how often each program is run, in turn")
	pflag.StringVar(&o.dir, "dir", "", "where catalogues and outputs go (default: catenrich-bench in the user's cache directory)")
	pflag.StringVar(&o.json, "json", "", "also write the table to this file, as JSON")
	pflag.StringSliceVar(&o.only, "only", nil, "only these lines: "+strings.Join(names(), ","))
	pflag.StringVar(&o.catenrich, "catenrich", "", "measure this binary instead of one built from this tree")
	pflag.StringVar(&o.makes, "make", "", "make one catalogue and exit")
	pflag.CommandLine.MarkHidden("make")
	pflag.Parse()
	if o.makes != "" {
		return makeCatalogue(o.makes)
	}
	if o.rounds < 1 || o.scale <= 0 {
		return errors.New("--rounds and --scale must be above 0")
	}
	if o.dir == "" {
		cache, err := os.UserCacheDir()
		if err != nil {
			return fmt.Errorf("%w: name a directory with --dir", err)
		}
		o.dir = filepath.Join(cache, "catenrich-bench")
	}
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt)
	defer stop()
	b, err := newBench(ctx, o)
	if err != nil {
		return err
	}
	t, err := b.table()
	if err != nil {
		return err
	}
	t.print(os.Stdout)
	if o.json == "" {
		return nil
	}
	text, err := json.MarshalIndent(t, "", "  ")
	if err != nil {
		return err
	}
	return os.WriteFile(o.json, append(text, '\n'), 0o666)
}

// A bench has what the lines need.
type bench struct {
	options
	ctx      context.Context
	root     string // of the main module
	ours     string // the binaries
	theirs   string // "" if it could not be built
	python   string // "" without numpy, scipy and pandas
	problems []string
}

// newBench builds the binaries.
func newBench(ctx context.Context, o options) (*bench, error) {
	b := &bench{options: o, ctx: ctx}
	out, err := exec.Command("go", "env", "GOMOD").Output()
	if err != nil {
		return nil, fmt.Errorf("go env GOMOD: %w", err)
	}
	b.root = filepath.Dir(strings.TrimSpace(string(out)))
	if _, err := os.Stat(filepath.Join(b.root, "cmd", "catenrich")); err != nil {
		return nil, errors.New("run it within the main module: go run ./bench")
	}
	if err := os.MkdirAll(b.dir, 0o777); err != nil {
		return nil, err
	}
	if b.ours = b.catenrich; b.ours == "" {
		if b.ours, err = b.build(b.root, "catenrich", "./cmd/catenrich"); err != nil {
			return nil, err
		}
	}
	if b.theirs, err = b.build(filepath.Join(b.root, "interop"), "theirs", "./theirs"); err != nil {
		b.problem("no comparison with DuckDB and arrow-go: %v", err)
		b.theirs = ""
	}
	for _, python := range []string{"python3", "/usr/bin/python3"} {
		if exec.Command(python, "-c", "import numpy, scipy, pandas").Run() == nil {
			b.python = python
			break
		}
	}
	if b.python == "" {
		b.problem("no comparison with a script: python3 has no numpy, scipy or pandas")
	}
	return b, nil
}

func (b *bench) problem(format string, a ...any) {
	text := fmt.Sprintf(format, a...)
	b.problems = append(b.problems, text)
	fmt.Fprintln(os.Stderr, "bench:", text)
}

// build compiles a program into the directory of the bench.
func (b *bench) build(module, name, pkg string) (string, error) {
	path, err := filepath.Abs(filepath.Join(b.dir, name))
	if err != nil {
		return "", err
	}
	c := exec.CommandContext(b.ctx, "go", "build", "-o", path, pkg)
	c.Dir, c.Stderr = module, os.Stderr
	if err := c.Run(); err != nil {
		return "", fmt.Errorf("go build %s: %w", pkg, err)
	}
	return path, nil
}
