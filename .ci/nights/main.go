// Command nights writes the invented survey Quill Ridge as many nights: half of
// them CSV, half Parquet, of very different sizes, and the job file for them all.
//
//	go run ./.ci/nights DIR N
package main

import (
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"

	"catenrich/pipeline/demo"
)

func main() {
	if len(os.Args) != 3 {
		fmt.Fprintln(os.Stderr, "usage: nights DIR N")
		os.Exit(64)
	}
	n, err := strconv.Atoi(os.Args[2])
	if err == nil {
		err = write(os.Args[1], n)
	}
	if err != nil {
		fmt.Fprintln(os.Stderr, "nights:", err)
		os.Exit(1)
	}
}

// write makes n nights below dir/nights, and dir/job.toml with its templates.
func write(dir string, n int) error {
	survey := filepath.Join(dir, "survey")
	for night := range n {
		if err := writeNight(dir, survey, night); err != nil {
			return fmt.Errorf("night %d: %w", night, err)
		}
		if night == 0 {
			if err := writeJob(dir, survey); err != nil {
				return err
			}
		}
		if err := os.RemoveAll(survey); err != nil {
			return err
		}
	}
	return nil
}

// writeJob takes the demo's second job, with everything in it, for all nights.
func writeJob(dir, survey string) error {
	job, err := os.ReadFile(filepath.Join(survey, "quill_ridge_photometry.toml"))
	if err != nil {
		return err
	}
	files := fmt.Sprintf(`files = [%q, %q]`, demo.Catalogue, demo.WideCatalogue)
	text := strings.Replace(string(job), files, `files = ["nights/*/*"]`, 1)
	if text == string(job) {
		return fmt.Errorf("the demo's job file has no line %s", files)
	}
	if err := os.WriteFile(filepath.Join(dir, "job.toml"), []byte(text), 0o666); err != nil {
		return err
	}
	return os.Rename(filepath.Join(survey, "templates"), filepath.Join(dir, "templates"))
}

// writeNight makes one night: a survey of its own seed, of which one file stays.
func writeNight(dir, survey string, night int) error {
	options := demo.Options{Rows: 2000 + 120*(night*night%97), Seed: uint64(night + 1)}
	from, to := demo.Catalogue, fmt.Sprintf("night-%03d.csv", night)
	generate := demo.Write
	if night%2 == 1 {
		from, to, generate = demo.WideCatalogue, fmt.Sprintf("night-%03d.parquet", night), demo.WriteParquet
	}
	if _, err := generate(survey, options); err != nil {
		return err
	}
	place := filepath.Join(dir, "nights", fmt.Sprint(2024+night%3), to)
	if err := os.MkdirAll(filepath.Dir(place), 0o777); err != nil {
		return err
	}
	return os.Rename(filepath.Join(survey, from), place)
}
