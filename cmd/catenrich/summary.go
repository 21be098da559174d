package main

import (
	"cmp"
	"fmt"
	"log/slog"
	"slices"
	"strings"

	"catenrich/internal/status"
	"catenrich/pipeline"
)

// summaryReasons is how many status bits a summary names; the report and the
// manifests have them all.
const summaryReasons = 4

// summaryText is what a run says at its end: ten lines at most.
func summaryText(p *pipeline.Plan, s *pipeline.Summary) string {
	var b strings.Builder
	fmt.Fprintf(&b, "%s: %d written, %d up to date, in %.2f s\n", plural(s.Units, "unit"), s.Written, s.UpToDate, s.Elapsed.Seconds())
	fmt.Fprintf(&b, "rows    %d in, %d out, %d rejected", s.Rows+s.Rejects, s.Rows, s.Rejects)
	if s.Rows > 0 {
		fmt.Fprintf(&b, "; %d with a status, %d without", s.Nulls, s.Rows-s.Nulls)
	}
	b.WriteString("\n" + statusText(s))
	fmt.Fprintf(&b, "columns %d added; %s of output\n", len(p.Kernel.Added()), bytesText(s.Size))
	fmt.Fprintf(&b, "config  %s\n", p.ConfigHash)
	if s.Report != "" {
		fmt.Fprintf(&b, "report  %s: %s\n", s.Report, s.Verdict)
	}
	return b.String()
}

// statusText says which status bits most rows have.
func statusText(s *pipeline.Summary) string {
	var set []int
	for i, n := range s.Bits {
		if n > 0 {
			set = append(set, i)
		}
	}
	slices.SortStableFunc(set, func(a, b int) int { return cmp.Compare(s.Bits[b], s.Bits[a]) })
	var b strings.Builder
	for at, i := range set {
		if at == summaryReasons && len(set) > summaryReasons+1 {
			fmt.Fprintf(&b, "status  and %d rarer reasons\n", len(set)-at)
			break
		}
		fmt.Fprintf(&b, "status  %s with bit %d: %s\n", plural(s.Bits[i], "row"), 1<<i, status.Describe(i))
	}
	return b.String()
}

// logSummary is the summary for --log-format json.
func logSummary(log *slog.Logger, p *pipeline.Plan, s *pipeline.Summary) {
	bits := make(map[string]int64)
	for i, n := range s.Bits {
		if n > 0 {
			bits[fmt.Sprint(1<<i)] = n
		}
	}
	log.Info("summary", "units", s.Units, "written", s.Written, "up_to_date", s.UpToDate, "seconds", s.Elapsed.Seconds(),
		"rows", s.Rows, "rejects", s.Rejects, "rows_with_status", s.Nulls, "rows_by_status_bit", bits, "columns", len(p.Kernel.Added()),
		"bytes", s.Size, "config_hash", p.ConfigHash, "report", s.Report, "verdict", s.Verdict)
}
