package writertest

import (
	"crypto/sha256"
	"errors"
	"io"
	"os"
	"testing"
)

// ErrInjected is the failure of an [Output] that was told to fail.
var ErrInjected = errors.New("injected failure")

// An Output is a [table.Output] in memory. Its operation number FailAt, from
// 1, fails with [ErrInjected]; 0 is never.
type Output struct {
	Bytes  []byte
	FailAt int
	Calls  int
	t      testing.TB
}

// NewOutput returns an empty output.
func NewOutput(t testing.TB) *Output { return &Output{t: t} }

func (o *Output) fails() bool {
	o.Calls++
	return o.Calls == o.FailAt
}

func (o *Output) Write(p []byte) (int, error) {
	if o.fails() {
		return 0, ErrInjected
	}
	o.Bytes = append(o.Bytes, p...)
	return len(p), nil
}

// Offset implements table.Output.
func (o *Output) Offset() int64 { return int64(len(o.Bytes)) }

// CopyRange implements table.Output.
func (o *Output) CopyRange(src *os.File, off, n int64) error {
	if o.fails() {
		return ErrInjected
	}
	p := make([]byte, n)
	if _, err := io.ReadFull(io.NewSectionReader(src, off, n), p); err != nil {
		return err
	}
	o.Bytes = append(o.Bytes, p...)
	return nil
}

// Patch implements table.Output.
func (o *Output) Patch(off int64, p []byte) error {
	if o.fails() {
		return ErrInjected
	}
	if off < 0 || off+int64(len(p)) > o.Offset() {
		return errors.New("writertest: a patch beyond what was written")
	}
	copy(o.Bytes[off:], p)
	return nil
}

// Sum implements table.Output.
func (o *Output) Sum() [32]byte { return sha256.Sum256(o.Bytes) }

// Scratch implements table.Output.
func (o *Output) Scratch() (*os.File, error) {
	if o.fails() {
		return nil, ErrInjected
	}
	f, err := os.CreateTemp(o.t.TempDir(), "scratch")
	if err != nil {
		return nil, err
	}
	o.t.Cleanup(func() { f.Close() })
	return f, os.Remove(f.Name())
}
