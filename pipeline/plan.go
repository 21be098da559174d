package pipeline

import (
	"crypto/sha256"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"sort"
	"strings"

	"github.com/bmatcuk/doublestar/v4"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
	"catenrich/internal/table"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/job"
)

// Standard is the path that stands for standard input or standard output.
const Standard = "-"

// A Unit is one input file and the output it becomes.
type Unit struct {
	ID     string // path below the fixed part of its pattern, with slashes
	Input  string
	Output string
	Size   int64 // of the input in bytes; 0 for standard input

	in, out *Format
}

// Name is what messages call the unit's input.
func (u *Unit) Name() string {
	if u.Input == Standard {
		return "standard input"
	}
	return u.Input
}

// A Plan is what a run would do.
type Plan struct {
	Job        *job.Job
	Units      []Unit // sorted by ID
	Kernel     *columns.Kernel
	ConfigHash string // hex
	Settings   []byte // canonical JSON; ConfigHash is its SHA-256
	Warnings   []string

	hash    publish.Digest
	partial bool // a share of the job's units
	here    string
	literal map[string]bool // patterns that were taken as the name of a file
}

// Size is how many bytes of input the plan knows of.
func (p *Plan) Size() int64 {
	total := int64(0)
	for i := range p.Units {
		total += p.Units[i].Size
	}
	return total
}

// NewPlan finds the inputs of a job and decides where each output goes.
// Nothing is opened and nothing written.
func NewPlan(j *job.Job, formats Formats) (*Plan, error) {
	p := &Plan{Job: j, literal: make(map[string]bool)}
	p.here, _ = os.Getwd() // a failure shows where a relative path is used
	if err := p.findUnits(formats); err != nil {
		return nil, err
	}
	if len(p.Units) == 1 && p.Units[0].out != p.Units[0].in {
		j.Settings.Output.Format = p.Units[0].out.Name // the output's suffix decided it, and it decides bytes
	}
	var err error
	if p.Settings, err = j.Settings.Canonical(); err != nil {
		return nil, err
	}
	p.hash = sha256.Sum256(p.Settings)
	p.ConfigHash = p.hash.String()
	if err := p.checkPaths(); err != nil {
		return nil, fault.Config.Wrap(err)
	}
	p.Kernel = columns.New(j)
	p.Warnings = p.Kernel.Warnings()
	p.warn()
	return p, nil
}

// findUnits expands the patterns.
func (p *Plan) findUnits(formats Formats) error {
	seen := make(map[string]bool)
	for _, pattern := range p.Job.Patterns {
		found, err := p.expand(pattern)
		if err != nil {
			return fault.NoInput.Errorf("%w (%s)", err, p.Job.Place("input.files"))
		}
		for _, u := range found {
			if seen[u.Input] {
				continue // named by two patterns
			}
			seen[u.Input] = true
			if u.in, err = formats.Find(p.Job.Settings.Input.Format, inputName(u.Input)); err != nil {
				return fault.Config.Wrap(err)
			}
			if u.out, err = p.outputFormat(formats, &u); err != nil {
				return fault.Config.Wrap(err)
			}
			p.Units = append(p.Units, u)
		}
	}
	sort.Slice(p.Units, func(a, b int) bool { return p.Units[a].ID < p.Units[b].ID })
	if p.Job.File != "" && len(p.Units) > 1 {
		return fault.Config.Errorf("%s is one file, but there are %d inputs: give a directory instead", p.Job.Place("output.file"), len(p.Units))
	}
	for i := range p.Units {
		p.Units[i].Output = p.outputPath(&p.Units[i])
	}
	return nil
}

// inputName is the name whose suffix tells the format; standard input is CSV
// unless the job says otherwise.
func inputName(path string) string {
	if path == Standard {
		return "standard-input.csv"
	}
	return path
}

// expand lists the files that match one pattern.
func (p *Plan) expand(pattern string) ([]Unit, error) {
	if pattern == Standard {
		return []Unit{{ID: "standard-input", Input: Standard}}, nil
	}
	if !filepath.IsAbs(pattern) {
		pattern = filepath.Join(p.Job.Base, pattern)
	}
	if info, err := os.Stat(pattern); err == nil {
		if info.IsDir() {
			return nil, fmt.Errorf("%s is a directory: name the files in it, as %s", pattern, filepath.Join(pattern, "*.csv"))
		}
		if !info.Mode().IsRegular() { // opening a pipe that nobody writes to would wait for ever
			return nil, fmt.Errorf("%s is no regular file: give a stream through standard input, as -", pattern)
		}
		p.literal[pattern] = true
		return []Unit{{ID: filepath.Base(pattern), Input: pattern, Size: info.Size()}}, nil
	}
	fixed, rest := doublestar.SplitPattern(filepath.ToSlash(pattern))
	matches, err := doublestar.Glob(os.DirFS(fixed), rest, doublestar.WithFilesOnly(), doublestar.WithFailOnIOErrors())
	if err != nil {
		return nil, fmt.Errorf("%s: %w", pattern, bare(err))
	}
	units := make([]Unit, len(matches)) // those without an id are none
	err = together(len(matches), func(i int) error {
		id := matches[i]
		path := filepath.Join(fixed, filepath.FromSlash(id))
		info, err := os.Stat(path)
		if err != nil {
			return fmt.Errorf("%s: %w", path, bare(err))
		}
		if !p.sidecar(id) && !describes(path) && info.Mode().IsRegular() {
			units[i] = Unit{ID: id, Input: path, Size: info.Size()}
		}
		return nil
	})
	if err != nil {
		return nil, err
	}
	units = slices.DeleteFunc(units, func(u Unit) bool { return u.ID == "" })
	if len(units) == 0 {
		return nil, fmt.Errorf("%s: no such file, or nothing matches", pattern)
	}
	return units, nil
}

// sidecar reports whether a path names a file that only catenrich writes, so
// that "*.csv" does not take the rejects of an earlier run for a catalogue.
func (p *Plan) sidecar(path string) bool {
	return strings.HasSuffix(path, rejectsSuffix) || strings.HasSuffix(path, publish.ManifestPath("")) || isReport(path) || strings.Contains(filepath.ToSlash(path), ".catenrich/")
}

// bare strips the operation and path that fs adds to errors, since the message
// names the path itself.
func bare(err error) error {
	if in := new(fs.PathError); errors.As(err, &in) {
		return in.Err
	}
	return err
}

// outputFormat decides how a unit is written: as the job says, or as its
// output's or input's own suffix does.
func (p *Plan) outputFormat(formats Formats, u *Unit) (*Format, error) {
	name := p.Job.Settings.Output.Format
	if name == "" && p.Job.File != "" && p.Job.File != Standard {
		return formats.Find("", p.Job.File)
	}
	if name == "" {
		name = u.in.Name
	}
	return formats.Find(name, "")
}

// outputPath is where a unit's output goes.
func (p *Plan) outputPath(u *Unit) string {
	switch file := p.Job.File; {
	case file == Standard:
		return Standard
	case file != "" && filepath.IsAbs(file):
		return filepath.Clean(file)
	case file != "":
		return filepath.Join(p.Job.Base, file)
	}
	id := filepath.FromSlash(u.ID)
	if u.out != u.in {
		id = strings.TrimSuffix(id, filepath.Ext(id)) + u.out.Suffixes[0]
	}
	if filepath.IsAbs(p.Job.Directory) {
		return filepath.Join(p.Job.Directory, id)
	}
	return filepath.Join(p.Job.Base, p.Job.Directory, id)
}

// checkPaths refuses jobs whose outputs would overwrite one another or an
// input, or that would take their own outputs for inputs.
func (p *Plan) checkPaths() error {
	outputs := make(map[string]*Unit)
	release := p.ReleasePath()
	for i := range p.Units {
		u := &p.Units[i]
		if (u.Input == Standard || u.Output == Standard) && len(p.Units) > 1 {
			return fmt.Errorf("standard input and output (-) go with a single unit, and there are %d", len(p.Units))
		}
		if strings.EqualFold(publish.ManifestPath(u.Output), release) {
			return fmt.Errorf("%s would be written to %s, whose manifest would have the place of the release manifest: rename it", u.Input, u.Output)
		}
		key := strings.ToLower(p.absolute(u.Output))
		if other, ok := outputs[key]; ok && u.Output != Standard {
			return fmt.Errorf("%s and %s would both be written to %s (compared without case): put them below different directories", other.Input, u.Input, u.Output)
		}
		outputs[key] = u
	}
	for i := range p.Units {
		u := &p.Units[i]
		if u.Input == Standard {
			continue
		}
		if other, ok := outputs[strings.ToLower(p.absolute(u.Input))]; ok {
			return fmt.Errorf("%s is an input, and the output of %s: set %s to another place", u.Input, other.Input, p.Job.Place("output.directory"))
		}
	}
	return errors.Join(p.checkBeside(outputs), p.checkPatterns(), p.checkSameFiles())
}

// checkBeside refuses an output whose name another one's manifest or sidecar
// would have.
func (p *Plan) checkBeside(outputs map[string]*Unit) error {
	for i := range p.Units {
		u := &p.Units[i]
		for _, path := range append([]string{publish.ManifestPath(u.Output), publish.PendingPath(u.Output)}, publish.Sidecars(u.Output)...) {
			if other, ok := outputs[strings.ToLower(p.absolute(path))]; ok {
				return fmt.Errorf("%s would be written to %s, which belongs to the output of %s: rename it, or put it below another directory", other.Input, other.Output, u.Input)
			}
		}
	}
	return nil
}

// checkPatterns refuses a pattern that would match the job's own outputs: the
// next run would enrich what this one made.
func (p *Plan) checkPatterns() error {
	for i, pattern := range p.Job.Patterns {
		if pattern == Standard {
			continue
		}
		if !filepath.IsAbs(pattern) {
			pattern = filepath.Join(p.Job.Base, pattern)
		}
		if p.literal[pattern] {
			continue // it can match only itself, which is no output
		}
		pattern = p.absolute(pattern)
		for k := range p.Units {
			u := &p.Units[k]
			if match, _ := doublestar.PathMatch(pattern, p.absolute(u.Output)); match && u.Output != Standard {
				return fmt.Errorf("the pattern %q (%s) matches the job's own output %s: narrow it, or set %s to another place",
					p.Job.Patterns[i], p.Job.Place("input.files"), u.Output, p.Job.Place("output.directory"))
			}
		}
	}
	return nil
}

// checkSameFiles finds an output that is an input by another name.
func (p *Plan) checkSameFiles() error {
	return together(len(p.Units), func(i int) error {
		u := &p.Units[i]
		out, err := os.Stat(u.Output)
		if u.Output == Standard || err != nil {
			return nil
		}
		in, err := os.Stat(u.Input)
		if err == nil && os.SameFile(in, out) {
			return fmt.Errorf("%s and %s are the same file: an input is never overwritten", u.Input, u.Output)
		}
		return nil
	})
}

// absolute is the path from the root, or the path itself where the working
// directory is gone. The directory is asked for once a plan, not once a path.
func (p *Plan) absolute(path string) string {
	if filepath.IsAbs(path) || p.here == "" {
		return filepath.Clean(path)
	}
	return filepath.Join(p.here, path)
}

// warn collects what the user should know before a run.
func (p *Plan) warn() {
	for i, m := range p.Job.Models {
		if z, ok := m.TurnAround(); ok {
			p.Warnings = append(p.Warnings, fmt.Sprintf("%s: this universe turns around at 1+z = %.6g: it has no event horizon, and contact_lost_age is null",
				p.Job.Place(fmt.Sprintf("cosmology[%d]", i)), 1+z))
		}
	}
}

// spec tells a sink about the columns it appends.
func (p *Plan) spec() table.Spec {
	out := &p.Job.Settings.Output
	return table.Spec{
		Added: p.Kernel.Added(), Digits: out.Digits, Narrow: out.Float == 32, Encoding: out.Encoding, Codec: out.Codec, Level: out.Level,
		Metadata: []table.KeyValue{
			{Key: "catenrich.config_hash", Value: p.ConfigHash},
			{Key: "catenrich.settings", Value: string(p.Settings)},
			{Key: "catenrich.columns", Value: p.describeJSON()},
		},
	}
}
