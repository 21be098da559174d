package main

import (
	"encoding/json"
	"fmt"
	"io"
	"slices"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"catenrich/internal/fault"
	"catenrich/internal/status"
	"catenrich/pipeline/columns"
)

func (a *app) columnsCommand() *cobra.Command {
	var asJSON, asMarkdown, bits bool
	var like string
	c := &cobra.Command{
		Use:   "columns",
		Short: "List the columns that can be added",
		Long: `List every column that can be added: its name, group, unit, meaning and published
source. Name them, or their groups, in add.columns or with --add.`,
		Example: `  catenrich columns
  catenrich columns --like volume
  catenrich columns --status
  catenrich columns --markdown > columns.md`,
		Args: cobra.NoArgs,
		RunE: func(*cobra.Command, []string) error {
			if asJSON && asMarkdown {
				return fault.Usage.Errorf("--json and --markdown exclude each other")
			}
			if bits {
				return printBits(a.stdout)
			}
			rows := columnRows(like)
			switch {
			case asJSON:
				return printJSON(a.stdout, rows)
			case asMarkdown:
				return markdownColumns(a.stdout, rows)
			}
			return textColumns(a.stdout, rows)
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print JSON")
	c.Flags().BoolVar(&asMarkdown, "markdown", false, "print a Markdown table")
	c.Flags().BoolVar(&bits, "status", false, "explain the bits of "+columns.StatusName)
	c.Flags().StringVar(&like, "like", "", "only columns whose name, group or meaning holds this text")
	return c
}

// columnRow is a column as the listings show it.
type columnRow struct {
	Name        string `json:"name"`
	Group       string `json:"group"`
	Unit        string `json:"unit"`
	UCD         string `json:"ucd"`
	Description string `json:"description"`
	Source      string `json:"source"`
	Error       bool   `json:"error"`    // <name>_error can be had
	Interval    bool   `json:"interval"` // <name>_lo and <name>_hi can be had
}

func columnRows(like string) []columnRow {
	var rows []columnRow
	like = strings.ToLower(like)
	for _, e := range append(columns.All(), columns.Status()) {
		row := columnRow{e.Pattern(), e.Group, e.Unit.VOUnit("Mpc"), e.UCD, e.Doc, e.From, e.Spread.Error != nil, e.Spread.Interval}
		if strings.Contains(strings.ToLower(row.Name+" "+row.Group+" "+row.Description), like) {
			rows = append(rows, row)
		}
	}
	order := append(columns.Groups(), columns.Status().Group)
	slices.SortStableFunc(rows, func(a, b columnRow) int {
		return slices.Index(order, a.Group) - slices.Index(order, b.Group)
	})
	return rows
}

// spreads marks the columns that have an error or an interval.
func (r *columnRow) spreads() string {
	switch {
	case r.Error && r.Interval:
		return "e i"
	case r.Error:
		return "e"
	}
	return ""
}

func textColumns(w io.Writer, rows []columnRow) error {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	group := ""
	for _, r := range rows {
		if r.Group != group {
			group = r.Group
			fmt.Fprintf(t, "%s\n", group)
		}
		unit := r.Unit
		if unit == "" {
			unit = "-"
		}
		fmt.Fprintf(t, "  %s\t%s\t%s\t%s\n", r.Name, unit, r.spreads(), r.Description)
	}
	fmt.Fprintf(t, "\ne: <name>_error can be added too; i: <name>_lo and <name>_hi\n")
	fmt.Fprintf(t, "groups: %s\n", strings.Join(columns.Groups(), ", "))
	return t.Flush()
}

func markdownColumns(w io.Writer, rows []columnRow) error {
	fmt.Fprintln(w, "| column | group | unit | | what it is | source |\n|---|---|---|---|---|---|")
	for _, r := range rows {
		if _, err := fmt.Fprintf(w, "| `%s` | %s | %s | %s | %s | %s |\n", r.Name, r.Group, r.Unit, r.spreads(), r.Description, r.Source); err != nil {
			return err
		}
	}
	return nil
}

func printBits(w io.Writer) error {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', tabwriter.AlignRight)
	for i := range status.Count {
		fmt.Fprintf(t, "%d\t %s\n", 1<<i, status.Describe(i))
	}
	return t.Flush()
}

func printJSON(w io.Writer, v any) error {
	e := json.NewEncoder(w)
	e.SetIndent("", "  ")
	e.SetEscapeHTML(false)
	return e.Encode(v)
}
