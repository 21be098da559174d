package main

import (
	"context"
	"fmt"
	"io"
	"strconv"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"catenrich/internal/fault"
	"catenrich/pipeline/prove"
)

func (a *app) explainCommand() *cobra.Command {
	var flags proofFlags
	var row int64
	var where string
	c := &cobra.Command{
		Use:   "explain OUT (--row N | --where COLUMN=VALUE)",
		Short: "Show how the derived values of one row came to be",
		Long: `Show, term by term, how the derived values of one row came to be: the redshift as
given, its frame, the cosmology in numbers, distances, magnitudes, limits, and
what the status bits mean. All of it is recomputed by quadrature from the
output's own columns and its recorded settings, and stands beside what is
stored. Exit code 65 if they differ.`,
		Example: `  catenrich explain enriched.csv --row 17
  catenrich explain enriched.parquet --where id=QR-000042
  catenrich explain enriched.csv --row 17 --json | jq '.columns[] | {column, stored}'`,
		Args: cobra.ExactArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			if c.Flags().Changed("row") == c.Flags().Changed("where") {
				return fault.Usage.Errorf("give one of --row and --where")
			}
			if c.Flags().Changed("row") && row < 1 {
				return fault.Usage.Errorf("--row is %d, want 1 or more: rows are counted from 1, without the header", row)
			}
			options, err := flags.options()
			if err != nil {
				return err
			}
			account, err := explain(c.Context(), args[0], row, where, options)
			if err != nil {
				return err
			}
			return a.printAccount(account, flags.asJSON)
		},
	}
	flags.register(c)
	c.Flags().Int64Var(&row, "row", 0, "number of the row, from 1")
	c.Flags().StringVar(&where, "where", "", "the first row whose column holds this value")
	return c
}

// explain finds the row, and explains it.
func explain(ctx context.Context, output string, row int64, where string, options prove.Options) (*prove.Account, error) {
	prover := prove.New(formats(), options)
	if where != "" {
		column, value, ok := strings.Cut(where, "=")
		if !ok {
			return nil, fault.Usage.Errorf("--where is %q, want COLUMN=VALUE", where)
		}
		var err error
		if row, err = prover.Find(ctx, output, column, value); err != nil {
			return nil, err
		}
	}
	return prover.Explain(output, row)
}

// printAccount prints the account, and fails if the row is not as stored.
func (a *app) printAccount(account *prove.Account, asJSON bool) error {
	print := accountText
	if asJSON {
		print = func(w io.Writer, a *prove.Account) error { return printJSON(w, a) }
	}
	if err := print(a.stdout, account); err != nil {
		return fault.IO.Wrap(err)
	}
	if !account.Whole {
		return fault.Data.Errorf("%s: row %d is not what its manifest's settings make of it", account.Output, account.Row)
	}
	return nil
}

// accountText is an account for people.
func accountText(w io.Writer, a *prove.Account) error {
	fmt.Fprintf(w, "%s, row %d\nconfig hash %s\n", a.Output, a.Row, a.ConfigHash)
	for _, s := range a.Sections {
		fmt.Fprintf(w, "\n%s\n", s.Title)
		t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
		for _, term := range s.Terms {
			fmt.Fprintf(t, "  %s\t%s\t%s\t%s\n", term.Name, termText(&term), term.Unit, term.How)
		}
		if err := t.Flush(); err != nil {
			return err
		}
	}
	fmt.Fprintf(w, "\nderived columns\n")
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprintf(t, "  column\tstored\trecomputed\tunit\t\n")
	for _, c := range a.Columns {
		mark := c.What
		if !c.Same {
			mark = "DIFFERS: " + mark
		}
		fmt.Fprintf(t, "  %s\t%s\t%s\t%s\t%s\n", c.Column, c.Stored, c.Recomputed, c.Unit, mark)
	}
	if err := t.Flush(); err != nil {
		return err
	}
	fmt.Fprintf(w, "\nstatus %d\n", a.Status)
	for _, reason := range a.Reasons {
		fmt.Fprintf(w, "  %s\n", reason)
	}
	if a.Status == 0 {
		fmt.Fprintf(w, "  nothing is wrong with this row\n")
	}
	return nil
}

// termText is a number with the digits that mean something to a person, and a
// few more.
func termText(t *prove.Term) string {
	switch {
	case t.Text != "":
		return t.Text
	case t.Value == nil:
		return "none"
	}
	return strconv.FormatFloat(*t.Value, 'g', 10, 64)
}
