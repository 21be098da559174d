package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"catenrich/internal/fault"
	"catenrich/pipeline/job"
	"catenrich/pipeline/prove"
)

// proofFlags are the flags that verify and explain share.
type proofFlags struct {
	asJSON bool
	job    string
	files  []string
}

func (f *proofFlags) register(c *cobra.Command) {
	c.Flags().BoolVar(&f.asJSON, "json", false, "print JSON")
	c.Flags().StringArrayVar(&f.files, "files", nil, "SED, bandpass or K table of the job, or a directory of them (may be repeated; beside the output they are found anyway)")
	c.Flags().StringVar(&f.job, "job", "", "job file that names them")
}

// options are the prover's.
func (f *proofFlags) options() (prove.Options, error) {
	o := prove.Options{Files: f.files}
	if f.job == "" {
		return o, nil
	}
	text, err := job.Read(f.job)
	if err != nil {
		return o, fault.NoInput.Errorf("--job: %w", err)
	}
	file, err := job.Parse(f.job, text)
	if err != nil {
		return o, err
	}
	o.Files = append(o.Files, file.SideFiles()...)
	return o, nil
}

func (a *app) verifyCommand() *cobra.Command {
	var flags proofFlags
	var input string
	var rows int64
	var all bool
	c := &cobra.Command{
		Use:   "verify OUT…",
		Short: "Prove that outputs are what their manifests say",
		Long: `Prove outputs, or every output in a directory, without their inputs: the manifest
is whole, output and sidecars have the recorded digests, the verbatim part is
the input by its digest, the settings have the config hash, the columns are
those that the settings add, nulls and status bits count up, and rows that
nobody chose, recomputed by quadrature from the output's own columns, are equal
to 1e-9. Exit code 65 if anything is not so.`,
		Example: `  catenrich verify enriched.csv
  catenrich verify enriched/ --rows 100000
  catenrich verify enriched/a.parquet --all --input nightly/a.parquet
  catenrich verify enriched/ --json | jq '.[] | select(.whole | not)'`,
		Args: cobra.MinimumNArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			if rows < 0 {
				return fault.Usage.Errorf("--rows is %d, want 0 or more", rows)
			}
			options, err := flags.options()
			if err != nil {
				return err
			}
			options.Rows, options.All, options.Input = rows, all, input
			return a.verify(c.Context(), args, options, flags.asJSON)
		},
	}
	flags.register(c)
	c.Flags().Int64Var(&rows, "rows", prove.DefaultRows, "how many rows to recompute")
	c.Flags().BoolVar(&all, "all", false, "recompute all rows")
	c.Flags().StringVar(&input, "input", "", "the input to compare with, or the directory that unit ids start from")
	return c
}

// verify proves every output, and fails if one is not whole.
func (a *app) verify(ctx context.Context, args []string, options prove.Options, asJSON bool) error {
	outputs, err := prove.Targets(args)
	if err != nil {
		return err
	}
	prover := prove.New(formats(), options)
	reports := []*prove.Report{}
	var failed []error
	for _, output := range outputs {
		report, err := prover.Verify(ctx, output)
		if err != nil {
			failed = append(failed, fmt.Errorf("%s: %w", output, err))
			if ctx.Err() != nil {
				break
			}
			continue
		}
		if err := report.Err(); err != nil {
			failed = append(failed, err)
		}
		reports = append(reports, report)
		if !asJSON {
			if err := reportText(a.stdout, report); err != nil {
				return fault.IO.Wrap(err)
			}
		}
	}
	if asJSON {
		if err := printJSON(a.stdout, reports); err != nil {
			return fault.IO.Wrap(err)
		}
	}
	if len(failed) > 0 && len(outputs) > 1 {
		failed = append(failed, fault.Data.Errorf("%d of %d outputs are not proven", len(failed), len(outputs)))
	}
	return errors.Join(failed...)
}

// reportText is a report for people.
func reportText(w io.Writer, r *prove.Report) error {
	verdict := "proven"
	if !r.Whole {
		verdict = "NOT PROVEN"
	}
	fmt.Fprintf(w, "%s: %s\n", r.Output, verdict)
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	for _, c := range r.Checks {
		fmt.Fprintf(t, "  %s\t%s\t%s\n", c.Name, c.Result, c.Detail)
	}
	if err := t.Flush(); err != nil {
		return err
	}
	if len(r.Mismatches) > 0 {
		fmt.Fprintf(t, "\n  row\tcolumn\tstored\trecomputed\n")
		for _, m := range r.Mismatches {
			fmt.Fprintf(t, "  %d\t%s\t%s\t%s\n", m.Row, m.Column, m.Stored, m.Recomputed)
		}
		if more := r.Wrong - int64(len(r.Mismatches)); more > 0 {
			fmt.Fprintf(t, "  and %d more\n", more)
		}
	}
	return t.Flush()
}
