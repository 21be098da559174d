package publish

import (
	"context"
	"crypto/sha256"
	"fmt"
	"io"
	"os"
	"sync"

	"catenrich/internal/fault"
	"catenrich/internal/table"
)

// An Output is one file under construction; it implements [table.Output]. One
// goroutine uses it. After the first error every call returns that error: what
// is in the file then is not worth finishing.
type Output struct {
	ctx   context.Context // ends copying and hashing
	fsys  FS
	file  File
	dir   string
	temp  string // where the bytes are now; "" for a stream
	shown string // what to call the file in messages

	block   *[]byte // bytes not yet written, or nil
	offset  int64   // block included
	digest  *digester
	patched bool
	err     error
}

var _ table.Output = (*Output)(nil)

// Offset returns how many bytes the file has so far.
func (o *Output) Offset() int64 { return o.offset }

// Write appends p, which it does not keep.
func (o *Output) Write(p []byte) (int, error) {
	if o.err != nil {
		return 0, o.err
	}
	written := 0
	for len(p) > 0 {
		if o.block == nil {
			o.block = blocks.Get().(*[]byte)
			*o.block = (*o.block)[:0]
		}
		b := *o.block
		n := copy(b[len(b):cap(b)], p)
		*o.block = b[:len(b)+n]
		p, written, o.offset = p[n:], written+n, o.offset+int64(n)
		if len(b)+n == cap(b) {
			if err := o.flush(); err != nil {
				return written, err
			}
		}
	}
	return written, nil
}

// flush writes the block and hands it to the digester.
func (o *Output) flush() error {
	if b := o.writeBlock(); b != nil {
		o.hash(task{block: b})
	}
	return o.err
}

// writeBlock writes the block, if there is one, and returns it to be hashed.
func (o *Output) writeBlock() *[]byte {
	b := o.block
	if o.err != nil || b == nil {
		return nil
	}
	o.block = nil
	if n, err := o.file.Write(*b); err != nil || n < len(*b) {
		if err == nil {
			err = io.ErrShortWrite
		}
		blocks.Put(b)
		o.fail("writing", err)
		return nil
	}
	return b
}

func (o *Output) hash(t task) {
	if o.digest == nil {
		o.digest = newDigester(o.ctx)
	}
	o.digest.todo <- t
}

// fail remembers the first error, under the name the user knows.
func (o *Output) fail(doing string, err error) error {
	if o.err == nil {
		o.err = fault.IO.Wrap(fmt.Errorf("%s %s: %w", doing, o.shown, plain(err)))
	}
	return o.err
}

// CopyRange appends n bytes of src from off, inside the kernel where it can.
// The digest is made from a second descriptor of src, beside the copying and
// after it: src may be closed, but not changed, before the output is finished.
func (o *Output) CopyRange(src *os.File, off, n int64) error {
	if err := o.flush(); err != nil {
		return err
	}
	if n == 0 {
		return nil
	}
	again, err := duplicate(src)
	if err != nil {
		return o.fail("copying to", err)
	}
	o.hash(task{src: again, off: off, n: n})
	for done := int64(0); done < n; {
		m, err := int64(0), o.ctx.Err()
		if err == nil {
			m, err = o.file.CopyRange(src, off+done, n-done)
		}
		if err == nil && m == 0 {
			err = io.ErrUnexpectedEOF
		}
		o.offset, done = o.offset+m, done+m
		if err != nil {
			return o.fail("copying "+src.Name()+" to", err)
		}
	}
	return nil
}

// Patch overwrites bytes that were written before. The digest is then made by
// reading the whole file again.
func (o *Output) Patch(off int64, p []byte) error {
	if off < 0 || off+int64(len(p)) > o.offset {
		panic(fmt.Sprintf("publish: a patch of %d bytes at %d in a file of %d", len(p), off, o.offset))
	}
	if err := o.flush(); err != nil {
		return err
	}
	o.patched = true
	if n, err := o.file.WriteAt(p, off); err != nil || n < len(p) {
		if err == nil {
			err = io.ErrShortWrite
		}
		return o.fail("writing", err)
	}
	return nil
}

// Mark returns a function that waits for, and returns, the SHA-256 of what has
// been written until now. Writing goes on meanwhile: after a large CopyRange
// this hides the time that hashing takes. If hashing fails the digest is zero,
// and the publication of the file will fail with the reason.
func (o *Output) Mark() func() [sha256.Size]byte {
	if o.flush() != nil {
		return func() (none [sha256.Size]byte) { return }
	}
	if o.patched {
		sum, err := Full(Until(o.ctx, o.file), o.offset)
		if err != nil {
			o.fail("reading", err)
		}
		return func() [sha256.Size]byte { return sum }
	}
	answer := make(chan mark, 1)
	o.hash(task{mark: answer})
	return sync.OnceValue(func() [sha256.Size]byte {
		m := <-answer
		if m.err != nil {
			return [sha256.Size]byte{}
		}
		return m.sum
	})
}

// Sum returns the SHA-256 of what has been written so far.
func (o *Output) Sum() [sha256.Size]byte { return o.Mark()() }

// Scratch returns an unlinked temporary file beside the output.
func (o *Output) Scratch() (*os.File, error) {
	f, err := o.fsys.Scratch(o.dir)
	if err != nil {
		return nil, fault.IO.Wrap(fmt.Errorf("making a scratch file beside %s: %w", o.shown, plain(err)))
	}
	return f, nil
}

// finish writes what is left, makes the bytes durable, closes the file and
// says what is in it. The digester works through its queue while the disk does
// the same.
func (o *Output) finish() (FileInfo, error) {
	var info FileInfo
	if last := o.writeBlock(); last != nil && o.digest != nil {
		o.hash(task{block: last})
	} else if last != nil {
		info.SHA256 = sha256.Sum256(*last) // one block: not worth a goroutine
		blocks.Put(last)
	} else if o.digest == nil {
		info.SHA256 = sha256.Sum256(nil)
	}
	if o.err == nil {
		if err := o.file.Sync(); err != nil {
			o.fail("writing", err)
		}
	}
	if o.digest != nil {
		sum, err := o.digest.finish()
		o.digest = nil
		if err != nil {
			o.fail("reading back what was copied to", err)
		}
		info.SHA256 = sum
	}
	return o.describe(info)
}

// describe reads back what the digester could not know, and closes the file.
func (o *Output) describe(info FileInfo) (FileInfo, error) {
	info.Size = o.offset
	var err error
	if o.err == nil && o.patched {
		if info.SHA256, err = Full(Until(o.ctx, o.file), o.offset); err != nil {
			o.fail("reading back", err)
		}
	}
	if o.err == nil {
		if info.Quick, err = Quick(o.file, o.offset); err != nil {
			o.fail("reading back", err)
		}
	}
	if err := o.close(); err != nil {
		o.fail("closing", err)
	}
	return info, o.err
}

// close lets go of the file, the buffer and the goroutine; a second call does
// nothing.
func (o *Output) close() error {
	if o.digest != nil {
		o.digest.finish()
		o.digest = nil
	}
	if o.block != nil {
		blocks.Put(o.block)
		o.block = nil
	}
	if o.file == nil {
		return nil
	}
	err := o.file.Close()
	o.file = nil
	return err
}
