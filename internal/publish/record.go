package publish

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"fmt"
	"io"
	"slices"
	"strconv"
)

// A Digest is a SHA-256; in JSON it is 64 lower-case hexadecimal digits.
type Digest [sha256.Size]byte

// String returns the digest as sha256sum(1) prints it.
func (d Digest) String() string { return hex.EncodeToString(d[:]) }

// MarshalText implements [encoding.TextMarshaler].
func (d Digest) MarshalText() ([]byte, error) { return hex.AppendEncode(nil, d[:]), nil }

// UnmarshalText implements [encoding.TextUnmarshaler]. Upper-case digits are
// refused, so that a digest has one spelling.
func (d *Digest) UnmarshalText(text []byte) error {
	if len(text) != 2*len(d) {
		return fmt.Errorf("a digest of %d characters, want %d", len(text), 2*len(d))
	}
	for _, c := range text {
		if c >= 'A' && c <= 'F' {
			return fmt.Errorf("a digest with the upper-case digit %q", c)
		}
	}
	_, err := hex.Decode(d[:], text)
	return err
}

// A FileInfo is what a manifest says of one file.
type FileInfo struct {
	Size   int64  `json:"size"`
	SHA256 Digest `json:"sha256"`
	Quick  Digest `json:"quick"` // see [Quick]
}

// A Sidecar is a [FileInfo] of a file beside the output.
type Sidecar struct {
	Suffix string `json:"suffix"` // one of [Suffixes]
	FileInfo
}

// A Record is the part of a manifest that publication needs: what the output
// and its sidecars are. pipeline/ledger embeds it in the whole manifest.
type Record struct {
	Output   FileInfo  `json:"output"`
	Sidecars []Sidecar `json:"sidecars"` // in order of their suffixes
}

// sidecar finds the entry of a suffix.
func (r *Record) sidecar(suffix string) (FileInfo, bool) {
	for _, s := range r.Sidecars {
		if s.Suffix == suffix {
			return s.FileInfo, true
		}
	}
	return FileInfo{}, false
}

// equal compares two records. The sidecars of both are in order.
func (r *Record) equal(other Record) bool {
	return r.Output == other.Output && slices.Equal(r.Sidecars, other.Sidecars)
}

// parseRecord reads the part of a manifest that publication needs. A suffix is
// joined to paths, so only those that [Suffixes] lists are believed.
func parseRecord(manifest []byte) (*Record, error) {
	r := new(Record)
	if err := json.Unmarshal(manifest, r); err != nil {
		return nil, err
	}
	if r.Output.SHA256 == (Digest{}) || r.Output.Quick == (Digest{}) || r.Output.Size < 0 {
		return nil, fmt.Errorf("no size and digests of an output")
	}
	for _, s := range r.Sidecars {
		if !slices.Contains(Suffixes, s.Suffix) {
			return nil, fmt.Errorf("a sidecar with the unknown suffix %q", s.Suffix)
		}
	}
	return r, nil
}

// quickSpan is how much of either end of a file its quick fingerprint covers.
const quickSpan = 64 << 10

// Quick returns the quick fingerprint of a file of size bytes: the SHA-256 of
// its size in decimal and a newline, then its first 64 KiB, then its last
// 64 KiB; a smaller file counts whole, twice. In a shell:
//
//	(stat -c %s F; head -c 65536 F; tail -c 65536 F) | sha256sum
//
// It finds a file that was replaced, cut or appended to without reading the
// whole of it. It does not prove that the middle is untouched.
func Quick(f io.ReaderAt, size int64) (Digest, error) {
	h := sha256.New()
	h.Write(append(strconv.AppendInt(nil, size, 10), '\n'))
	span := min(size, quickSpan)
	for _, off := range []int64{0, size - span} {
		if err := hashRange(h, f, off, span); err != nil {
			return Digest{}, err
		}
	}
	return Digest(h.Sum(nil)), nil
}

// Until returns f, whose reading fails with the error of ctx once that ends.
func Until(ctx context.Context, f io.ReaderAt) io.ReaderAt { return readUntil{ctx, f} }

type readUntil struct {
	ctx context.Context
	f   io.ReaderAt
}

func (r readUntil) ReadAt(p []byte, off int64) (int, error) {
	if err := r.ctx.Err(); err != nil {
		return 0, err
	}
	return r.f.ReadAt(p, off)
}

// Full returns the SHA-256 of the first size bytes of f, read from the start.
func Full(f io.ReaderAt, size int64) (Digest, error) {
	h := sha256.New()
	if err := hashRange(h, f, 0, size); err != nil {
		return Digest{}, err
	}
	return Digest(h.Sum(nil)), nil
}
