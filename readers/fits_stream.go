package readers

import (
	"context"
	"errors"
	"fmt"
	"io"

	"github.com/klauspost/compress/gzip"

	"catenrich/internal/fault"
	"catenrich/internal/fitshead"
)

// A fitsStream is one pass over the uncompressed bytes of a file.
type fitsStream struct {
	r      io.Reader
	feed   *feed // nil for a pass that is not digested
	at     int64 // of the next byte
	raw    int64 // bytes taken off the file itself
	err    error // of reading or decompressing, other than the end of the file
	buffer []byte
}

// rawReader counts what the decompressor takes off the file.
type rawReader struct {
	io.Reader
	taken *int64
}

func (r rawReader) Read(p []byte) (int, error) {
	n, err := r.Reader.Read(p)
	*r.taken += int64(n)
	return n, err
}

// newStream begins a pass; fed, if it is not nil, reads ahead and digests.
func (f *FITS) newStream(fed *feed) (*fitsStream, error) {
	s := &fitsStream{feed: fed}
	if fed != nil {
		s.r = rawReader{fed, &s.raw}
	} else {
		s.r = io.NewSectionReader(f.file, 0, f.opened.size)
	}
	if f.packed {
		z, err := gzip.NewReader(s.r)
		if err != nil {
			s.err = err
			return s, f.readError(s, err)
		}
		s.r = z
	}
	return s, nil
}

func (s *fitsStream) Read(p []byte) (int, error) {
	n, err := s.r.Read(p)
	s.at += int64(n)
	if err != nil && err != io.EOF {
		s.err = err
	}
	return n, err
}

// copy hands the next n bytes to w.
func (s *fitsStream) copy(w io.Writer, n int64) error {
	if s.buffer == nil {
		s.buffer = make([]byte, feedBlockSize)
	}
	for n > 0 {
		p := s.buffer[:min(n, int64(len(s.buffer)))]
		if _, err := io.ReadFull(s, p); err != nil {
			return err
		}
		if _, err := w.Write(p); err != nil {
			return err
		}
		n -= int64(len(p))
	}
	return nil
}

// drain reads to the end of the file, whose last bytes the decompressor may
// not have needed.
func (s *fitsStream) drain() error {
	if _, err := io.Copy(io.Discard, s); err != nil {
		return err
	}
	_, err := io.Copy(io.Discard, s.feed)
	return err
}

// A fitsTarget marks the errors of a writer, which are not the file's fault.
type fitsTarget struct{ io.Writer }

type targetError struct{ error }

func (e targetError) Unwrap() error { return e.error }

func (t fitsTarget) Write(p []byte) (int, error) {
	n, err := t.Writer.Write(p)
	if err != nil {
		err = targetError{err}
	}
	return n, err
}

// readError says what failed, and whose fault it is.
func (f *FITS) readError(s *fitsStream, err error) error {
	if own := (targetError{}); errors.As(err, &own) {
		return own.error
	}
	if s.err == nil {
		return f.cutShort()
	}
	if s.feed != nil {
		if ctx := s.feed.ctx.Err(); ctx != nil {
			return ctx
		}
		if raw := s.feed.failure(); raw != nil {
			return fault.IO.Errorf("reading %s: %w", f.path, raw)
		}
	}
	if errors.Is(err, errClosed) {
		return fault.IO.Errorf("reading %s: %w", f.path, err)
	}
	return f.damaged(err)
}

// cutShort says that the file ends within the data of the table.
func (f *FITS) cutShort() error {
	return f.hduError(f.hdu, errors.New("the data of the table are cut short: the file ends before they do"))
}

// start begins the pass that is digested, or gives it another context.
func (f *FITS) start(ctx context.Context) error {
	if f.stream == nil {
		if _, err := f.file.Seek(0, io.SeekStart); err != nil {
			return fault.IO.Errorf("reading %s: %w", f.path, err)
		}
		fed := newFeed(f.file)
		fed.ctx = ctx
		var err error
		if f.stream, err = f.newStream(fed); err != nil {
			return err
		}
	}
	f.stream.feed.ctx = ctx
	return nil
}

// copyTo copies everything up to an offset, if that is still ahead.
func (f *FITS) copyTo(w io.Writer, offset int64) error {
	if err := f.stream.copy(w, offset-f.stream.at); err != nil {
		return f.readError(f.stream, err)
	}
	return nil
}

// CopyBefore writes the header-data units before the table to w. It goes
// before the first Next.
func (f *FITS) CopyBefore(w io.Writer) error {
	if err := f.start(context.Background()); err != nil {
		return err
	}
	return f.copyTo(fitsTarget{w}, f.at)
}

// CopyHeap writes what follows the last row in the table's data unit to w: gap
// and heap, without what fills the last block. It goes after the last Next.
func (f *FITS) CopyHeap(w io.Writer) error {
	if err := f.start(context.Background()); err != nil {
		return err
	}
	return f.copyTo(fitsTarget{w}, f.rowOffset(f.table.Rows)+f.table.PCount())
}

// CopyAfter writes the header-data units behind the table to w, and whatever
// else the file ends with. It goes after CopyHeap.
func (f *FITS) CopyAfter(w io.Writer) error {
	s, target := f.stream, fitsTarget{w}
	padding := fitshead.Padded(s.at) - s.at
	if err := s.copy(io.Discard, padding); err != nil {
		if s.err != nil {
			return f.readError(s, err)
		}
		f.warnings = append(f.warnings, "the last block of the table is not filled up; that of the output is")
		return nil
	}
	for n := f.hdu + 1; ; n++ {
		if done, err := f.copyUnit(target, n); done || err != nil {
			return err
		}
	}
}

// copyUnit copies one header-data unit. Where none begins, it copies all that
// is left, and is done.
func (f *FITS) copyUnit(w io.Writer, n int) (done bool, err error) {
	s := f.stream
	h, err := fitshead.Read(io.TeeReader(s, w))
	if err == io.EOF {
		return true, nil
	}
	if target := (targetError{}); s.err != nil || errors.As(err, &target) {
		return false, f.readError(s, err)
	}
	if err != nil || !h.Begins("XTENSION") {
		if _, err := io.CopyBuffer(w, s, s.buffer); err != nil {
			return false, f.readError(s, err)
		}
		return true, nil
	}
	size, err := h.DataSize()
	if err != nil {
		return false, f.hduError(n, err)
	}
	from := s.at
	err = s.copy(w, fitshead.Padded(size))
	if target := (targetError{}); err != nil && s.err == nil && !errors.As(err, &target) && s.at < from+size {
		return false, f.hduError(n, fmt.Errorf("its %d bytes of data are cut short: the file ends %d bytes before they do", size, from+size-s.at))
	} else if err != nil {
		return false, f.readError(s, err)
	}
	return false, nil
}
