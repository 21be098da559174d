package pipeline

import (
	"context"
	"sync/atomic"

	"golang.org/x/sync/semaphore"

	"catenrich/internal/table"
)

// usualChunk is the text of a chunk that depthFor has reckoned with.
const usualChunk = 2 << 20

// A budgeted source lets a chunk of very long records pass only when there is
// room for it, in the memory that all units share. The number of chunks in
// flight is no measure of them: one record may have 128 MiB.
type budgeted struct {
	table.Source
	room *semaphore.Weighted
	size int64 // of the room
	held atomic.Int64
}

// cost is what a chunk takes beyond a usual one: its text, the room it was
// read into, and its copy in the output.
func (b *budgeted) cost(c *table.Chunk) int64 {
	return min(3*max(int64(len(c.Raw))-usualChunk, 0), b.size)
}

// Next implements [table.Source].
func (b *budgeted) Next(ctx context.Context) (*table.Chunk, error) {
	c, err := b.Source.Next(ctx)
	if err != nil {
		return nil, err
	}
	if n := b.cost(c); n > 0 {
		if err := b.room.Acquire(ctx, n); err != nil {
			return nil, err
		}
		b.held.Add(n)
	}
	return c, nil
}

// Release implements [table.Source].
func (b *budgeted) Release(c *table.Chunk) {
	n := b.cost(c)
	b.Source.Release(c)
	b.give(n)
}

// end gives back what chunks hold that nobody will release, since the unit
// failed. Nothing uses them any more.
func (b *budgeted) end() { b.give(b.held.Load()) }

func (b *budgeted) give(n int64) {
	if n > 0 {
		b.held.Add(-n)
		b.room.Release(n)
	}
}
