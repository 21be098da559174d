package writertest

import (
	"context"
	"io"
	"sync"

	"catenrich/internal/table"
)

// A Kernel fills b.Out for the rows from first on.
type Kernel func(b *table.Batch, first int64)

// A flight is one chunk on its way through a worker.
type flight struct {
	chunk *table.Chunk
	batch *table.Batch
	piece table.Piece
	err   error
	done  chan struct{}
}

// Pump takes all chunks of a source that has its columns selected through a
// sink that has begun: workers decode, compute and encode at once, and pieces
// are appended in order, as in a run of the program. The source must number
// its rows.
func Pump(src table.Source, sink table.Sink, wants []table.Want, added []table.Field, workers int, kernel Kernel) error {
	todo := make(chan *flight)
	order := make(chan *flight, 2*workers)
	batches := sync.Pool{New: func() any { return new(table.Batch) }}
	ctx, stop := context.WithCancel(context.Background())
	var wg sync.WaitGroup
	defer func() {
		stop()
		for range order {
		}
		wg.Wait()
	}()
	wg.Go(func() { read(ctx, src, todo, order) })
	for range workers {
		wg.Go(func() {
			for f := range todo {
				f.batch = batches.Get().(*table.Batch)
				f.batch.Reset(f.chunk.Rows, wants, added)
				if f.err = src.Decode(f.chunk, f.batch); f.err == nil {
					kernel(f.batch, f.chunk.FirstRow)
					f.piece, f.err = sink.Encode(f.chunk, f.batch)
				}
				close(f.done)
			}
		})
	}
	for f := range order {
		if <-f.done; f.err != nil {
			return f.err
		}
		if err := sink.Append(f.piece, f.chunk, f.batch); err != nil {
			return err
		}
		src.Release(f.chunk)
		batches.Put(f.batch)
	}
	return nil
}

// read hands chunks to the workers, and to the collector in order.
func read(ctx context.Context, src table.Source, todo, order chan<- *flight) {
	defer close(order)
	defer close(todo)
	for ctx.Err() == nil {
		c, err := src.Next(ctx)
		if err == io.EOF {
			return
		}
		f := &flight{chunk: c, err: err, done: make(chan struct{})}
		order <- f
		if err != nil {
			close(f.done)
			return
		}
		todo <- f
	}
}
