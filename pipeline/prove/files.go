package prove

import (
	"bytes"
	"context"
	"crypto/sha256"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"time"

	"catenrich/internal/fault"
	"catenrich/internal/publish"
	"catenrich/pipeline/ledger"
)

// checkSidecars compares every sidecar that an output can have with the
// manifest: those it lists, and that there are no others.
func checkSidecars(r *Report, m *ledger.Manifest) error {
	for _, suffix := range publish.Suffixes {
		at := slices.IndexFunc(m.Sidecars, func(s publish.Sidecar) bool { return s.Suffix == suffix })
		_, err := os.Lstat(r.Output + suffix)
		switch there := err == nil; {
		case err != nil && !errors.Is(err, fs.ErrNotExist):
			return fault.IO.Wrap(err)
		case at < 0 && there:
			r.note("sidecar", Failed, "%s is there, and the manifest does not list it", r.Output+suffix)
		case at < 0:
		case !there:
			r.note("sidecar", Failed, "%s is missing", r.Output+suffix)
		default:
			_, err := digest(context.Background(), r.Output+suffix, m.Sidecars[at].FileInfo, 0)
			if err != nil && fault.Of(err) != fault.Data {
				return err
			}
			r.judge("sidecar", err, "%s has the recorded digest", r.Output+suffix)
		}
	}
	return nil
}

// checkOutput digests the output, and the input that stands at its start. there
// is false if there is no such file.
func (p *Prover) checkOutput(ctx context.Context, r *Report, m *ledger.Manifest) (there bool, err error) {
	if info, err := os.Stat(r.Output); err != nil || !info.Mode().IsRegular() {
		r.note("output", Failed, "there is no such file")
		return false, nil
	}
	prefix := int64(0)
	if m.Verbatim != nil {
		prefix = m.Verbatim.Size
	}
	start := time.Now()
	head, err := digest(ctx, r.Output, m.Output.FileInfo, prefix)
	if err != nil && fault.Of(err) != fault.Data {
		return true, err
	}
	r.Digested = m.Output.Size
	r.Rate = float64(m.Output.Size) / time.Since(start).Seconds() / 1e9
	r.judge("output", err, "SHA-256 as recorded, over %d bytes at %.2f GB/s", m.Output.Size, r.Rate)
	if m.Verbatim == nil {
		return true, nil
	}
	switch {
	case m.Verbatim.Size != m.Input.Size || m.Verbatim.SHA256 != m.Input.SHA256:
		r.note("verbatim input", Failed, "the manifest gives the input another size or digest than the part that copies it")
	case head == (publish.Digest{}):
		r.note("verbatim input", Skipped, "the output has another size")
	case head != m.Verbatim.SHA256:
		r.note("verbatim input", Failed, "the first %d bytes have the digest %v, not %v as the input had", prefix, head, m.Verbatim.SHA256)
	default:
		r.note("verbatim input", Passed, "the first %d bytes are the input, by its digest", prefix)
	}
	return true, nil
}

// digest reads a file once and compares it with what a manifest says of it. It
// returns the digest of the first prefix bytes. What differs is a fault.Data.
func digest(ctx context.Context, path string, want publish.FileInfo, prefix int64) (head publish.Digest, err error) {
	f, err := os.Open(path)
	if err != nil {
		return head, fault.NoInput.Wrap(err)
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return head, fault.IO.Wrap(err)
	}
	if info.Size() != want.Size {
		return head, fault.Data.Errorf("%s has %d bytes, not %d as recorded", path, info.Size(), want.Size)
	}
	h := sha256.New()
	in := &interruptible{ctx, f}
	for _, n := range []int64{min(prefix, want.Size), want.Size - min(prefix, want.Size)} {
		if _, err := io.CopyN(h, in, n); err != nil {
			return head, fault.IO.Errorf("reading %s: %w", path, err)
		}
		if head == (publish.Digest{}) {
			head = publish.Digest(h.Sum(nil))
		}
	}
	if sum := publish.Digest(h.Sum(nil)); sum != want.SHA256 {
		return head, fault.Data.Errorf("%s has the digest %v, not %v as recorded", path, sum, want.SHA256)
	}
	quick, err := publish.Quick(f, want.Size)
	if err == nil && quick != want.Quick {
		err = fault.Data.Errorf("%s has the quick fingerprint %v, not %v as recorded", path, quick, want.Quick)
	}
	return head, fault.IO.Wrap(err)
}

// An interruptible reader ends with its context.
type interruptible struct {
	ctx context.Context
	r   io.Reader
}

func (i *interruptible) Read(p []byte) (int, error) {
	if err := i.ctx.Err(); err != nil {
		return 0, err
	}
	return i.r.Read(p)
}

// checkInput compares the input, where one knows where it is, with what the
// manifest says of it, and with the start of the output byte by byte.
func (p *Prover) checkInput(r *Report, m *ledger.Manifest) error {
	path := p.options.Input
	if path == "" {
		r.note("input", Skipped, "--input does not say where %s is", m.Unit)
		return nil
	}
	info, err := os.Stat(path)
	if err == nil && info.IsDir() {
		path = filepath.Join(path, filepath.FromSlash(m.Unit))
		_, err = os.Stat(path)
	}
	if err != nil {
		return fault.NoInput.Errorf("--input: %w", err)
	}
	want := publish.FileInfo{Size: m.Input.Size, SHA256: m.Input.SHA256, Quick: m.Input.Quick}
	if _, err = digest(context.Background(), path, want, 0); err == nil && m.Verbatim != nil {
		err = sameStart(path, r.Output, m.Verbatim.Size)
	}
	if err != nil && fault.Of(err) != fault.Data {
		return err
	}
	how := "it has the recorded digest"
	if m.Verbatim != nil {
		how = "the output begins with it, compared byte by byte"
	}
	r.judge("input", err, "%s: %s", path, how)
	return nil
}

// sameStart compares the first n bytes of two files.
func sameStart(a, b string, n int64) error {
	f, err := os.Open(a)
	if err != nil {
		return fault.NoInput.Wrap(err)
	}
	defer f.Close()
	g, err := os.Open(b)
	if err != nil {
		return fault.NoInput.Wrap(err)
	}
	defer g.Close()
	p, q := make([]byte, 256<<10), make([]byte, 256<<10)
	for at := int64(0); at < n; at += int64(len(p)) {
		p, q = p[:min(n-at, int64(cap(p)))], q[:min(n-at, int64(cap(q)))]
		_, errP := io.ReadFull(f, p)
		_, errQ := io.ReadFull(g, q)
		if err := errors.Join(errP, errQ); err != nil {
			return fault.IO.Wrap(fmt.Errorf("comparing %s and %s: %w", a, b, err))
		}
		if !bytes.Equal(p, q) {
			i := 0
			for p[i] == q[i] {
				i++
			}
			return fault.Data.Errorf("%s and %s differ at byte %d", a, b, at+int64(i)+1)
		}
	}
	return nil
}
