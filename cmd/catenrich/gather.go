package main

import (
	"context"
	"fmt"
	"log/slog"
	"runtime"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"catenrich/internal/fault"
	"catenrich/pipeline"
)

// gatherFlags are the flags of gather that are no setting of the job.
type gatherFlags struct {
	runFlags
	shares int
}

func (a *app) gatherCommand() *cobra.Command {
	var flags gatherFlags
	var settings jobFlags
	c := &cobra.Command{
		Use:   "gather [JOB.toml | FILES…]",
		Short: "End a release that was made in shares",
		Long: `Look whether every unit of a job stands, whoever made it: whole, of this job, and
made of the input as it is now. A publication that a crash interrupted is brought
to its end. If all stand, add up their manifests and write the release manifest
(release.manifest.json) and the report into the output directory, the same bytes as
a single run of the job writes.

Otherwise print what is not done, one unit a line, with the reason and the
commands that do it, write nothing, and exit with 75.`,
		Example: `  catenrich gather nightly.toml
  catenrich gather nightly.toml --shares 8
  catenrich gather nightly.toml --check=full`,
		RunE: func(c *cobra.Command, args []string) error {
			return a.gather(c.Context(), &flags, &settings, args)
		},
	}
	c.Flags().IntVar(&flags.workers, "workers", runtime.NumCPU(), "how many processors to use")
	c.Flags().StringVar(&flags.check, "check", "quick", "how to see that a unit stands: quick, or full, which reads everything")
	c.Flags().IntVar(&flags.shares, "shares", 0, "name the shares, of so many, that have undone units")
	c.Flags().BoolVar(&flags.replace, "replace", false, "replace a report or release manifest that catenrich did not write")
	c.Flags().BoolVarP(&flags.quiet, "quiet", "q", false, "print warnings and errors only")
	c.Flags().BoolVar(&flags.noReport, "no-report", false, "make no report.html in the output directory")
	c.Flags().StringVar(&flags.previous, "previous", "", "earlier release that the report compares with: a directory or a manifest")
	settings.register(c.Flags())
	return c
}

// gather is the gather command.
func (a *app) gather(ctx context.Context, flags *gatherFlags, settings *jobFlags, args []string) error {
	options, err := flags.options()
	if err != nil {
		return err
	}
	if err := checkShares(flags.shares); err != nil {
		return err
	}
	resolved, _, err := settings.resolve(args)
	if err != nil {
		return err
	}
	plan, err := pipeline.NewPlan(resolved, formats())
	if err != nil {
		return err
	}
	level := slog.LevelInfo
	if flags.quiet {
		level = slog.LevelWarn
	}
	show := a.newProgress(plan.Size(), flags.quiet, a.logger(level))
	g, err := pipeline.Gather(ctx, plan, options, show)
	show.finish()
	if err != nil {
		return err
	}
	if len(g.Undone) > 0 {
		return a.undone(plan, g, flags.shares, settings.command("run", args))
	}
	if !flags.quiet {
		fmt.Fprint(a.stderr, gatherText(g))
	}
	return nil
}

// undone lists what is missing on standard output, and ends in the error that
// names the commands.
func (a *app) undone(p *pipeline.Plan, g *pipeline.Gathering, shares int, command string) error {
	done := make(map[string]bool, len(g.Undone))
	for _, u := range g.Undone {
		done[u.Unit.ID] = true
		if _, err := fmt.Fprintf(a.stdout, "%s\t%s\n", u.Unit.ID, u.Why); err != nil {
			return fault.IO.Wrap(err)
		}
	}
	commands := []string{command}
	if shares > 0 {
		commands = nil
		for i, s := range p.Shares(shares) {
			if slices.ContainsFunc(s.Units, func(u int) bool { return done[p.Units[u].ID] }) {
				commands = append(commands, fmt.Sprintf("%s --share %d/%d", command, i+1, shares))
			}
		}
	}
	verb := "are"
	if len(g.Undone) == 1 {
		verb = "is"
	}
	return fault.TryAgain.Errorf("%d of %s %s not done, and no release was written; do what is missing with\n  %s",
		len(g.Undone), plural(len(p.Units), "unit"), verb, strings.Join(commands, "\n  "))
}

// gatherText is what a gathering says at its end.
func gatherText(g *pipeline.Gathering) string {
	var b strings.Builder
	fmt.Fprintf(&b, "%d units stand, looked at in %.2f s\n", g.Units.Count, g.Elapsed.Seconds())
	if g.Finished > 0 {
		fmt.Fprintf(&b, "ended   %s\n", plural(g.Finished, "interrupted publication"))
	}
	fmt.Fprintf(&b, "rows    %d, and %s without a row\n", g.Rows, plural(g.Rejects, "record"))
	fmt.Fprintf(&b, "units   %v\n", g.Units.SHA256)
	fmt.Fprintf(&b, "release %s\n", g.Release)
	if g.Report != "" {
		fmt.Fprintf(&b, "report  %s: %s\n", g.Report, g.Verdict)
	}
	return b.String()
}

// command is the command line, for a shell, that does the same job by another
// command.
func (j *jobFlags) command(name string, args []string) string {
	words := append([]string{"catenrich", name}, args...)
	for _, g := range j.given {
		words = append(words, "--"+g.setting.flag, g.value)
	}
	if j.output != "" {
		words = append(words, "--output", j.output)
	}
	for i, w := range words {
		words[i] = quoted(w)
	}
	return strings.Join(words, " ")
}

// quoted is a word as a shell reads it.
func quoted(word string) string {
	plain := func(r rune) bool {
		return r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z' || r >= '0' && r <= '9' || strings.ContainsRune("-_./,:=+@%", r)
	}
	if word != "" && !strings.ContainsFunc(word, func(r rune) bool { return !plain(r) }) {
		return word
	}
	return "'" + strings.ReplaceAll(word, "'", `'\''`) + "'"
}
