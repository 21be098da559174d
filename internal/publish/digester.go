package publish

import (
	"context"
	"crypto/sha256"
	"hash"
	"io"
	"os"
	"sync"
)

// blockSize is the unit of writing, and of handing bytes to the digester: big
// enough that calls into the kernel do not matter, small enough that a block
// written a moment ago is hashed from the cache.
const blockSize = 256 << 10

// blocks holds buffers between uses. A block has one owner at a time: the
// output fills it and writes it, then gives it to the digester, which hashes
// it and puts it back. What callers of Write hand in is copied on arrival.
var blocks = sync.Pool{New: func() any { b := make([]byte, 0, blockSize); return &b }}

// A digester hashes one output in its own goroutine, in the order in which
// tasks arrive. Its queue is short, so it holds at most queueLength blocks.
type digester struct {
	ctx  context.Context // ends the reading of ranges
	todo chan task
	done chan struct{}

	// Set by the goroutine; read after done is closed, or after a mark.
	sum Digest
	err error
}

const queueLength = 8

// A task is one of three things: a block that was written, a range of a file
// that was copied, or a question for the digest so far.
type task struct {
	block  *[]byte
	src    *os.File // closed when it has been read
	off, n int64
	mark   chan<- mark
}

type mark struct {
	sum Digest
	err error
}

func newDigester(ctx context.Context) *digester {
	d := &digester{ctx: ctx, todo: make(chan task, queueLength), done: make(chan struct{})}
	go d.run()
	return d
}

func (d *digester) run() {
	defer close(d.done)
	h := sha256.New()
	for t := range d.todo {
		switch {
		case t.block != nil:
			h.Write(*t.block)
			blocks.Put(t.block)
		case t.src != nil:
			if d.err == nil {
				d.err = hashRange(h, Until(d.ctx, t.src), t.off, t.n)
			}
			t.src.Close()
		case t.mark != nil:
			t.mark <- mark{Digest(h.Sum(nil)), d.err}
		}
	}
	d.sum = Digest(h.Sum(nil))
}

// hashRange adds n bytes of f from off to h.
func hashRange(h hash.Hash, f io.ReaderAt, off, n int64) error {
	block := blocks.Get().(*[]byte)
	defer blocks.Put(block)
	buf := (*block)[:cap(*block)]
	for n > 0 {
		p := buf[:min(n, int64(len(buf)))]
		m, err := f.ReadAt(p, off)
		h.Write(p[:m])
		if off, n = off+int64(m), n-int64(m); m == len(p) {
			continue
		}
		if err == io.EOF {
			err = io.ErrUnexpectedEOF
		}
		return err
	}
	return nil
}

// finish waits for the last task and returns the digest of all.
func (d *digester) finish() (Digest, error) {
	close(d.todo)
	<-d.done
	return d.sum, d.err
}
