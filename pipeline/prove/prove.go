// Package prove shows that an output is what its manifest says, and how each
// of its values came to be, from the output and its manifest alone.
//
// Start with [New]. [Prover.Verify] (verify.go) goes from the manifest to the
// files (files.go), to the columns and rows (rows.go), and recomputes a sample
// of them (sample.go, judge.go) by the direct path: quadrature instead of the
// cells that made the output. [Prover.Explain] (explain.go) does one row, term
// by term. What recorded settings need to become a job again is in
// workshop.go; [Targets] finds the outputs that a command line means.
package prove

import (
	"runtime"

	"catenrich/internal/publish"
	"catenrich/pipeline"
)

// Options say what is proved and where things are.
type Options struct {
	Rows    int64    // how many rows are recomputed; fewer than that: all
	All     bool     // all rows are
	Input   string   // the input, or the directory that unit ids start from; "": not at hand
	Files   []string // SEDs, bandpasses and K tables, or directories of them
	Workers int      // 0 is one for each processor
}

// DefaultRows is how many rows are recomputed unless one asks for another
// number.
const DefaultRows = 10_000

// A Prover proves outputs. It keeps what jobs need, so that a directory of
// outputs of one job costs one preparation. Its methods must not be called at
// once.
type Prover struct {
	formats pipeline.Formats
	options Options
	files   sideFiles
	shops   map[publish.Digest]*workshop // by config hash
}

// New returns a prover that reads outputs by formats.
func New(formats pipeline.Formats, o Options) *Prover {
	if o.Workers < 1 {
		o.Workers = runtime.NumCPU()
	}
	return &Prover{formats: formats, options: o, files: sideFiles{named: o.Files}, shops: make(map[publish.Digest]*workshop)}
}
