package publish

import (
	"os"
	"sync/atomic"
)

// A writeBack has the disk begin with what a file was given so far, while the
// rest is still computed. Without it the kernel waits, for half a minute or
// until memory runs short, and the sync at the end writes everything while
// nobody computes.
//
// It promises nothing: the sync at the end makes the file durable, and reports
// what went wrong before it.
type writeBack struct {
	file *os.File
	todo chan span     // nil until the first
	done chan struct{} // closed when the goroutine has left

	stopped atomic.Bool

	written int64 // bytes of the file so far
	handed  int64 // of them, those that the disk was told of
}

type span struct{ off, n int64 }

// writeBackStep is how many bytes are worth telling the disk of: small files
// are left to their sync.
const writeBackStep = 16 << 20

// wrote counts n more bytes at the end of the file. It never waits: while the
// disk is busy with one span, the next one grows.
func (w *writeBack) wrote(n int64) {
	if w == nil {
		return
	}
	w.written += n
	if w.written-w.handed < writeBackStep {
		return
	}
	if w.todo == nil {
		w.todo, w.done = make(chan span, 1), make(chan struct{})
		go w.run()
	}
	select {
	case w.todo <- span{w.handed, w.written - w.handed}:
		w.handed = w.written
	default:
	}
}

func (w *writeBack) run() {
	defer close(w.done)
	for s := range w.todo {
		// Step by step: a disk with a long queue holds the call, and a run that
		// is told to stop should not wait for it.
		for end := s.off + s.n; s.off < end && !w.stopped.Load(); s.off += writeBackStep {
			beginWriting(w.file, s.off, min(writeBackStep, end-s.off))
		}
	}
}

// stop ends the goroutine. It comes before the file is closed.
func (w *writeBack) stop() {
	if w == nil || w.todo == nil {
		return
	}
	w.stopped.Store(true)
	close(w.todo)
	<-w.done
	w.todo = nil
}
