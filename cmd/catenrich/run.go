package main

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"os"
	"runtime"
	"strconv"
	"strings"

	"github.com/pelletier/go-toml/v2"
	"github.com/spf13/cobra"

	"catenrich/internal/fault"
	"catenrich/pipeline"
	"catenrich/pipeline/job"
	"catenrich/pipeline/report"
)

// runFlags are the flags of run that are no setting of the job.
type runFlags struct {
	workers int
	memory  string
	replace bool
	quiet   bool
	wait    bool
	check   string
	saveJob string

	noReport bool
	previous string
	share    string
	metrics  string
	profile  profileFlags
}

func (a *app) runCommand() *cobra.Command {
	var flags runFlags
	var settings jobFlags
	c := &cobra.Command{
		Use:   "run [JOB.toml | FILES…]",
		Short: "Enrich catalogues",
		Long: `Read the catalogues of a job and write each again with its derived columns, a
manifest beside it. Work that is up to date is skipped. An output appears whole
under its name, or not at all.`,
		Example: `  catenrich run nightly.toml
  catenrich run survey.csv --redshift z --add distances -o enriched.csv
  catenrich run *.csv.gz --velocity cz --velocity-convention optical --add all -o out/
  catenrich run nightly.toml --share 3/8
  zcat survey.csv.gz | catenrich run - --redshift z --add luminosity_distance -o -
  catenrich run nightly.toml --log-format json --metrics /var/lib/node_exporter/catenrich.prom`,
		RunE: func(c *cobra.Command, args []string) error {
			return a.runJob(c.Context(), &flags, &settings, args)
		},
	}
	c.Flags().IntVar(&flags.workers, "workers", runtime.NumCPU(), "how many chunks are worked on at once: `N`")
	c.Flags().StringVar(&flags.memory, "memory", "", "memory that chunks may take, a `SIZE` such as 300M (default: 256M, and 40M for each worker beyond two)")
	c.Flags().BoolVar(&flags.replace, "replace", false, "replace an output that catenrich did not write")
	c.Flags().BoolVar(&flags.wait, "wait", false, "wait for another run that holds the same output")
	c.Flags().BoolVarP(&flags.quiet, "quiet", "q", false, "print warnings and errors only")
	c.Flags().StringVar(&flags.check, "check", "quick", "how to see that a unit is up to date: quick, or full, which reads everything")
	c.Flags().StringVar(&flags.saveJob, "save-job", "", "also write the job file that the flags amount to, to `FILE`")
	c.Flags().BoolVar(&flags.noReport, "no-report", false, "make no report.html in the output directory")
	c.Flags().StringVar(&flags.previous, "previous", "", "earlier release that the report compares with: `PATH` of a directory or a manifest")
	c.Flags().StringVar(&flags.share, "share", "", "do share `I/N` of the units; catenrich gather ends the release when all are done")
	c.Flags().StringVar(&flags.metrics, "metrics", "", "also write the run's figures to `FILE`, as OpenMetrics text (for a node exporter's textfile collector: NAME.prom)")
	flags.profile.register(c.Flags())
	settings.register(c.Flags())
	return c
}

// runJob is the run command.
func (a *app) runJob(ctx context.Context, flags *runFlags, settings *jobFlags, args []string) (err error) {
	stop, err := flags.profile.start()
	defer func() { err = errors.Join(err, stop()) }()
	if err != nil {
		return err
	}
	metrics, err := newMetrics(flags.metrics, args)
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, metrics.write(err)) }()
	options, err := flags.options()
	if err != nil {
		return err
	}
	share, shares, err := parseShare(flags.share)
	if err != nil {
		return err
	}
	resolved, file, err := settings.resolve(args)
	if err != nil {
		return err
	}
	if flags.saveJob != "" {
		if err := saveJob(flags.saveJob, file); err != nil {
			return err
		}
	}
	plan, err := pipeline.NewPlan(resolved, formats())
	if err != nil {
		return err
	}
	if shares > 0 {
		plan = plan.Share(share, shares)
	}
	metrics.plan = plan
	metrics.summary, err = a.execute(ctx, plan, options, flags.quiet)
	return err
}

// execute runs a plan and reports how it went.
func (a *app) execute(ctx context.Context, plan *pipeline.Plan, options pipeline.Options, quiet bool) (*pipeline.Summary, error) {
	level := slog.LevelInfo
	if quiet {
		level = slog.LevelWarn
	}
	log := a.logger(level)
	show := a.newProgress(plan.Size(), quiet, log)
	options.Stdin, options.Stdout, options.Stderr = a.stdin, a.stdout, a.messages()
	for _, w := range plan.Warnings {
		show.Warn(w)
	}
	summary, err := pipeline.Run(ctx, plan, options, show)
	show.finish()
	switch {
	case err != nil || quiet:
	case a.logFormat == logJSON:
		logSummary(log, plan, summary)
	default:
		fmt.Fprint(a.stderr, summaryText(plan, summary))
	}
	return summary, err
}

// options checks the flags, all at once.
func (f *runFlags) options() (pipeline.Options, error) {
	var wrong []string
	o := pipeline.Options{Workers: f.workers, Replace: f.replace, Wait: f.wait, FullCheck: f.check == "full", NoReport: f.noReport}
	if f.workers < 1 || f.workers > 1024 {
		wrong = append(wrong, fmt.Sprintf("--workers is %d, want 1 to 1024", f.workers))
	}
	if f.check != "quick" && f.check != "full" {
		wrong = append(wrong, fmt.Sprintf(`--check is %q, want quick or full`, f.check))
	}
	if f.memory != "" {
		bytes, err := parseBytes(f.memory)
		if err != nil {
			wrong = append(wrong, "--memory "+err.Error())
		}
		o.Memory = bytes
	}
	if len(wrong) > 0 {
		return o, fault.Usage.Errorf("%s", strings.Join(wrong, "\n"))
	}
	var err error
	if f.previous != "" {
		o.Previous, err = report.Load(f.previous)
	}
	return o, err
}

// minMemory is the least that --memory takes: one chunk must fit.
const minMemory = 64 << 20

// parseBytes reads 300M, 2G or a plain number of bytes; M is 2^20.
func parseBytes(s string) (int64, error) {
	shift := map[byte]uint{'K': 10, 'M': 20, 'G': 30, 'T': 40}[s[len(s)-1]]
	digits := s
	if shift > 0 {
		digits = s[:len(s)-1]
	}
	n, err := strconv.ParseInt(digits, 10, 64)
	if err != nil || n > 1<<62>>shift {
		return 0, fmt.Errorf("is %q, want a size such as 300M or 2G", s)
	}
	if n <<= shift; n < minMemory {
		return 0, fmt.Errorf("is %q, want at least %dM", s, minMemory>>20)
	}
	return n, nil
}

// saveJob writes the job file that a command line amounts to.
func saveJob(path string, f *job.File) error {
	text, err := toml.Marshal(f)
	if err != nil {
		return fault.Internal.Wrap(err)
	}
	out, err := os.OpenFile(path, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o666)
	if err != nil {
		return fault.CantCreate.Errorf("--save-job: %w", err)
	}
	if _, err := out.Write(text); err != nil {
		out.Close()
		return fault.IO.Errorf("--save-job: %w", err)
	}
	return fault.IO.Wrap(out.Close())
}
