package main

import (
	"bufio"
	"bytes"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
)

// twelve are the columns that every job adds, and status comes with them.
var twelve = strings.Join([]string{
	"comoving_distance", "transverse_comoving_distance", "angular_diameter_distance", "luminosity_distance", "distance_modulus",
	"angular_scale", "lookback_time", "age_at_emission", "comoving_volume", "comoving_volume_element",
	"recession_velocity_now", "recession_velocity_at_emission",
}, ",")

// A line of the table; measure adds one row or several.
type line struct {
	name    string
	measure func(b *bench, t *table) error
}

// lines are all of them. The bars and aims are those of the project.
var lines = []line{
	{"kernel", (*bench).kernel},
	{"wide", func(b *bench, t *table) error {
		return b.against(t, "wide", "Parquet, 60 columns, twelve added", b.file("wide", wideColumns, 2_500_000, ".parquet"),
			[]contender{{name: "DuckDB COPY, 12 cheap expressions, 2 threads", command: b.their("duckdb")},
				{name: "arrow-go, decode and re-encode, 2 threads", command: b.their("arrow")}, {name: "cp and sync", command: b.cp}}, 4, 6)
	}},
	{"narrow", func(b *bench, t *table) error {
		return b.against(t, "narrow", "Parquet, 8 columns, twelve added", b.file("narrow", narrowColumns, 10_000_000, ".parquet"),
			[]contender{{name: "DuckDB COPY, 12 cheap expressions, 2 threads", command: b.their("duckdb")},
				{name: "arrow-go, decode and re-encode, 2 threads", command: b.their("arrow")}, {name: "cp and sync", command: b.cp}}, 2.2, 3.2)
	}},
	{"csv", func(b *bench, t *table) error {
		return b.against(t, "csv", "CSV, 10 columns, twelve added", b.file("csv", 10, 5_000_000, ".csv"),
			[]contender{{name: "DuckDB COPY, 12 cheap expressions, 2 threads", command: b.their("duckdb")}, {name: "cp and sync", command: b.cp}}, 2, 4)
	}},
	{"script", func(b *bench, t *table) error {
		if b.python == "" {
			return nil
		}
		return b.against(t, "script", "CSV, 10 columns, twelve added", b.file("csv", 10, 1_000_000, ".csv"),
			[]contender{{name: "script of numpy, scipy and pandas", command: b.script}}, 8, 15)
	}},
	{"scaling", (*bench).scaling},
	{"memory", (*bench).memory},
	{"start", (*bench).start},
	{"many", (*bench).many},
}

func names() []string {
	var all []string
	for _, l := range lines {
		all = append(all, l.name)
	}
	return all
}

// table measures the lines that are asked for.
func (b *bench) table() (*table, error) {
	for _, name := range b.only {
		if !slices.Contains(names(), name) {
			return nil, fmt.Errorf("there is no line %q; there are %s", name, strings.Join(names(), ", "))
		}
	}
	t := newTable(&b.options)
	for _, l := range lines {
		if len(b.only) > 0 && !slices.Contains(b.only, l.name) {
			continue
		}
		before := len(t.Lines)
		if err := l.measure(b, t); err != nil {
			return nil, fmt.Errorf("%s: %w", l.name, err)
		}
		for i := before; i < len(t.Lines); i++ {
			t.Lines[i].print(os.Stderr) // as it comes
		}
	}
	t.Load = append(t.Load, load())
	t.Absent = b.problems
	return t, nil
}

// An input is a catalogue of a line, made when it is needed.
type input struct {
	rows int
	path func() (string, error)
}

func (b *bench) file(name string, columns, rows int, suffix string) input {
	rows = b.scaled(rows)
	return input{rows, func() (string, error) { return b.catalogue(name, columns, rows, suffix) }}
}

func (b *bench) scaled(rows int) int { return max(int(float64(rows)*b.scale), 1000) }

// our is the command that is measured.
func (b *bench) our(workers int) func(in, out string) *exec.Cmd {
	return func(in, out string) *exec.Cmd {
		return exec.CommandContext(b.ctx, b.ours, "run", in, "--redshift", "z_best", "--add", twelve, "-o", out,
			"--quiet", "--workers", strconv.Itoa(workers))
	}
}

func (b *bench) their(way string) func(in, out string) *exec.Cmd {
	if b.theirs == "" {
		return nil
	}
	return func(in, out string) *exec.Cmd { return exec.CommandContext(b.ctx, b.theirs, way, in, out) }
}

func (b *bench) cp(in, out string) *exec.Cmd {
	return exec.CommandContext(b.ctx, "sh", "-c", `cp "$1" "$2" && sync "$2"`, "sh", in, out)
}

func (b *bench) script(in, out string) *exec.Cmd {
	return exec.CommandContext(b.ctx, b.python, filepath.Join(b.root, "bench", "script.py"), in, out)
}

// against is a line of catenrich and others on one file. The bar is for the
// first of the others.
func (b *bench) against(t *table, name, what string, in input, others []contender, bar, aim float64) error {
	all := []contender{{name: "catenrich, 2 workers", command: b.our(2)}}
	for _, c := range others {
		if c.command != nil {
			all = append(all, c)
		}
	}
	r, err := b.row(name, what, in, all)
	if err != nil {
		return err
	}
	if all[1].name == others[0].name {
		r.Verdict = &verdict{Of: "against " + others[0].name + ":", Unit: "times faster", Value: r.Results[1].Ratio, CPU: r.Results[1].CPURatio, Bar: bar, Aim: aim}
	}
	t.Lines = append(t.Lines, *r)
	return nil
}

// row runs contenders in turn on one input.
func (b *bench) row(name, what string, in input, all []contender) (*row, error) {
	path, err := in.path()
	if err != nil {
		return nil, err
	}
	info, err := os.Stat(path)
	if err != nil {
		return nil, err
	}
	results, err := b.inTurn(all, path, filepath.Join(b.dir, "out"+filepath.Ext(path)))
	if err != nil {
		return nil, err
	}
	return &row{Name: name, What: what, Rows: in.rows, Bytes: info.Size(), Results: results}, nil
}

// kernel is the benchmark beside the code, of one core.
func (b *bench) kernel(t *table) error {
	c := exec.CommandContext(b.ctx, "go", "test", "-run", "-", "-bench", "BenchmarkTwelve/flat/kernel", "-benchtime", "2s",
		"-count", strconv.Itoa(b.rounds), "./pipeline/columns")
	c.Dir, c.Stderr = b.root, os.Stderr
	out, err := c.Output()
	if err != nil {
		return fmt.Errorf("go test: %w\n%s", err, out)
	}
	var times []float64
	for s := bufio.NewScanner(bytes.NewReader(out)); s.Scan(); {
		words := strings.Fields(s.Text())
		for i := 1; i < len(words); i++ {
			if v, err := strconv.ParseFloat(words[i-1], 64); words[i] == "cpu-ns/row" && err == nil {
				times = append(times, v)
			}
		}
	}
	if len(times) == 0 {
		return fmt.Errorf("no time in:\n%s", out)
	}
	t.Lines = append(t.Lines, row{Name: "kernel", What: "the twelve of a batch of redshifts, one core, flat",
		Verdict: &verdict{Of: "processor time:", Unit: "ns a row", Value: median(times), Bar: 30, Aim: 20, Below: true}})
	return nil
}

// scaling is two workers against one; and against one processor, which the
// reading, the digests and the collector of garbage then share with the worker.
func (b *bench) scaling(t *table) error {
	for _, in := range []struct {
		name string
		file input
	}{{"narrow Parquet", b.file("narrow", narrowColumns, 10_000_000, ".parquet")}, {"CSV", b.file("csv", 10, 5_000_000, ".csv")}} {
		r, err := b.row("scaling", in.name+", workers", in.file, []contender{
			{name: "2 workers", command: b.our(2)}, {name: "1 worker", command: b.our(1)},
			{name: "1 worker, GOMAXPROCS=1", command: b.our(1), env: []string{"GOMAXPROCS=1"}},
			{name: "8 workers", command: b.our(8)},
		})
		if err != nil {
			return err
		}
		r.Verdict = &verdict{Of: "2 workers against one processor:", Unit: "times faster", Value: r.Results[2].Ratio, Bar: 1.7, Aim: 1.9}
		t.Lines = append(t.Lines, *r)
	}
	return nil
}

// memory is the peak of ours with few rows and with many, and the largest of
// all lines with two workers.
func (b *bench) memory(t *table) error {
	peak := int64(0)
	for _, rows := range []int{1_000_000, 20_000_000, 50_000_000} {
		r, err := b.row("memory", "Parquet, 8 columns, twelve added", b.file("narrow", narrowColumns, rows, ".parquet"),
			[]contender{{name: "catenrich, 2 workers", command: b.our(2)}})
		if err != nil {
			return err
		}
		t.Lines = append(t.Lines, *r)
	}
	for i := range t.Lines {
		for _, c := range t.Lines[i].Results {
			if c.Name == "catenrich, 2 workers" {
				peak = max(peak, c.Peak)
			}
		}
	}
	t.Lines = append(t.Lines, row{Name: "memory", What: "the largest of all lines above",
		Verdict: &verdict{Of: "peak:", Unit: "MB", Value: float64(peak) / 1e6, Bar: 400, Aim: 256, Below: true}})
	return nil
}
