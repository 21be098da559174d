package publish

import (
	"context"
	"errors"
	"io"
	"io/fs"
	"os"
)

// A Stream is an [Output] that goes to a pipe or a terminal at once: nothing is
// published, and nothing can be taken back. Patch fails on it; scratch files
// are made where the system keeps temporaries.
type Stream struct{ Output }

// NewStream returns an output that writes to w; name is for messages.
func NewStream(w io.Writer, name string) *Stream {
	return &Stream{Output{ctx: context.Background(), fsys: OS, file: pipe{w}, dir: os.TempDir(), shown: name}}
}

// Finish writes what is left and returns size and SHA-256 of all; the quick
// fingerprint stays zero. It does not close w.
func (s *Stream) Finish() (FileInfo, error) {
	sum := s.Sum()
	info := FileInfo{Size: s.offset, SHA256: sum}
	if s.digest != nil {
		if _, err := s.digest.finish(); err != nil {
			s.fail("reading back what was copied to", err)
		}
		s.digest = nil
	}
	s.close()
	return info, s.err
}

// pipe is a File that can only be written.
type pipe struct{ io.Writer }

var errPipe = errors.New("a stream cannot be read or written twice")

func (pipe) ReadAt([]byte, int64) (int, error)  { return 0, errPipe }
func (pipe) WriteAt([]byte, int64) (int, error) { return 0, errPipe }
func (pipe) Sync() error                        { return nil }
func (pipe) Close() error                       { return nil }
func (pipe) Stat() (fs.FileInfo, error)         { return nil, errPipe }

func (p pipe) CopyRange(src *os.File, off, n int64) (int64, error) {
	return io.Copy(p.Writer, io.NewSectionReader(src, off, n))
}
