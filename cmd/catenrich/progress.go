package main

import (
	"fmt"
	"io"
	"log/slog"
	"os"
	"strings"
	"sync"
	"time"

	"github.com/schollz/progressbar/v3"
	"golang.org/x/term"

	"catenrich/pipeline"
)

// progressEvery is how often a run that has no terminal says how far it is.
const progressEvery = 5 * time.Second

// progress shows how a run goes: a bar on a terminal, a log line every few
// seconds elsewhere, nothing when quiet.
type progress struct {
	log   *slog.Logger
	bar   *progressbar.ProgressBar // nil where there is no terminal
	start time.Time

	mu          sync.Mutex
	rows, bytes int64
	total       int64 // bytes of all inputs
	last        time.Time
	quiet       bool
}

// newProgress is for inputs of total bytes; 0 is unknown.
func (a *app) newProgress(total int64, quiet bool, log *slog.Logger) *progress {
	p := &progress{log: log, start: time.Now(), last: time.Now(), total: total, quiet: quiet}
	if !quiet && a.logFormat != logJSON && drawable(a.stderr) {
		p.bar = newBar(a.stderr, total)
	}
	return p
}

// drawable reports whether a bar can be drawn: on a terminal that can move its
// cursor, and whose user has not asked for plain output (no-color.org). Colour
// itself is never used.
func drawable(w io.Writer) bool {
	f, ok := w.(*os.File)
	return ok && term.IsTerminal(int(f.Fd())) && os.Getenv("TERM") != "dumb" && os.Getenv("NO_COLOR") == ""
}

func newBar(w io.Writer, total int64) *progressbar.ProgressBar {
	if total == 0 {
		total = -1 // a spinner
	}
	return progressbar.NewOptions64(total,
		progressbar.OptionSetWriter(w), progressbar.OptionShowBytes(true), progressbar.OptionSetWidth(30),
		progressbar.OptionThrottle(100*time.Millisecond), progressbar.OptionClearOnFinish(), progressbar.OptionSetDescription("enriching"))
}

// Advance implements pipeline.Observer.
func (p *progress) Advance(rows, bytes int64) {
	p.mu.Lock()
	defer p.mu.Unlock()
	p.rows += rows
	p.bytes += bytes
	switch {
	case p.bar != nil:
		p.bar.Add64(bytes)
	case !p.quiet && time.Since(p.last) >= progressEvery:
		p.last = time.Now()
		attrs := []any{"rows", p.rows, "rows_per_second", int64(float64(p.rows) / time.Since(p.start).Seconds())}
		if p.total > 0 {
			attrs = append(attrs, "percent", min(100, p.bytes*100/p.total))
		}
		p.log.Info("progress", attrs...)
	}
}

// Done implements pipeline.Observer.
func (p *progress) Done(o *pipeline.Outcome) {
	p.mu.Lock()
	defer p.mu.Unlock()
	p.clear()
	if o.Result == pipeline.Failed {
		return // the run returns the error, and it is printed once
	}
	if !p.quiet {
		p.log.Info(o.Result.String(), "input", o.Unit.Input, "output", o.Unit.Output, "rows", o.Rows, "rejects", o.Rejects, "bytes", o.Size)
	}
	for _, c := range o.Cells {
		p.log.Warn(c.Error())
	}
	if o.Result == pipeline.Written && o.Rows == 0 && o.Rejects == 0 {
		p.log.Warn(fmt.Sprintf("%s has no rows, only a header", o.Unit.Name()))
	}
	if o.First != nil && o.Unit.Output != pipeline.Standard {
		p.log.Warn(fmt.Sprintf("%s:%d: %s; %s written to %s.rejects.csv", o.Unit.Name(), o.First.Line, o.First.Reason, plural(o.Rejects, "record"), o.Unit.Output))
	}
}

// Warn implements pipeline.Observer.
func (p *progress) Warn(message string) {
	p.mu.Lock()
	defer p.mu.Unlock()
	p.clear()
	p.log.Warn(message)
}

// clear takes the bar off the line before something else is printed there.
func (p *progress) clear() {
	if p.bar != nil {
		p.bar.Clear()
	}
}

// finish takes the bar away for good.
func (p *progress) finish() {
	p.mu.Lock()
	defer p.mu.Unlock()
	if p.bar != nil {
		p.bar.Finish()
	}
}

// plural is "1 record" or "3 records".
func plural[N int | int64](n N, word string) string {
	if n == 1 {
		return "1 " + word
	}
	return fmt.Sprintf("%d %ss", n, word)
}

// bytesText is a size for people.
func bytesText(n int64) string {
	const step = 1000
	if n < step {
		return plural(n, "byte")
	}
	size, units := float64(n)/step, "kMGTP"
	i := 0
	for size >= step && i < len(units)-1 {
		size /= step
		i++
	}
	return strings.TrimSuffix(fmt.Sprintf("%.1f", size), ".0") + " " + units[i:i+1] + "B"
}
