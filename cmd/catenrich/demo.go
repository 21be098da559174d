package main

import (
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"strings"

	"github.com/spf13/cobra"

	"catenrich/internal/fault"
	"catenrich/pipeline"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/demo"
	"catenrich/pipeline/job"
)

func (a *app) demoCommand() *cobra.Command {
	var options demo.Options
	var quiet bool
	c := &cobra.Command{
		Use:   "demo DIR",
		Short: "Write the invented Quill Ridge survey and enrich it",
		Long: `Write an invented survey, Quill Ridge, into DIR: a catalogue with the defects of a
real one, as CSV and as a wide Parquet file, the truth it was simulated from, and
commented job files to start your own from. Then run each job.`,
		Example: `  catenrich demo quillridge
  catenrich demo quillridge --rows 1000000`,
		Args: cobra.ExactArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			files, err := demo.Write(args[0], options)
			if err != nil {
				return err
			}
			wide, err := demo.WriteParquet(args[0], options)
			if err != nil {
				return err
			}
			files = append(files, wide...)
			if !quiet {
				fmt.Fprintf(a.stderr, "%s of the invented Quill Ridge survey are in %s\n", plural(len(files), "file"), args[0])
			}
			for _, name := range files {
				if strings.HasSuffix(name, ".toml") {
					if err := a.runDemo(c, jobPath(args[0], name), quiet); err != nil {
						return err
					}
				}
			}
			return nil
		},
	}
	c.Flags().IntVar(&options.Rows, "rows", 0, "rows of the catalogue (default 20000)")
	c.Flags().Uint64Var(&options.Seed, "seed", 0, "seed of the simulation (default: one and the same)")
	c.Flags().BoolVarP(&quiet, "quiet", "q", false, "print warnings and errors only")
	return c
}

// jobPath is a file of the demo, whose name may be relative to its directory.
func jobPath(dir, name string) string {
	if filepath.IsAbs(name) || strings.HasPrefix(name, dir) {
		return name
	}
	return filepath.Join(dir, name)
}

// runDemo runs one job of the demo.
func (a *app) runDemo(c *cobra.Command, path string, quiet bool) error {
	if !quiet {
		fmt.Fprintf(a.stderr, "\ncatenrich run %s\n", path)
	}
	text, err := os.ReadFile(path)
	if err != nil {
		return fault.NoInput.Wrap(err)
	}
	f, err := job.Parse(path, text)
	if err != nil {
		return err
	}
	resolved, err := f.Resolve(columns.Catalog{})
	if err != nil {
		return err
	}
	plan, err := pipeline.NewPlan(resolved, formats())
	if err != nil {
		return err
	}
	_, err = a.execute(c.Context(), plan, pipeline.Options{Workers: runtime.NumCPU()}, quiet)
	return err
}
