package prove

import (
	"crypto/sha256"
	"encoding/hex"
	"io/fs"
	"os"
	"path/filepath"

	"catenrich/internal/publish"
	"catenrich/pipeline/columns"
	"catenrich/pipeline/job"
	"catenrich/pipeline/ledger"
)

// A workshop is a job made again from recorded settings, and its kernel on the
// direct path.
type workshop struct {
	hash   publish.Digest
	job    *job.Job
	kernel *columns.Kernel
	lost   []job.LostFile
}

// workshop returns that of a manifest's settings, made when they first come.
func (p *Prover) workshop(output string, m *ledger.Manifest) (*workshop, error) {
	if w := p.shops[m.ConfigHash]; w != nil && len(w.lost) == 0 {
		return w, nil
	}
	w := &workshop{hash: m.ConfigHash}
	err := guard(func() (err error) {
		find := func(sum string) []byte { return p.files.find(filepath.Dir(output), sum) }
		if w.job, w.lost, err = job.FromSettings(m.Settings, find, columns.Catalog{}); err == nil {
			w.kernel = columns.NewDirect(w.job)
		}
		return err
	})
	if err != nil {
		return nil, err
	}
	p.shops[m.ConfigHash] = w
	return w, nil
}

// sideFiles finds SEDs, bandpasses and K tables by their SHA-256: among the
// files and directories that were named, and beside an output.
type sideFiles struct {
	named []string
	known map[string]string // path by digest
	seen  map[string]bool   // places that were looked at
}

// maxSideFile is the largest file that may be one.
const maxSideFile = 64 << 20

// find returns the text of the file with a digest, or nil.
func (s *sideFiles) find(dir, sum string) []byte {
	if s.known == nil {
		s.known, s.seen = make(map[string]string), make(map[string]bool)
	}
	for _, place := range append([]string{dir}, s.named...) {
		if s.known[sum] != "" {
			break
		}
		s.look(place, place != dir)
	}
	text, err := os.ReadFile(s.known[sum])
	if got := sha256.Sum256(text); err != nil || hex.EncodeToString(got[:]) != sum {
		return nil
	}
	return text
}

// look digests the files of a place; of a directory below it, too, if deep.
func (s *sideFiles) look(place string, deep bool) {
	if s.seen[place] {
		return
	}
	s.seen[place] = true
	filepath.WalkDir(place, func(path string, d fs.DirEntry, err error) error {
		switch {
		case err != nil:
			return nil // what cannot be read is not found
		case d.IsDir() && path != place && (!deep || d.Name() == publish.LockDir):
			return filepath.SkipDir
		case !d.Type().IsRegular():
			return nil
		}
		if info, err := d.Info(); err != nil || info.Size() > maxSideFile {
			return nil
		}
		if text, err := os.ReadFile(path); err == nil {
			sum := sha256.Sum256(text)
			s.known[hex.EncodeToString(sum[:])] = path
		}
		return nil
	})
}
