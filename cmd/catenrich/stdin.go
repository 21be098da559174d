package main

import (
	"errors"
	"io"
	"sync"
)

// An interruptible is an input whose Close ends a Read that waits. The
// operating system promises no such thing for a pipe or a terminal, and an
// idle one would hold a run that was told to stop.
type interruptible struct {
	src   io.ReadCloser
	start sync.Once // nothing is read before somebody asks
	pipe  *io.PipeReader
	feed  *io.PipeWriter
}

func newInterruptible(src io.ReadCloser) *interruptible {
	r, w := io.Pipe()
	return &interruptible{src: src, pipe: r, feed: w}
}

// Read implements [io.Reader].
func (i *interruptible) Read(p []byte) (int, error) {
	i.start.Do(func() {
		go func() {
			// Without its other methods: they would choose a smaller buffer.
			_, err := io.CopyBuffer(i.feed, struct{ io.Reader }{i.src}, make([]byte, 256<<10))
			i.feed.CloseWithError(err)
		}()
	})
	return i.pipe.Read(p)
}

// Close implements [io.Closer]. A read of the source that waits is left to the
// end of the process.
func (i *interruptible) Close() error {
	return errors.Join(i.pipe.Close(), i.src.Close())
}
