package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"strings"
	"syscall"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"catenrich/internal/fault"
	"catenrich/internal/table"
)

// app is one call of the program, with everything it may touch from outside.
type app struct {
	stdin          io.ReadCloser
	stdout, stderr io.Writer
	caught         os.Signal // the signal that ended the run, or nil
	logFormat      string    // --log-format
}

// run is the program without the process: it returns the exit code.
func run(args []string, stdin io.ReadCloser, stdout, stderr io.Writer) int {
	a := &app{stdin: newInterruptible(stdin), stdout: stdout, stderr: stderr}
	ctx, stop := a.untilSignal()
	defer stop()
	root := a.root()
	root.SetArgs(args)
	return a.exit(root.ExecuteContext(ctx))
}

// root is the command tree.
func (a *app) root() *cobra.Command {
	root := &cobra.Command{
		Use:   "catenrich",
		Short: "Add derived cosmological columns to survey catalogues",
		Long: `catenrich copies a survey catalogue (CSV, Parquet or FITS) row by row, untouched, and
adds what cosmology says of each redshift: distances, times, volumes, recession
velocities, flags, and a status that explains every empty cell.`,
		Example: `  catenrich run nightly.toml
  catenrich run survey.csv --redshift z --add distances,times -o enriched.csv
  catenrich plan nightly.toml
  catenrich columns`,
		Args:              cobra.ArbitraryArgs,
		SilenceErrors:     true,
		SilenceUsage:      true,
		PersistentPreRunE: func(*cobra.Command, []string) error { return a.checkLogFormat() },
	}
	root.RunE = func(c *cobra.Command, args []string) error {
		if len(args) > 0 {
			return unknownCommand(c, args[0])
		}
		return c.Help()
	}
	root.PersistentFlags().StringVar(&a.logFormat, "log-format", logText, "how messages are written to standard error: text or json")
	root.SetOut(a.stdout)
	root.SetErr(a.stderr)
	root.SetFlagErrorFunc(func(c *cobra.Command, err error) error {
		return fault.Usage.Errorf("%w%s (`%s --help` lists the flags)", err, nearestFlag(c, err), c.CommandPath())
	})
	root.AddCommand(a.runCommand(), a.planCommand(), a.gatherCommand(), a.columnsCommand(), a.verifyCommand(), a.explainCommand(), a.reportCommand(), a.demoCommand(), a.manCommand(), a.versionCommand())
	a.registerCompletions(root)
	return root
}

// untilSignal returns a context that ends with the first SIGINT or SIGTERM. It
// also closes standard input then, so that an idle pipe cannot hold the exit.
func (a *app) untilSignal() (context.Context, func()) {
	ctx, cancel := context.WithCancel(context.Background())
	signals := make(chan os.Signal, 1)
	signal.Notify(signals, syscall.SIGINT, syscall.SIGTERM)
	done := make(chan struct{})
	go func() {
		select {
		case a.caught = <-signals:
			signal.Stop(signals) // a second one ends the process at once
			cancel()
			a.stdin.Close()
		case <-done:
		}
	}()
	return ctx, func() {
		signal.Stop(signals)
		close(done)
		cancel()
	}
}

// exit prints the error once and returns the exit code: 0, the class of the
// fault by sysexits(3), or 128 and the signal's number.
func (a *app) exit(err error) int {
	if err == nil {
		return 0
	}
	if errors.Is(err, context.Canceled) {
		if number, ok := a.caught.(syscall.Signal); ok {
			a.fault(fmt.Sprintf("stopped by signal (%v); nothing half-written is left", number))
			return 128 + int(number)
		}
	}
	class := fault.Of(err)
	if class == fault.Internal && isUsage(err) {
		class = fault.Usage
	}
	for _, line := range strings.Split(err.Error(), "\n") {
		a.fault(line)
	}
	return int(class)
}

// unknownCommand names the commands that may have been meant.
func unknownCommand(root *cobra.Command, name string) error {
	var known []string
	for _, c := range root.Commands() {
		if c.IsAvailableCommand() {
			known = append(known, c.Name())
		}
	}
	return fault.Usage.Errorf("unknown command %q; the nearest are %s (`catenrich --help` lists them)", name, table.Quote(table.Nearest(name, known, 2)))
}

// nearestFlag names the flags that may have been meant by one that is unknown.
func nearestFlag(c *cobra.Command, err error) string {
	var unknown *pflag.NotExistError
	if !errors.As(err, &unknown) || len(unknown.GetSpecifiedName()) < 2 {
		return ""
	}
	var known []string
	c.Flags().VisitAll(func(f *pflag.Flag) { known = append(known, "--"+f.Name) })
	near := table.Nearest("--"+unknown.GetSpecifiedName(), known, 2)
	return "; the nearest are " + strings.Join(near, " and ")
}

// isUsage recognises the faults that the command-line library finds itself: it
// gives them no type, only these beginnings.
func isUsage(err error) bool {
	for _, start := range []string{"unknown command", "accepts ", "requires ", "unknown flag", "unknown shorthand"} {
		if strings.HasPrefix(err.Error(), start) {
			return true
		}
	}
	return false
}
