package demo

import (
	"bufio"
	"embed"
	"fmt"
	"io"
	"path/filepath"
	"strconv"
	"strings"

	"catenrich/internal/fault"
)

// DefaultRows and DefaultSeed are what a zero Options stands for.
const (
	DefaultRows = 20000
	DefaultSeed = 20260417
)

// The bounds of Options.Rows: below, not every defect finds a row; above, the
// identifiers run out.
const (
	minRows = 2000
	maxRows = 1e9
)

// Options say how large the survey is and which of all possible ones. The
// zero value is the survey of the documentation.
type Options struct {
	Rows int    // objects, 2000 to 1e9; 0 is DefaultRows
	Seed uint64 // of the random numbers; 0 is DefaultSeed
}

func (o Options) resolve() (Options, error) {
	if o.Rows == 0 {
		o.Rows = DefaultRows
	}
	if o.Seed == 0 {
		o.Seed = DefaultSeed
	}
	if o.Rows < minRows || o.Rows > maxRows {
		return o, fault.Usage.Errorf("a demo survey of %d rows: want %d to %d", o.Rows, minRows, int(maxRows))
	}
	return o, nil
}

// Names of what Write leaves, in its directory.
const (
	Catalogue     = "quill_ridge.csv"
	Truth         = "truth/quill_ridge_truth.csv"
	Job           = "quill_ridge.toml"
	PhotometryJob = "quill_ridge_photometry.toml"
	Readme        = "README.txt"
	KTable        = "templates/k_r.csv"
	SED           = "templates/old_stars.csv"
	Bandpass      = "templates/band_i.csv"
)

//go:embed files
var embedded embed.FS

// Write makes dir if there is none and writes the survey into it: the
// catalogue, its truth, the job files and what they need. It returns the paths
// of all these files. A file that is there already and has other bytes than
// would be written is never replaced: a [fault.CantCreate] error names it, and
// nothing is written.
func Write(dir string, o Options) (files []string, err error) {
	o, err = o.resolve()
	if err != nil {
		return nil, err
	}
	s, err := newSurvey(o)
	if err != nil {
		return nil, err
	}
	b := newBundle(dir)
	defer func() {
		if err != nil {
			b.discard()
		}
	}()
	for _, name := range []string{Readme, Job, PhotometryJob} {
		content, err := embedded.ReadFile("files/" + name)
		if err != nil {
			return nil, fmt.Errorf("the demo's own %s: %w", name, err)
		}
		if err := b.add(name, content); err != nil {
			return nil, err
		}
	}
	for _, side := range []struct {
		name    string
		content []byte
	}{{KTable, kTable()}, {SED, sedFile()}, {Bandpass, bandpassFile()}} {
		if err := b.add(side.name, side.content); err != nil {
			return nil, err
		}
	}
	if err := s.writeObjects(b, o); err != nil {
		return nil, err
	}
	return b.commit()
}

// writeObjects writes the catalogue and the truth side by side, in a memory
// that does not grow with the rows.
func (s *survey) writeObjects(b *bundle, o Options) error {
	catalogue, err := b.create(Catalogue)
	if err != nil {
		return err
	}
	truths, err := b.create(Truth)
	if err != nil {
		return err
	}
	if err := s.write(catalogue, truths, o); err != nil {
		return fault.IO.Errorf("writing the demo survey: %w", err)
	}
	return nil
}

// write writes the whole of both files.
func (s *survey) write(catalogue, truths io.Writer, o Options) error {
	cat, tru := bufio.NewWriterSize(catalogue, 1<<18), bufio.NewWriterSize(truths, 1<<18)
	cat.WriteString(strings.Join(columnNames[:], ",") + "\n")
	tru.Write(s.truthHeader(o))
	var t truth
	var r record
	var line []byte
	for i := range s.slots {
		s.make(i, &t, &r)
		if d := &defects[t.defect]; d.broken() {
			line = r.appendBroken(line[:0], d.name)
		} else {
			line = r.appendTo(line[:0])
		}
		cat.Write(line)
		line = t.appendTo(line[:0])
		if _, err := tru.Write(line); err != nil {
			return err
		}
	}
	if err := cat.Flush(); err != nil { // bufio keeps the first error of all
		return err
	}
	return tru.Flush()
}

// kTable is the K-correction of each template in r, a table (template, z, K).
func kTable() []byte {
	b := []byte("# Invented for the Quill Ridge demo: K-corrections in r of power laws f_nu ~ nu^alpha.\n# template, z, K in mag\n")
	for i := range templates {
		t := &templates[i]
		for z := 0.0; z < highest+1.3; {
			b = append(append(b, t.name...), ',')
			b = append(strconv.AppendFloat(b, z, 'f', -1, 64), ',')
			b = append(strconv.AppendFloat(b, round(t.powerLawK(z), 7), 'f', -1, 64), '\n')
			if z < 1.5 {
				z = round(z+0.005, 3)
			} else {
				z = round(z+0.01, 3)
			}
		}
	}
	return b
}

// sedFile is the spectrum oldStars, sampled.
func sedFile() []byte {
	b := []byte("# Invented for the Quill Ridge demo: a black body of 5200 K and a power law of young stars.\n# wavelength in vacuum in Angstrom, f_lambda in units of about that at 5500 Angstrom\n")
	for lambda := sedLow; lambda <= sedHigh; lambda += sedStep {
		b = appendPoint(b, lambda, significant(oldStars(float64(lambda)), 8))
	}
	return b
}

// bandpassFile is responseI, sampled.
func bandpassFile() []byte {
	b := []byte("# Invented for the Quill Ridge demo: the band i.\n# wavelength in vacuum in Angstrom, photon efficiency\n")
	for lambda := bandLow; lambda <= bandHigh; lambda += bandStep {
		b = appendPoint(b, lambda, round(responseI(float64(lambda)), 7))
	}
	return b
}

func appendPoint(b []byte, lambda int, v float64) []byte {
	b = append(strconv.AppendInt(b, int64(lambda), 10), ',')
	return append(strconv.AppendFloat(b, v, 'g', -1, 64), '\n')
}

// join makes a path in dir of a name with slashes.
func join(dir, name string) string { return filepath.Join(dir, filepath.FromSlash(name)) }
