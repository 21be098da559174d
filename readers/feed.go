package readers

import (
	"context"
	"crypto/sha256"
	"errors"
	"io"
	"sync"
	"sync/atomic"
)

// A feed reads an input ahead of its user, and digests what it reads, each in
// a goroutine of its own. It bounds itself by the blocks that are under way.
//
// Its Read is for one goroutine, and gives up when its context ends or the
// feed is closed, even if the input has nothing to say and never will.
type feed struct {
	src   io.ReadCloser
	ctx   context.Context // of the Read under way
	ready chan feedBlock  // read, in order; closed after the last
	free  chan []byte
	quit  chan struct{} // closed by Close
	gone  chan struct{} // closed when the reading goroutine has left
	left  []byte        // of the current block
	taken int64         // bytes that Read has given
	block *sharedBlock
	err   error // what ended the input: io.EOF or the error of reading

	digested chan struct{} // closed when size and sum are right
	size     int64
	sum      [sha256.Size]byte
	complete bool // the digest has seen io.EOF
	closed   atomic.Bool
}

// A sharedBlock is free again when both the user and the digest are through.
type sharedBlock struct {
	bytes []byte // the whole of it
	users atomic.Int32
}

type feedBlock struct {
	*sharedBlock
	n   int
	err error
}

// Blocks of a quarter of a mebibyte stay in the cache of a core between the
// reader, the digest and the copy; eight of them bridge a slow moment.
const (
	feedBlockSize = 256 << 10
	feedBlocks    = 8
)

// feedMemory keeps blocks from one input to the next: inputs may be many and
// small.
var feedMemory = sync.Pool{New: func() any {
	p := make([]byte, feedBlockSize)
	return &p
}}

func newFeed(src io.ReadCloser) *feed {
	f := &feed{
		src:      src,
		ctx:      context.Background(),
		ready:    make(chan feedBlock, feedBlocks),
		free:     make(chan []byte, feedBlocks),
		quit:     make(chan struct{}),
		gone:     make(chan struct{}),
		digested: make(chan struct{}),
	}
	for range feedBlocks {
		f.free <- nil // made when first needed
	}
	toDigest := make(chan feedBlock, feedBlocks)
	go f.read(toDigest)
	go f.digest(toDigest)
	return f
}

// read fills blocks until the input ends or the feed is closed.
func (f *feed) read(toDigest chan<- feedBlock) {
	defer close(f.gone)
	defer close(f.ready)
	defer close(toDigest)
	for {
		var p []byte
		select {
		case p = <-f.free:
		case <-f.quit:
			return
		}
		if p == nil {
			p = *feedMemory.Get().(*[]byte)
		}
		n, err := f.src.Read(p)
		b := feedBlock{&sharedBlock{bytes: p}, n, err}
		b.users.Store(2)
		toDigest <- b // never full: there are no more blocks than it has room for
		f.ready <- b
		if err != nil {
			return
		}
	}
}

// digest adds block after block to the digest of the input.
func (f *feed) digest(blocks <-chan feedBlock) {
	h := sha256.New()
	for b := range blocks {
		h.Write(b.bytes[:b.n])
		f.size += int64(b.n)
		f.complete = b.err == io.EOF
		f.done(b.sharedBlock)
	}
	h.Sum(f.sum[:0])
	close(f.digested)
}

func (f *feed) done(b *sharedBlock) {
	if b.users.Add(-1) == 0 {
		f.free <- b.bytes
	}
}

// errClosed is what Read returns after Close.
var errClosed = errors.New("the input is closed")

func (f *feed) Read(p []byte) (int, error) {
	for len(f.left) == 0 {
		if f.block != nil {
			f.done(f.block)
			f.block = nil
		}
		if f.err != nil {
			return 0, f.err
		}
		select {
		case b, ok := <-f.ready:
			if !ok {
				return 0, errClosed
			}
			f.block, f.left, f.err = b.sharedBlock, b.bytes[:b.n], b.err
		case <-f.ctx.Done():
			return 0, f.ctx.Err()
		case <-f.quit:
			return 0, errClosed
		}
	}
	n := copy(p, f.left)
	f.left = f.left[n:]
	f.taken += int64(n)
	return n, nil
}

// failure returns the error of reading the input itself, if there was one.
func (f *feed) failure() error {
	if f.err == io.EOF {
		return nil
	}
	return f.err
}

// Digest waits for the digest of an input that was read to its end.
func (f *feed) Digest() (size int64, sum [sha256.Size]byte, ok bool) {
	if f.err != io.EOF {
		return 0, sum, false
	}
	<-f.digested
	return f.size, f.sum, f.complete
}

// Close ends both goroutines and closes the input. It waits for them only if
// told so: the operating system may hold a read of an idle pipe for ever.
func (f *feed) Close(wait bool) error {
	if f.closed.Swap(true) {
		return nil
	}
	close(f.quit)
	err := f.src.Close()
	if !wait {
		return err
	}
	<-f.gone
	<-f.digested
	for {
		select {
		case p := <-f.free:
			if p != nil {
				feedMemory.Put(&p)
			}
		default:
			return err
		}
	}
}
