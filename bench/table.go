package main

import (
	"fmt"
	"io"
	"os"
	"runtime"
	"strings"
	"text/tabwriter"
)

// A result is what a contender cost, and how it compares with the first of its
// line: Ratio 3 is three times as long.
type result struct {
	Name string `json:"name"`
	usage
	Ratio    float64 `json:"wall_ratio"`
	CPURatio float64 `json:"cpu_ratio"`
	Rounds   []usage `json:"rounds"`
}

// A row is one line of the table.
type row struct {
	Name    string   `json:"name"`
	What    string   `json:"what"`
	Rows    int      `json:"rows,omitempty"`
	Bytes   int64    `json:"input_bytes,omitempty"`
	Results []result `json:"results,omitempty"`
	Verdict *verdict `json:"verdict,omitempty"`
}

// A verdict compares one number with its bar and aim. On a machine with other
// work the ratio of processor times says more than that of the clock.
type verdict struct {
	Of    string  `json:"of"`
	Unit  string  `json:"unit"`
	Value float64 `json:"value"`
	Bar   float64 `json:"bar"`
	Aim   float64 `json:"aim"`
	Below bool    `json:"below"` // the number is to be below its bar
	CPU   float64 `json:"cpu_ratio,omitempty"`
}

func (v *verdict) String() string {
	reaches := func(mark float64) bool {
		if v.Below {
			return v.Value <= mark
		}
		return v.Value >= mark
	}
	word := "MISSED"
	switch {
	case reaches(v.Aim):
		word = "aim reached"
	case reaches(v.Bar):
		word = "bar reached"
	}
	text := fmt.Sprintf("%s %.3g %s (bar %.3g, aim %.3g): %s", v.Of, v.Value, v.Unit, v.Bar, v.Aim, word)
	if v.CPU > 0 {
		text += fmt.Sprintf("; %.2f times by processor time", v.CPU)
	}
	return text
}

// A table is all that was measured, and on what.
type table struct {
	Go     string   `json:"go"`
	System string   `json:"system"`
	Cores  int      `json:"cores"`
	Load   []string `json:"load_average"` // before and after
	Scale  float64  `json:"scale"`
	Rounds int      `json:"rounds"`
	Lines  []row    `json:"lines"`
	Absent []string `json:"absent,omitempty"`
}

func newTable(o *options) *table {
	return &table{Go: runtime.Version(), System: runtime.GOOS + "/" + runtime.GOARCH, Cores: runtime.NumCPU(), Load: []string{load()},
		Scale: o.scale, Rounds: o.rounds}
}

// load is the load average, where the system tells it.
func load() string {
	text, err := os.ReadFile("/proc/loadavg")
	if err != nil {
		return "unknown"
	}
	return strings.Join(strings.Fields(string(text))[:3], " ")
}

func (t *table) print(w io.Writer) {
	fmt.Fprintf(w, "%s, %s, %d cores, load average %s, scale %g, %d rounds in turn, medians\n",
		t.Go, t.System, t.Cores, strings.Join(t.Load, " before and after "), t.Scale, t.Rounds)
	for i := range t.Lines {
		fmt.Fprintln(w)
		t.Lines[i].print(w)
	}
	for _, a := range t.Absent {
		fmt.Fprintf(w, "\n%s\n", a)
	}
}

func (r *row) print(w io.Writer) {
	fmt.Fprintf(w, "%s: %s", r.Name, r.What)
	if r.Bytes > 0 {
		fmt.Fprintf(w, " (%d rows, %.1f MB)", r.Rows, float64(r.Bytes)/1e6)
	}
	fmt.Fprintln(w)
	if len(r.Results) > 0 {
		columns := tabwriter.NewWriter(w, 0, 0, 2, ' ', tabwriter.AlignRight)
		fmt.Fprintln(columns, "\twall s\tuser s\tsystem s\tMrows/s\tMB/s in\tpeak MB\twall ratio\tCPU ratio\t")
		for _, c := range r.Results {
			fmt.Fprintf(columns, "%s\t%.3f\t%.2f\t%.2f\t%.3f\t%.1f\t%.0f\t%.2f\t%.2f\t\n", c.Name, c.Wall, c.User, c.System,
				float64(r.Rows)/c.Wall/1e6, float64(r.Bytes)/c.Wall/1e6, float64(c.Peak)/1e6, c.Ratio, c.CPURatio)
		}
		columns.Flush()
	}
	if r.Verdict != nil {
		fmt.Fprintf(w, "  %s\n", r.Verdict)
	}
}
