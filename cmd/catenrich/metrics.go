package main

import (
	"bytes"
	"fmt"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"time"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
	"catenrich/internal/status"
	"catenrich/pipeline"
)

// metrics are a run's figures for a monitoring system, as OpenMetrics 1.0 text,
// which is Prometheus' text format too. All are gauges: they speak of the last
// run. Nothing of them is in an output.
type metrics struct {
	path  string
	label string // the job file, so that several jobs can be told apart
	start time.Time

	plan    *pipeline.Plan    // nil if the run did not get so far
	summary *pipeline.Summary // likewise
}

// newMetrics refuses, before the run, a place that holds something else. An
// empty path is for no metrics.
func newMetrics(path string, args []string) (*metrics, error) {
	m := &metrics{path: path, start: time.Now()}
	if len(args) == 1 && strings.HasSuffix(args[0], ".toml") {
		m.label = filepath.Base(args[0])
	}
	if path == "" {
		return m, nil
	}
	if err := publish.MayPut(publish.OS, path, ourMetrics, false); err != nil {
		return m, fmt.Errorf("--metrics: %w", err)
	}
	return m, nil
}

// metricsHead begins every file of metrics.
const metricsHead = "# TYPE catenrich_run_success gauge\n"

func ourMetrics(text []byte) bool { return bytes.HasPrefix(text, []byte(metricsHead)) }

// lastSuccess finds the time of the last run that succeeded, which a failed
// run leaves as it was.
var lastSuccess = regexp.MustCompile(`(?m)^catenrich_run_success_timestamp_seconds\{[^\n]*\} ([0-9.]+)$`)

// write writes the file whole or not at all. failure is the error of the run.
func (m *metrics) write(failure error) error {
	if m.path == "" {
		return nil
	}
	success := ""
	if failure == nil {
		success = seconds(time.Now())
	} else if old, err := os.ReadFile(m.path); err == nil {
		if found := lastSuccess.FindSubmatch(old); found != nil {
			success = string(found[1])
		}
	}
	if err := publish.Put(publish.OS, m.path, []byte(m.text(failure == nil, success)), ourMetrics, false); err != nil {
		return fault.Of(err).Errorf("--metrics: %w", err)
	}
	return nil
}

// seconds is a Unix time with milliseconds.
func seconds(t time.Time) string { return fmt.Sprintf("%.3f", float64(t.UnixMilli())/1000) }

// text is the file.
func (m *metrics) text(succeeded bool, lastSuccess string) string {
	x := exposition{label: m.label}
	x.family("catenrich_run_success", "", "1 if the last run did all it was asked to, else 0")
	x.sample(flag01(succeeded))
	x.family("catenrich_run_end_timestamp_seconds", "seconds", "when the last run ended, in Unix time")
	x.sample(seconds(time.Now()))
	if lastSuccess != "" {
		x.family("catenrich_run_success_timestamp_seconds", "seconds", "when the last run that succeeded ended, in Unix time")
		x.sample(lastSuccess)
	}
	x.family("catenrich_run_duration_seconds", "seconds", "how long the last run took")
	x.sample(fmt.Sprintf("%.3f", time.Since(m.start).Seconds()))
	if m.plan != nil {
		x.family("catenrich_run_config", "", "always 1; the label is the SHA-256 of the job's settings")
		x.sample("1", "config_hash", m.plan.ConfigHash)
		x.family("catenrich_run_input_bytes", "bytes", "size of all inputs")
		x.sample(strconv.FormatInt(m.plan.Size(), 10))
	}
	if m.summary != nil {
		x.summary(m.summary)
	}
	return x.String() + "# EOF\n"
}

func flag01(b bool) string {
	if b {
		return "1"
	}
	return "0"
}

// summary adds the counts of a run.
func (x *exposition) summary(s *pipeline.Summary) {
	number := func(n int64, labels ...string) { x.sample(strconv.FormatInt(n, 10), labels...) }
	x.family("catenrich_run_output_bytes", "bytes", "size of all outputs that stand")
	number(s.Size)
	x.family("catenrich_run_units", "", "input files, by what became of them")
	number(int64(s.Written), "result", "written")
	number(int64(s.UpToDate), "result", "up_to_date")
	number(int64(s.Failed), "result", "failed")
	x.family("catenrich_run_rows", "", "rows of all outputs that stand")
	number(s.Rows)
	x.family("catenrich_run_rejects", "", "records that could not become rows")
	number(s.Rejects)
	x.family("catenrich_run_flagged_rows", "", "rows whose status is not 0")
	number(s.Nulls)
	x.family("catenrich_run_status_rows", "", "rows that have a status bit")
	for i := range status.Count {
		number(s.Bits[i], "bit", strconv.Itoa(1<<i), "reason", status.Describe(i))
	}
}

// An exposition is OpenMetrics text under construction.
type exposition struct {
	strings.Builder
	label string
	name  string
}

// family begins a metric.
func (x *exposition) family(name, unit, help string) {
	x.name = name
	fmt.Fprintf(x, "# TYPE %s gauge\n", name)
	if unit != "" {
		fmt.Fprintf(x, "# UNIT %s %s\n", name, unit)
	}
	fmt.Fprintf(x, "# HELP %s %s\n", name, help)
}

var labelEscapes = strings.NewReplacer(`\`, `\\`, `"`, `\"`, "\n", `\n`)

// sample adds a value of the metric; labels are names and values in turn.
func (x *exposition) sample(value string, labels ...string) {
	labels = append([]string{"job_file", x.label}, labels...)
	var pairs []string
	for i := 0; i < len(labels); i += 2 {
		pairs = append(pairs, labels[i]+`="`+labelEscapes.Replace(labels[i+1])+`"`)
	}
	fmt.Fprintf(x, "%s{%s} %s\n", x.name, strings.Join(pairs, ","), value)
}
