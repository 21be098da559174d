// Package ledger keeps the accounts of a run: what went in, what came out, how
// many rows have which status, and statistics that can be added up over any
// number of files. The [Manifest] of an output says all of it.
//
// [Tally] counts rows while they pass; [Sum], [Extent] and [Histogram] are the
// statistics. All are integers, exact sums, or minima and maxima, so that the
// order of counting and merging leaves no trace in the bytes. [Encode] and
// [Parse] write and check a manifest.
package ledger

import (
	"crypto/sha256"
	"encoding/json"
	"errors"
	"fmt"

	"github.com/gowebpki/jcs"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
)

// A Manifest stands beside an output and says what it is and how it came to
// be. It holds no time, host, user, path or build: the same release, job and
// input give the same manifest.
//
// On disk it is one line: the RFC 8785 canonical JSON of this struct, and a
// newline. The member "self" is the SHA-256 of the canonical JSON of the object
// without "self" (no newline). Whole numbers are below 2^53, as JSON demands.
type Manifest struct {
	ConfigHash    publish.Digest  `json:"config_hash"` // SHA-256 of Settings
	Settings      json.RawMessage `json:"settings"`    // resolved, canonical JSON
	OutputVersion int             `json:"output_version"`
	Unit          string          `json:"unit"` // the unit's id
	Input         File            `json:"input"`
	Output        File            `json:"output"`

	// Verbatim describes the start of the output that is the whole input, byte
	// for byte; nil where the format does not copy the input whole.
	Verbatim *Prefix `json:"verbatim,omitempty"`

	Sidecars []publish.Sidecar `json:"sidecars"` // in order of their suffixes
	Tally    Tally             `json:"tally"`

	// Self is the digest "self", set by [Parse].
	Self publish.Digest `json:"-"`
}

// A File is an input or an output. The rows of an input include its rejects.
type File struct {
	publish.FileInfo
	Rows int64 `json:"rows"`
}

// A Prefix is the start of a file.
type Prefix struct {
	Size   int64          `json:"size"`
	SHA256 publish.Digest `json:"sha256"`
}

// signed is a manifest as it is written.
type signed struct {
	*Manifest
	Self publish.Digest `json:"self"`
}

// Check proves that every row is accounted for: rows in = rows out + rejects,
// and each row of the output was counted once, in every column.
func (m *Manifest) Check() error {
	t := &m.Tally
	if m.Input.Rows != m.Output.Rows+t.Rejects || m.Output.Rows != t.Rows {
		return fmt.Errorf("%d rows went in, %d came out, %d were rejected, %d were counted", m.Input.Rows, m.Output.Rows, t.Rejects, t.Rows)
	}
	return t.balanced()
}

// balanced proves that each row was counted once in every column.
func (t *Tally) balanced() error {
	for _, c := range t.Columns {
		if c.Values+c.Nulls != t.Rows {
			return fmt.Errorf("column %q has %d values and %d nulls in %d rows", c.Name, c.Values, c.Nulls, t.Rows)
		}
	}
	return nil
}

// Encode returns the manifest's bytes. One whose rows do not add up is a fault
// of the program, and refused.
func Encode(m *Manifest) ([]byte, error) {
	if err := m.Check(); err != nil {
		return nil, fault.Internal.Wrap(fmt.Errorf("rows are not accounted for: %w", err))
	}
	if m.Sidecars == nil {
		m.Sidecars = []publish.Sidecar{}
	}
	text, err := seal(signed{Manifest: m})
	if err != nil {
		return nil, fault.Internal.Wrap(fmt.Errorf("encoding the manifest of %s: %w", m.Unit, err))
	}
	return text, nil
}

// canonical encodes v by RFC 8785.
func canonical(v any) ([]byte, error) {
	plain, err := json.Marshal(v)
	if err != nil {
		return nil, err
	}
	return jcs.Transform(plain)
}

// Parse reads a manifest and proves it whole: that its bytes have the digest
// that "self" says, and that its rows add up. A fault is of class [fault.Data].
// Members that this version does not know are covered by the digest and
// otherwise ignored.
func Parse(text []byte) (*Manifest, error) {
	m, err := parse(text)
	if err != nil && IsRelease(text) {
		err = errors.New("it describes a whole release, not one output")
	}
	if err != nil {
		return nil, fault.Data.Wrap(fmt.Errorf("the manifest is damaged or not ours: %w", err))
	}
	return m, nil
}

func parse(text []byte) (*Manifest, error) {
	self, line, err := checkSelf(text)
	if err != nil {
		return nil, err
	}
	m := &Manifest{Self: self}
	if err := json.Unmarshal(line, m); err != nil {
		return nil, err
	}
	if err := m.Tally.complete(); err != nil {
		return nil, err
	}
	if got := publish.Digest(sha256.Sum256(m.Settings)); got != m.ConfigHash {
		return nil, fmt.Errorf("the settings have the hash %v, not %v as it says", got, m.ConfigHash)
	}
	return m, m.Check()
}

// Set copies what publication found out about the files.
func (m *Manifest) Set(r publish.Record) {
	m.Output.FileInfo, m.Sidecars = r.Output, r.Sidecars
}
