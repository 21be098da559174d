package pipeline

import (
	"context"
	"fmt"
	"os"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
	"catenrich/pipeline/job"
	"catenrich/pipeline/ledger"
)

// upToDate reports whether the output stands, made by the same job of the same
// input; the outcome then says so.
func (r *runner) upToDate(ctx context.Context, u *Unit, o *Outcome) (bool, error) {
	if u.Input == Standard {
		return false, nil
	}
	m, why, _, err := r.standing(ctx, u)
	if err != nil || why != "" {
		return false, err
	}
	o.Result, o.Size = UpToDate, m.Output.Size
	o.count(&m.Tally)
	r.watch.Advance(0, u.Size)
	return true, nil
}

// standing gives the manifest of a unit whose output stands, made by the same
// job of the same input; else it says why that is not so. pending means that a
// publication was begun and is not finished.
func (r *runner) standing(ctx context.Context, u *Unit) (m *ledger.Manifest, why string, pending bool, err error) {
	state, err := publish.Look(r.options.FS, u.Output)
	if err != nil {
		return nil, "", false, err
	}
	if why = r.standingManifest(u, &state, &m); why == "" {
		why, err = r.sameFiles(ctx, u, m)
	}
	return m, why, state.Pending, err
}

// standingManifest says what is wrong with what stands at a unit's output, as
// far as its manifest tells.
func (r *runner) standingManifest(u *Unit, s *publish.State, m **ledger.Manifest) string {
	if s.Manifest == nil {
		switch {
		case s.Pending:
			return "its publication was interrupted"
		case s.Exists:
			return "has no manifest, and may not be ours (run would want --replace)"
		}
		return "is missing"
	}
	parsed, err := ledger.Parse(s.Manifest)
	switch {
	case err != nil:
		return "its manifest is damaged or not ours"
	case parsed.ConfigHash != r.plan.hash:
		return fmt.Sprintf("was made by another job, of config hash %.12s…", parsed.ConfigHash.String())
	case parsed.OutputVersion != job.OutputVersion:
		return fmt.Sprintf("was made by another version of the outputs, %d", parsed.OutputVersion)
	case parsed.Unit != u.ID:
		return fmt.Sprintf("was made of another unit, %s", parsed.Unit)
	case s.Pending:
		return "its publication was interrupted"
	case !s.Exists:
		return "is missing, though its manifest is there"
	case !s.Whole:
		return "is not what its manifest describes, or a sidecar is not"
	}
	*m = parsed
	return ""
}

// sameFiles compares input, output and sidecars with what the manifest says of
// them: by size and quick fingerprint, or all of their bytes; and the output
// must not be older than the input. It says what differs.
func (r *runner) sameFiles(ctx context.Context, u *Unit, m *ledger.Manifest) (why string, err error) {
	in, err := os.Stat(u.Input)
	if err != nil {
		return "", fault.NoInput.Wrap(err)
	}
	out, err := r.options.FS.Lstat(u.Output)
	switch {
	case err != nil:
		return "is missing", nil
	case in.Size() != m.Input.Size:
		return "its input has changed", nil
	case out.ModTime().Before(in.ModTime()):
		return "is older than its input", nil
	}
	type pair struct {
		fsys publish.FS
		path string
		info publish.FileInfo
		why  string
	}
	files := []pair{{publish.OS, u.Input, m.Input.FileInfo, "its input has changed"}}
	if r.options.FullCheck { // of these a quick look was had already
		files = append(files, pair{r.options.FS, u.Output, m.Output.FileInfo, "is not what its manifest describes"})
		for _, s := range m.Sidecars {
			files = append(files, pair{r.options.FS, u.Output + s.Suffix, s.FileInfo, "has a sidecar that its manifest does not describe"})
		}
	}
	for _, f := range files {
		same, err := r.sameFile(ctx, f.fsys, f.path, f.info)
		if err != nil {
			return "", err
		}
		if !same {
			return f.why, nil
		}
	}
	return "", nil
}

func (r *runner) sameFile(ctx context.Context, fsys publish.FS, path string, info publish.FileInfo) (bool, error) {
	f, err := fsys.Open(path)
	if err != nil {
		return false, fault.NoInput.Wrap(err)
	}
	defer f.Close()
	if !r.options.FullCheck {
		sum, err := publish.Quick(f, info.Size)
		return err == nil && sum == info.Quick, fault.IO.Wrap(err)
	}
	sum, err := publish.Full(publish.Until(ctx, f), info.Size)
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
