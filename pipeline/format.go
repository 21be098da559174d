package pipeline

import (
	"fmt"
	"io"
	"path/filepath"
	"strings"

	"catenrich/internal/table"
	"catenrich/pipeline/job"
)

// A Format is a file format as cmd offers it: how a reader of it is opened,
// and which writers append to what that reader reads. The pipeline names no
// format itself.
type Format struct {
	Name     string
	Suffixes []string // with their dots, in lower case

	// SelfDescribing says that a file of the format says of each column what
	// it is: unit, UCD, description, source. Otherwise a sidecar does.
	SelfDescribing bool

	// Open opens a file, and Stream a pipe; a nil Stream means that the
	// format cannot be read from standard input.
	Open   func(path string, in *job.InputSettings) (table.Source, error)
	Stream func(name string, r io.ReadCloser, in *job.InputSettings) (table.Source, error)

	// Sinks make the writer for an output path, by the name of its format.
	Sinks map[string]func(src table.Source, path string, spec table.Spec) (table.Sink, error)
}

// Formats is the table of formats, in the order in which suffixes are tried.
type Formats []Format

// Find returns the format called name, or with a suffix of path where name is
// empty.
func (f Formats) Find(name, path string) (*Format, error) {
	lower := strings.ToLower(path)
	var known []string
	for i := range f {
		if name == f[i].Name {
			return &f[i], nil
		}
		for _, suffix := range f[i].Suffixes {
			if name == "" && strings.HasSuffix(lower, suffix) {
				return &f[i], nil
			}
			known = append(known, suffix)
		}
	}
	return nil, fmt.Errorf("%s: the suffix %q does not tell its format (known: %s); set input.format or --format",
		path, filepath.Ext(path), strings.Join(known, " "))
}
