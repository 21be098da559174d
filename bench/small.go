package main

import (
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"sync"
	"time"
)

// tenRows is a catalogue of ten rows.
func (b *bench) tenRows() input {
	return input{10, func() (string, error) { return b.catalogue("csv", 10, 10, ".csv") }}
}

// start is from start to finish of the smallest job.
func (b *bench) start(t *table) error {
	few := *b
	few.rounds = max(10*b.rounds, 10)
	r, err := few.row("start", "CSV, ten rows, from start to finish", b.tenRows(), []contender{{name: "catenrich, 2 workers", command: b.our(2)},
		{name: "cp and sync", command: b.cp}})
	if err != nil {
		return err
	}
	r.Verdict = &verdict{Of: "from start to finish:", Unit: "ms", Value: r.Results[0].Wall * 1000, Bar: 50, Aim: 25, Below: true}
	t.Lines = append(t.Lines, *r)
	return nil
}

// many is a job of small files, against the rate at which the filesystem
// makes them durable with the same steps and nothing else.
func (b *bench) many(t *table) error {
	units := b.scaled(10_000)
	dir := filepath.Join(b.dir, fmt.Sprintf("many-%d", units))
	if err := b.makeMany(dir, units); err != nil {
		return err
	}
	// Every round writes to a place of its own, and nothing is removed before
	// the end: ext4 is slow to make files where many have just been removed.
	outputs := filepath.Join(b.dir, "out-many")
	if err := os.RemoveAll(outputs); err != nil {
		return err
	}
	defer os.RemoveAll(outputs)
	ours := contender{command: func(in, out string) *exec.Cmd {
		return exec.CommandContext(b.ctx, b.ours, "run", in, "--redshift", "z_best", "--add", twelve,
			"-o", out+"/", "--quiet", "--no-report", "--workers", "2")
	}}
	var rates, ceilings []float64
	for round := range b.rounds {
		u, err := b.timed(&ours, filepath.Join(dir, "*.csv"), filepath.Join(outputs, fmt.Sprint(round)))
		if err != nil {
			return err
		}
		rates = append(rates, float64(units)/u.Wall)
		took, err := publishBare(filepath.Join(outputs, fmt.Sprint("bare-", round)), units)
		if err != nil {
			return err
		}
		ceilings = append(ceilings, float64(units)/took.Seconds())
	}
	rate, ceiling := median(rates), median(ceilings)
	t.Lines = append(t.Lines, row{Name: "many", Rows: units,
		What:    fmt.Sprintf("%d files of ten rows; the bare steps of a publication: %.0f files a second, so catenrich is at %.0f %% of them", units, ceiling, 100*rate/ceiling),
		Verdict: &verdict{Of: "files:", Unit: "a second", Value: rate, Bar: min(500, ceiling*0.8), Aim: 500}})
	return nil
}

// makeMany copies the catalogue of ten rows.
func (b *bench) makeMany(dir string, units int) error {
	ten, err := b.tenRows().path()
	if err != nil {
		return err
	}
	text, err := os.ReadFile(ten)
	if err != nil {
		return err
	}
	if err := os.MkdirAll(dir, 0o777); err != nil {
		return err
	}
	for i := range units {
		path := filepath.Join(dir, fmt.Sprintf("%05d.csv", i))
		if _, err := os.Stat(path); err == nil {
			continue
		}
		if err := os.WriteFile(path, text, 0o666); err != nil {
			return err
		}
	}
	return nil
}

// publishBare makes n outputs with sidecar and manifest durable by the same
// system calls as a publication, from two goroutines. What it takes is the
// filesystem's alone.
func publishBare(dir string, n int) (time.Duration, error) {
	if err := os.MkdirAll(dir, 0o777); err != nil {
		return 0, err
	}
	d, err := os.Open(dir)
	if err != nil {
		return 0, err
	}
	defer d.Close()
	const writers = 2
	var faults [writers]error
	start := time.Now()
	var wg sync.WaitGroup
	for w := range writers {
		wg.Go(func() {
			for i := w; i < n && faults[w] == nil; i += writers {
				faults[w] = publishOne(d, filepath.Join(dir, fmt.Sprintf("%05d.csv", i)))
			}
		})
	}
	wg.Wait()
	return time.Since(start), errors.Join(faults[:]...)
}

// publishOne syncs three files of the usual sizes, and the directory after
// each of the renames that move them into place.
func publishOne(dir *os.File, path string) error {
	for _, f := range []struct {
		suffix string
		size   int
	}{{".t1", 3000}, {".t2", 1500}, {".t3", 8000}} {
		if err := writeSynced(path+f.suffix, f.size); err != nil {
			return err
		}
	}
	for _, move := range [][2]string{{".t3", ".pending"}, {".t2", ".columns"}, {".t1", ""}, {".pending", ".json"}} {
		if err := os.Rename(path+move[0], path+move[1]); err != nil {
			return err
		}
		if err := dir.Sync(); err != nil {
			return err
		}
	}
	return nil
}

func writeSynced(path string, size int) error {
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	if _, err = f.Write(make([]byte, size)); err == nil {
		err = f.Sync()
	}
	if closed := f.Close(); err == nil {
		err = closed
	}
	return err
}
