package pipeline

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"os"
	"strings"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
)

// columnsSuffix names the sidecar that says what the added columns are, for a
// format that has no room for it.
const columnsSuffix = ".columns.csv"

// describes reports whether a file that a pattern matches is such a sidecar: its
// output has a manifest. A catalogue that is only called so stays one.
func describes(path string) bool {
	output, ok := strings.CutSuffix(path, columnsSuffix)
	if !ok {
		return false
	}
	_, err := os.Stat(publish.ManifestPath(output))
	return err == nil
}

// A Description is what travels with an added column.
type Description struct {
	Name        string `json:"name"`
	Unit        string `json:"unit"` // VOUnits 1.1
	UCD         string `json:"ucd"`  // UCD list 1.6
	Description string `json:"description"`
	Source      string `json:"source"`
}

// Describe describes the added columns, in the order of the output.
func (p *Plan) Describe() []Description {
	var all []Description
	for _, f := range p.Kernel.Added() {
		all = append(all, Description{f.Name, f.Unit, f.UCD, f.Description, f.Source})
	}
	return all
}

// describeJSON is the description for the metadata of a file.
func (p *Plan) describeJSON() string {
	text, err := json.Marshal(p.Describe())
	if err != nil {
		panic("pipeline: columns that JSON cannot hold: " + err.Error())
	}
	return string(text)
}

// describeCSV is the description as a table of its own.
func (p *Plan) describeCSV() ([]byte, error) {
	var text bytes.Buffer
	w := csv.NewWriter(&text)
	w.Write([]string{"name", "unit", "ucd", "description", "source"})
	for _, d := range p.Describe() {
		w.Write([]string{d.Name, d.Unit, d.UCD, d.Description, d.Source})
	}
	w.Flush()
	return text.Bytes(), w.Error()
}

// describe writes the sidecar of an output that does not describe its columns
// itself.
func (w *work) describe(release *publish.Release) error {
	if w.unit.out.SelfDescribing {
		return nil
	}
	text, err := w.plan.describeCSV()
	if err != nil {
		return fault.Internal.Wrap(err)
	}
	out, err := release.Create(columnsSuffix)
	if err != nil {
		return err
	}
	_, err = out.Write(text)
	return err
}
