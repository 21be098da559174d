package pipeline

import (
	"context"
	"errors"
	"fmt"
	"io"
	"strings"
	"sync/atomic"
	"testing"
	"testing/synctest"
	"time"

	"catenrich/internal/fault"
	"catenrich/internal/table"
)

// numbered is a source of n chunks, which then ends with err.
type numbered struct {
	table.Source
	n, next int64
	err     error
	before  func(seq int64)
}

func (s *numbered) Next(ctx context.Context) (*table.Chunk, error) {
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	if s.next == s.n {
		return nil, s.err
	}
	if s.before != nil {
		s.before(s.next)
	}
	c := &table.Chunk{Seq: s.next}
	s.next++
	return c, nil
}

// uneven takes longer for some chunks than for others, so that they end in
// another order than they began.
func uneven(seq int64) { time.Sleep(time.Duration(1+seq*7919%13) * time.Millisecond) }

// inBubble runs a test where time is free and where a goroutine that is left
// behind ends it.
func inBubble(t *testing.T, name string, f func(t *testing.T)) {
	t.Run(name, func(t *testing.T) { synctest.Test(t, f) })
}

func TestStreamKeepsOrder(t *testing.T) {
	for _, workers := range []int{1, 2, 7, 64} {
		for _, depth := range []int{1, 2, 16} {
			inBubble(t, fmt.Sprintf("workers %d depth %d", workers, depth), func(t *testing.T) {
				var read, busy, busiest, collected, most atomic.Int64
				src := &numbered{n: 200, err: io.EOF, before: func(int64) {
					most.Store(max(most.Load(), read.Add(1)-collected.Load()))
				}}
				var inUse [64]atomic.Bool
				work := func(worker int, r *result) error {
					if inUse[worker].Swap(true) {
						t.Errorf("worker %d has two chunks at once", worker)
					}
					busiest.Store(max(busiest.Load(), busy.Add(1)))
					uneven(r.chunk.Seq)
					busy.Add(-1)
					inUse[worker].Store(false)
					r.piece.Meta = r.chunk.Seq
					return nil
				}
				err := stream(t.Context(), src, workers, depth, work, func(r *result) error {
					if want := collected.Load(); r.chunk.Seq != want || r.piece.Meta != want {
						t.Errorf("chunk %d came when %d was due", r.chunk.Seq, want)
					}
					collected.Add(1)
					return nil
				})
				if err != nil || collected.Load() != 200 {
					t.Errorf("%d of 200 chunks, error %v", collected.Load(), err)
				}
				if busiest.Load() > int64(workers) {
					t.Errorf("%d chunks worked on at once", busiest.Load())
				}
				if most.Load() > int64(depth)+1 { // and the one that is being read
					t.Errorf("%d chunks in flight", most.Load())
				}
				if want := int64(min(workers, depth)); workers > 1 && depth > 1 && busiest.Load() < min(want, 2) {
					t.Errorf("never more than %d chunks worked on at once", busiest.Load())
				}
			})
		}
	}
}

// TestStreamFails: whoever fails, everything before is collected in order, the
// error is the first in input order, and nobody is left behind.
func TestStreamFails(t *testing.T) {
	errSource, errWork, errLater, errSink := errors.New("source"), errors.New("work"), errors.New("work, later"), errors.New("sink")
	for _, workers := range []int{1, 3, 16} {
		fails := func(name string, src *numbered, work func(int64) error, sink func(int64) error, want error, collected int64) {
			inBubble(t, fmt.Sprintf("%s with %d workers", name, workers), func(t *testing.T) {
				got := int64(0)
				err := stream(t.Context(), src, workers, 2*workers, func(_ int, r *result) error {
					uneven(r.chunk.Seq)
					return work(r.chunk.Seq)
				}, func(r *result) error {
					if err := sink(r.chunk.Seq); err != nil {
						return err
					}
					got++
					return nil
				})
				if !errors.Is(err, want) || got != collected {
					t.Errorf("%d chunks collected and error %v, want %d and %v", got, err, collected, want)
				}
			})
		}
		fine := func(int64) error { return nil }
		at := func(seq int64, err error) func(int64) error {
			return func(now int64) error {
				if now == seq {
					return err
				}
				return nil
			}
		}
		fails("source after 50", &numbered{n: 50, err: errSource}, fine, fine, errSource, 50)
		fails("source at once", &numbered{err: errSource}, fine, fine, errSource, 0)
		fails("sink after 50", &numbered{n: 1000, err: io.EOF}, fine, at(50, errSink), errSink, 50)
		fails("work after 50", &numbered{n: 1000, err: io.EOF}, at(50, errWork), fine, errWork, 50)
		fails("work before source", &numbered{n: 51, err: errSource}, at(50, errWork), fine, errWork, 50)
		fails("two of work, the later one faster", &numbered{n: 1000, err: io.EOF}, func(seq int64) error {
			switch seq {
			case 20:
				time.Sleep(time.Second)
				return errWork
			case 21:
				return errLater
			}
			return nil
		}, fine, errWork, 20)
	}
}

func TestStreamCancelled(t *testing.T) {
	for _, workers := range []int{1, 8} {
		inBubble(t, fmt.Sprintf("%d workers", workers), func(t *testing.T) {
			ctx, cancel := context.WithCancel(t.Context())
			collected := int64(0)
			err := stream(ctx, &numbered{n: 1 << 40, err: io.EOF}, workers, 2*workers, func(_ int, r *result) error {
				uneven(r.chunk.Seq)
				return nil
			}, func(*result) error {
				if collected++; collected == 10 {
					cancel()
				}
				return nil
			})
			if !errors.Is(err, context.Canceled) || collected > 10+int64(3*workers) {
				t.Errorf("error %v after %d chunks", err, collected)
			}
		})
	}
	inBubble(t, "before it begins", func(t *testing.T) {
		ctx, cancel := context.WithCancel(t.Context())
		cancel()
		if err := stream(ctx, &numbered{n: 5, err: io.EOF}, 2, 4, nil, nil); !errors.Is(err, context.Canceled) {
			t.Errorf("error %v", err)
		}
	})
}

// TestStreamPanics: a fault of ours is an error with its stack, of the class
// for internal errors, and not the end of the process.
func TestStreamPanics(t *testing.T) {
	inBubble(t, "work", func(t *testing.T) {
		err := stream(t.Context(), &numbered{n: 10, err: io.EOF}, 3, 6, func(_ int, r *result) error {
			if r.chunk.Seq == 4 {
				panic("a slip")
			}
			return nil
		}, func(*result) error { return nil })
		if fault.Of(err) != fault.Internal || !strings.Contains(err.Error(), "a slip") || !strings.Contains(err.Error(), "pool_test.go") {
			t.Errorf("error %v", err)
		}
	})
	inBubble(t, "source", func(t *testing.T) {
		err := stream(t.Context(), &numbered{n: 10, err: io.EOF, before: func(seq int64) {
			if seq == 4 {
				panic("a slip")
			}
		}}, 3, 6, func(int, *result) error { return nil }, func(*result) error { return nil })
		if fault.Of(err) != fault.Internal || !strings.Contains(err.Error(), "a slip") {
			t.Errorf("error %v", err)
		}
	})
}
