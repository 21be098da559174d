package ledger

import (
	"crypto/sha256"
	"encoding/json"
	"fmt"
	"hash"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
)

// ReleaseName is the file, in the directory of a job's outputs, that describes
// them all.
const ReleaseName = "release.manifest.json"

// A Release is the manifest of all outputs of a job together. Like a
// [Manifest] it holds no time, host or path, and is written as one line of
// RFC 8785 canonical JSON with its own digest as "self": however the units were
// shared out among machines, the bytes are the same.
type Release struct {
	ConfigHash    publish.Digest  `json:"config_hash"` // SHA-256 of Settings
	Settings      json.RawMessage `json:"settings"`
	OutputVersion int             `json:"output_version"`
	Units         Units           `json:"units"`
	Input         Total           `json:"input"`
	Output        Total           `json:"output"`
	Sidecars      Total           `json:"sidecars"` // Rows are the rejects
	Tally         Tally           `json:"tally"`    // of all units
}

// Units stands for the manifests of a release. SHA256 is over one line for
// each, in order of their unit's id: the manifest's "self", two spaces, the id,
// a newline. In a shell:
//
//	find DIR -name '*.manifest.json' ! -path DIR/release.manifest.json \
//	  -exec jq -r '"\(.self)  \(.unit)"' {} + | LC_ALL=C sort -k2 | sha256sum
type Units struct {
	Count  int64          `json:"count"`
	SHA256 publish.Digest `json:"sha256"`
}

// A Total adds up files.
type Total struct {
	Files int64 `json:"files"`
	Size  int64 `json:"size"`
	Rows  int64 `json:"rows"`
}

func (t *Total) add(size, rows int64) {
	t.Files++
	t.Size += size
	t.Rows += rows
}

// Merge adds what o counted.
func (t *Total) Merge(o Total) {
	t.Files += o.Files
	t.Size += o.Size
	t.Rows += o.Rows
}

// Count adds a unit's files to the totals. Its tally and its line in
// Units.SHA256 are added elsewhere: the one in any order, the other in that of
// the ids.
func (r *Release) Count(m *Manifest) {
	r.Input.add(m.Input.Size, m.Input.Rows)
	r.Output.add(m.Output.Size, m.Output.Rows)
	for _, s := range m.Sidecars {
		r.Sidecars.add(s.Size, 0)
	}
	r.Sidecars.Rows += m.Tally.Rejects
}

// A UnitsDigest makes [Units], given the units in order of their ids.
type UnitsDigest struct {
	hash hash.Hash
	n    int64
}

// Add adds a unit by its id and its manifest's own digest.
func (d *UnitsDigest) Add(unit string, self publish.Digest) {
	if d.hash == nil {
		d.hash = sha256.New()
	}
	d.n++
	fmt.Fprintf(d.hash, "%v  %s\n", self, unit)
}

// Units is the digest of what was added.
func (d *UnitsDigest) Units() Units {
	if d.hash == nil {
		d.hash = sha256.New()
	}
	return Units{d.n, publish.Digest(d.hash.Sum(nil))}
}

// Check proves that every row of every unit is accounted for.
func (r *Release) Check() error {
	t := &r.Tally
	if r.Input.Files != r.Units.Count || r.Output.Files != r.Units.Count {
		return fmt.Errorf("%d units, but %d inputs and %d outputs", r.Units.Count, r.Input.Files, r.Output.Files)
	}
	if r.Input.Rows != r.Output.Rows+t.Rejects || r.Output.Rows != t.Rows || r.Sidecars.Rows != t.Rejects {
		return fmt.Errorf("%d rows went in, %d came out, %d were rejected, %d were counted", r.Input.Rows, r.Output.Rows, t.Rejects, t.Rows)
	}
	return t.balanced()
}

// EncodeRelease returns the bytes of a release manifest.
func EncodeRelease(r *Release) ([]byte, error) {
	if err := r.Check(); err != nil {
		return nil, fault.Internal.Wrap(fmt.Errorf("rows of the release are not accounted for: %w", err))
	}
	text, err := seal(struct {
		*Release
		Self publish.Digest `json:"self"`
	}{Release: r})
	if err != nil {
		return nil, fault.Internal.Wrap(fmt.Errorf("encoding the release manifest: %w", err))
	}
	return text, nil
}

// ParseRelease reads a release manifest and proves it whole, as [Parse] does
// the manifest of an output.
func ParseRelease(text []byte) (*Release, error) {
	r, err := parseRelease(text)
	if err != nil {
		return nil, fault.Data.Wrap(fmt.Errorf("the release manifest is damaged or not ours: %w", err))
	}
	return r, nil
}

func parseRelease(text []byte) (*Release, error) {
	_, line, err := checkSelf(text)
	if err != nil {
		return nil, err
	}
	r := new(Release)
	if err := json.Unmarshal(line, r); err != nil {
		return nil, err
	}
	if r.Units.Count == 0 {
		return nil, fmt.Errorf("it names no units")
	}
	if err := r.Tally.complete(); err != nil {
		return nil, err
	}
	if got := publish.Digest(sha256.Sum256(r.Settings)); got != r.ConfigHash {
		return nil, fmt.Errorf("the settings have the hash %v, not %v as it says", got, r.ConfigHash)
	}
	return r, r.Check()
}

// IsRelease reports whether text is a whole release manifest.
func IsRelease(text []byte) bool {
	_, err := ParseRelease(text)
	return err == nil
}
