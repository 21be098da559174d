package main

import (
	"bytes"
	"fmt"

	"github.com/spf13/cobra"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
	"catenrich/pipeline"
	"catenrich/pipeline/report"
)

// reportFlags are the flags of report.
type reportFlags struct {
	previous string
	output   string
	replace  bool
}

func (a *app) reportCommand() *cobra.Command {
	var flags reportFlags
	c := &cobra.Command{
		Use:   "report DIR",
		Short: "Make the page that says whether a release may be handed over",
		Long: `Read the manifests below a directory of outputs, and write one HTML page: may this
release be handed over, and if not, why; then what is in it. No catalogue is read.
With --previous the page also says what changed since an earlier release: a
directory of its manifests, or a single one.

The page goes to DIR/report.html, where run puts it too. For an output or its
manifest, in place of a directory, it goes to <output>.report.html.`,
		Example: `  catenrich report enriched
  catenrich report enriched --previous last-night
  catenrich report enriched.csv -o -`,
		Args: cobra.ExactArgs(1),
		RunE: func(c *cobra.Command, args []string) error { return a.report(args[0], &flags) },
	}
	c.Flags().StringVar(&flags.previous, "previous", "", "earlier release to compare with: a directory or a manifest")
	c.Flags().StringVarP(&flags.output, "output", "o", "", "file for the page, or - for standard output")
	c.Flags().BoolVar(&flags.replace, "replace", false, "replace a file that is no report of ours")
	return c
}

// report is the report command.
func (a *app) report(path string, flags *reportFlags) error {
	release, err := report.Load(path)
	if err != nil {
		return err
	}
	var previous *report.Release
	if flags.previous != "" {
		if previous, err = report.Load(flags.previous); err != nil {
			return err
		}
	}
	if flags.output == pipeline.Standard {
		var page bytes.Buffer
		if err := report.Write(&page, release, previous); err != nil {
			return fault.Internal.Wrap(err)
		}
		_, err := a.stdout.Write(page.Bytes())
		return fault.IO.Wrap(err)
	}
	out := flags.output
	if out == "" {
		out = pipeline.ReportOf(path)
	}
	if err := pipeline.PutReport(publish.OS, out, release, previous, flags.replace); err != nil {
		return err
	}
	fmt.Fprintf(a.stderr, "%s: %s\n", out, release.Headline(previous))
	return nil
}
