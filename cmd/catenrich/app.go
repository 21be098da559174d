package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"os"
	"os/signal"
	"strings"
	"syscall"

	"github.com/spf13/cobra"

	"catenrich/internal/fault"
)

// app is one call of the program, with everything it may touch from outside.
type app struct {
	stdin          io.ReadCloser
	stdout, stderr io.Writer
	caught         os.Signal // the signal that ended the run, or nil
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
		Args:          cobra.NoArgs,
		SilenceErrors: true,
		SilenceUsage:  true,
	}
	root.SetOut(a.stdout)
	root.SetErr(a.stderr)
	root.SetFlagErrorFunc(func(c *cobra.Command, err error) error {
		return fault.Usage.Errorf("%w (`%s --help` lists the flags)", err, c.CommandPath())
	})
	root.AddCommand(a.runCommand(), a.planCommand(), a.gatherCommand(), a.columnsCommand(), a.verifyCommand(), a.explainCommand(), a.reportCommand(), a.demoCommand(), a.versionCommand())
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
			fmt.Fprintf(a.stderr, "catenrich: stopped by signal (%v); nothing half-written is left\n", number)
			return 128 + int(number)
		}
	}
	class := fault.Of(err)
	if class == fault.Internal && isUsage(err) {
		class = fault.Usage
	}
	for _, line := range strings.Split(err.Error(), "\n") {
		fmt.Fprintf(a.stderr, "catenrich: %s\n", line)
	}
	return int(class)
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

// logger writes the log to standard error, without the time: the scheduler
// that keeps the log adds its own.
func (a *app) logger(level slog.Level) *slog.Logger {
	return slog.New(slog.NewTextHandler(a.stderr, &slog.HandlerOptions{
		Level: level,
		ReplaceAttr: func(groups []string, attr slog.Attr) slog.Attr {
			if attr.Key == slog.TimeKey && len(groups) == 0 {
				return slog.Attr{}
			}
			return attr
		},
	}))
}
