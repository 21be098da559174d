package pipeline

import (
	"os"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
	"catenrich/pipeline/ledger"
)

// upToDate reports whether the output stands, made by the same job of the same
// input; the outcome then says so.
func (r *runner) upToDate(u *Unit, o *Outcome) (bool, error) {
	if u.Input == Standard {
		return false, nil
	}
	state, err := publish.Look(r.options.FS, u.Output)
	if err != nil || !state.Whole {
		return false, err
	}
	m, err := ledger.Parse(state.Manifest)
	if err != nil || m.ConfigHash != r.plan.hash || m.Unit != u.ID {
		return false, nil
	}
	same, err := r.sameFiles(u, m)
	if err != nil || !same {
		return false, err
	}
	o.Result, o.Size = UpToDate, m.Output.Size
	o.count(&m.Tally)
	r.watch.Advance(0, u.Size)
	return true, nil
}

// sameFiles compares input and output with what the manifest says of them: by
// size and quick fingerprint, or all of their bytes; and the output must not
// be older than the input.
func (r *runner) sameFiles(u *Unit, m *ledger.Manifest) (bool, error) {
	in, err := os.Stat(u.Input)
	if err != nil {
		return false, fault.NoInput.Wrap(err)
	}
	out, err := os.Stat(u.Output)
	if err != nil || out.ModTime().Before(in.ModTime()) || in.Size() != m.Input.Size {
		return false, nil
	}
	files := map[string]publish.FileInfo{u.Input: m.Input.FileInfo, u.Output: m.Output.FileInfo}
	for _, s := range m.Sidecars {
		files[u.Output+s.Suffix] = s.FileInfo
	}
	for path, info := range files {
		same, err := r.sameFile(path, info)
		if err != nil || !same {
			return false, err
		}
	}
	return true, nil
}

func (r *runner) sameFile(path string, info publish.FileInfo) (bool, error) {
	if !r.options.FullCheck {
		sum, err := quick(path, info.Size)
		return err == nil && sum == info.Quick, err
	}
	f, err := os.Open(path)
	if err != nil {
		return false, fault.NoInput.Wrap(err)
	}
	defer f.Close()
	sum, err := publish.Full(f, info.Size)
	return err == nil && sum == info.SHA256, fault.IO.Wrap(err)
}

// quick is the quick fingerprint of a file of known size.
func quick(path string, size int64) (publish.Digest, error) {
	f, err := os.Open(path)
	if err != nil {
		return publish.Digest{}, fault.NoInput.Wrap(err)
	}
	defer f.Close()
	sum, err := publish.Quick(f, size)
	return sum, fault.IO.Wrap(err)
}
