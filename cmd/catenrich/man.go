package main

import (
	"bytes"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"catenrich/internal/fault"
)

// manCommand writes the manual pages. It is hidden: only who packages the
// program needs it.
func (a *app) manCommand() *cobra.Command {
	return &cobra.Command{
		Use:     "man DIR",
		Short:   "Write the manual pages into a directory",
		Long:    "Write a manual page for the program and for each of its commands into DIR, made\nfrom the same tables as the help.",
		Example: "  catenrich man /usr/local/share/man/man1",
		Args:    cobra.ExactArgs(1),
		Hidden:  true,
		RunE: func(c *cobra.Command, args []string) error {
			if err := os.MkdirAll(args[0], 0o777); err != nil {
				return fault.CantCreate.Wrap(err)
			}
			for _, page := range manPages(c.Root()) {
				if err := os.WriteFile(filepath.Join(args[0], page.name), page.text, 0o666); err != nil {
					return fault.CantCreate.Wrap(err)
				}
			}
			return nil
		},
	}
}

// A manPage is one file of section 1.
type manPage struct {
	name string
	text []byte
}

// manPages makes a page for a command and each one below it.
func manPages(c *cobra.Command) []manPage {
	pages := []manPage{{manName(c) + ".1", manText(c)}}
	for _, sub := range c.Commands() {
		if sub.IsAvailableCommand() && sub.Name() != "completion" {
			pages = append(pages, manPages(sub)...)
		}
	}
	return pages
}

func manName(c *cobra.Command) string { return strings.ReplaceAll(c.CommandPath(), " ", "-") }

// manText is the page of one command, in the man macros of roff. It has no
// date, so that the same release makes the same pages.
func manText(c *cobra.Command) []byte {
	var b bytes.Buffer
	fmt.Fprintf(&b, ".TH %s 1 \"\" catenrich \"User commands\"\n", strings.ToUpper(roff(manName(c))))
	fmt.Fprintf(&b, ".SH NAME\n%s \\- %s\n", roff(manName(c)), roff(c.Short))
	fmt.Fprintf(&b, ".SH SYNOPSIS\n.B %s\n%s\n", roff(c.CommandPath()), roff(strings.TrimSpace(strings.TrimPrefix(c.UseLine(), c.CommandPath()))))
	about := c.Long
	if about == "" {
		about = c.Short + "."
	}
	fmt.Fprintf(&b, ".SH DESCRIPTION\n%s\n", strings.ReplaceAll(roff(about), "\n\n", "\n.PP\n"))
	if c.HasAvailableSubCommands() {
		b.WriteString(".SH COMMANDS\n")
		for _, sub := range c.Commands() {
			if sub.IsAvailableCommand() {
				fmt.Fprintf(&b, ".TP\n.B %s\n%s\n", roff(sub.Name()), roff(sub.Short))
			}
		}
	}
	b.WriteString(".SH OPTIONS\n")
	option := func(f *pflag.Flag) {
		if f.Hidden {
			return
		}
		value, usage := pflag.UnquoteUsage(f)
		name := "\\fB\\-\\-" + roff(f.Name) + "\\fR"
		if f.Shorthand != "" {
			name = "\\fB\\-" + f.Shorthand + "\\fR, " + name
		}
		if value != "" {
			name += " \\fI" + roff(value) + "\\fR"
		}
		fmt.Fprintf(&b, ".TP\n%s\n%s\n", name, roff(usage))
	}
	c.NonInheritedFlags().VisitAll(option)
	c.InheritedFlags().VisitAll(option)
	if c.Example != "" {
		fmt.Fprintf(&b, ".SH EXAMPLES\n.nf\n%s\n.fi\n", roff(c.Example))
	}
	b.WriteString(".SH EXIT STATUS\n")
	for _, e := range exitCodes {
		fmt.Fprintf(&b, ".TP\n.B %s\n%s\n", e.Code, roff(e.Meaning))
	}
	b.WriteString(".SH SEE ALSO\n")
	var others []string
	for _, other := range append([]*cobra.Command{c.Root()}, c.Root().Commands()...) {
		if other != c && (other == c.Root() || other.IsAvailableCommand() && other.Name() != "completion" && other.Name() != "help") {
			others = append(others, fmt.Sprintf("\\fB%s\\fR(1)", roff(manName(other))))
		}
	}
	b.WriteString(strings.Join(others, ", ") + "\n")
	return b.Bytes()
}

var roffEscapes = strings.NewReplacer(`\`, `\e`, "-", `\-`, "…", "...", "\n'", "\n\\&'", "\n.", "\n\\&.")

// roff escapes text: a backslash, hyphens that are to be copied, and signs at
// the start of a line that would make it a request.
func roff(s string) string {
	return strings.TrimPrefix(roffEscapes.Replace("\n"+s), "\n")
}

// exitCodes are public: scripts rely on them. TestExitCodes holds them to the
// classes of internal/fault.
var exitCodes = []struct{ Code, Meaning, Remedy string }{
	{"0", "done, or up to date", ""},
	{"64", "the command line is wrong", "read the message"},
	{"65", "an input's content is wrong: no such column, no numbers in it, too many rejects, a damaged file; or a proof failed", "mend the file, or the job"},
	{"66", "an input is absent or unreadable", "see whether the step before has run"},
	{"70", "a fault of catenrich", "report it"},
	{"73", "an output exists that catenrich did not write, or cannot be made", "move it, or --replace"},
	{"74", "reading or writing failed, the disk is full", "make room, and run again"},
	{"75", "another run holds the output, or work is missing", "try again, or --wait"},
	{"78", "the job file is wrong, names clash, a model is refused, an output is an input", "mend the job"},
	{"130", "stopped by SIGINT", "run again: finished units are skipped"},
	{"143", "stopped by SIGTERM", "run again: finished units are skipped"},
}
