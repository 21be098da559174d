package pipeline

import (
	"context"
	"errors"
	"fmt"
	"io"
	"sync/atomic"
	"testing"
	"time"

	"golang.org/x/sync/semaphore"

	"catenrich/internal/table"
)

// longRecords is a source of chunks of long records, which counts what is out.
type longRecords struct {
	numbered
	text []byte
	out  atomic.Int64
	most int64
}

func (s *longRecords) Next(ctx context.Context) (*table.Chunk, error) {
	c, err := s.numbered.Next(ctx)
	if err != nil {
		return nil, err
	}
	c.Raw = s.text
	if c.Seq%5 == 4 {
		c.Raw = s.text[:100] // a usual one
	}
	s.most = max(s.most, s.out.Add(int64(len(c.Raw))))
	return c, nil
}

func (s *longRecords) Release(c *table.Chunk) { s.out.Add(-int64(len(c.Raw))) }

// TestLongRecordsInFlight: however many chunks there may be, and however slow
// the output is, long ones are out as memory has room, and the one being read.
func TestLongRecordsInFlight(t *testing.T) {
	text := make([]byte, 20<<20)
	for _, room := range []int64{1, 100 << 20, 400 << 20} {
		inBubble(t, fmt.Sprintf("room %d MiB", room>>20), func(t *testing.T) {
			src := &longRecords{numbered: numbered{n: 60, err: io.EOF}, text: text}
			b := &budgeted{Source: src, room: semaphore.NewWeighted(room), size: room}
			rows := 0
			err := stream(t.Context(), b, 4, 64, func(_ int, r *result) error { return nil }, func(r *result) error {
				time.Sleep(time.Second)
				b.Release(r.chunk)
				rows++
				return nil
			})
			b.end()
			if err != nil || rows != 60 || !b.room.TryAcquire(room) {
				t.Errorf("%d of 60 chunks, error %v", rows, err)
			}
			// One is let through whatever its size, and one is read ahead.
			most := 2*int64(len(text)) + room/3 + 60*100
			if src.most > most || room > 1 && src.most < most-2*int64(len(text)) {
				t.Errorf("%d MiB in flight, want about %d", src.most>>20, most>>20)
			}
		})
	}
}

// TestFailedUnitGivesMemoryBack: the other units of the run need it.
func TestFailedUnitGivesMemoryBack(t *testing.T) {
	inBubble(t, "fails", func(t *testing.T) {
		const room = 500 << 20
		errSink := errors.New("sink")
		src := &longRecords{numbered: numbered{n: 60, err: io.EOF}, text: make([]byte, 20<<20)}
		b := &budgeted{Source: src, room: semaphore.NewWeighted(room), size: room}
		err := stream(t.Context(), b, 4, 64, func(int, *result) error { return nil }, func(r *result) error {
			time.Sleep(time.Second)
			return errSink
		})
		b.end()
		if !errors.Is(err, errSink) || !b.room.TryAcquire(room) {
			t.Errorf("error %v, and memory is missing", err)
		}
	})
}
