package main

import (
	"bytes"
	"io"
	"log/slog"
	"strings"

	"catenrich/internal/fault"
)

// What --log-format takes.
const (
	logText = "text"
	logJSON = "json"
)

// checkLogFormat refuses other formats.
func (a *app) checkLogFormat() error {
	if format := a.logFormat; format != logText && format != logJSON {
		a.logFormat = logText
		return fault.Usage.Errorf("--log-format is %q, want %s or %s", format, logText, logJSON)
	}
	return nil
}

// logger writes the log to standard error: as text without the time, since the
// scheduler that keeps the log adds its own, or as JSON, one object a line.
func (a *app) logger(level slog.Level) *slog.Logger {
	if a.logFormat == logJSON {
		return slog.New(slog.NewJSONHandler(a.stderr, &slog.HandlerOptions{Level: level}))
	}
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

// fault prints one line of an error.
func (a *app) fault(line string) {
	if a.logFormat == logJSON {
		a.logger(slog.LevelError).Error(line)
		return
	}
	io.WriteString(a.stderr, "catenrich: "+line+"\n")
}

// messages is standard error for what is written in lines without a logger:
// with --log-format json each line becomes a warning.
func (a *app) messages() io.Writer {
	if a.logFormat == logJSON {
		return &lineLog{log: a.logger(slog.LevelWarn)}
	}
	return a.stderr
}

// A lineLog logs whole lines as warnings.
type lineLog struct {
	log  *slog.Logger
	part []byte // the start of a line whose end has not come
}

// Write implements [io.Writer].
func (l *lineLog) Write(p []byte) (int, error) {
	l.part = append(l.part, p...)
	for {
		line, rest, ok := bytes.Cut(l.part, []byte("\n"))
		if !ok {
			return len(p), nil
		}
		l.log.Warn(strings.TrimPrefix(string(line), "catenrich: "))
		l.part = append([]byte(nil), rest...)
	}
}
