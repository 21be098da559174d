package pipeline

import (
	"context"
	"errors"
	"io"
	"runtime/debug"
	"sync"

	"catenrich/internal/fault"
	"catenrich/internal/table"
)

// A result is a chunk on its way from a worker to the collector.
type result struct {
	chunk *table.Chunk
	batch *table.Batch
	piece table.Piece
}

// A task is a result that may not be there yet.
type task struct {
	result
	done chan error // capacity 1: a worker never waits for the collector
}

// stream moves the chunks of src through work to collect. Up to workers calls
// of work run at once, up to depth chunks are in flight while one more is read;
// collect sees the
// results in input order, one call at a time. The error returned is the first
// in input order, so a run fails alike at any worker count. No goroutine
// outlives the call.
func stream(ctx context.Context, src table.Source, workers, depth int, work func(worker int, r *result) error, collect func(*result) error) error {
	todo := make(chan *task)                   // to whichever worker is free
	order := make(chan *task, max(depth-1, 0)) // in input order; capacity bounds memory
	inner, stop := context.WithCancel(ctx)
	var wg sync.WaitGroup
	defer func() {
		stop()
		for range order { // release a reader that waits for room
		}
		wg.Wait()
	}()
	wg.Go(func() {
		defer close(order)
		defer close(todo)
		read(inner, src, todo, order)
	})
	for worker := range workers {
		wg.Go(func() {
			for t := range todo {
				if err := inner.Err(); err != nil { // nobody wants it any more
					t.done <- err
					continue
				}
				t.done <- guard(func() error { return work(worker, &t.result) })
			}
		})
	}
	for t := range order {
		if err := <-t.done; err != nil {
			return err
		}
		if err := collect(&t.result); err != nil {
			return err
		}
	}
	return ctx.Err()
}

// read hands out the chunks of src until it ends, fails, or ctx is done. An
// error takes its turn behind the chunks already read.
func read(ctx context.Context, src table.Source, todo, order chan<- *task) {
	for ctx.Err() == nil {
		t := &task{done: make(chan error, 1)}
		err := guard(func() (err error) {
			t.chunk, err = src.Next(ctx)
			return err
		})
		if errors.Is(err, io.EOF) {
			return
		}
		order <- t
		if err != nil {
			t.done <- err
			return
		}
		todo <- t
	}
}

// guard turns a panic into an error: a fault of ours ends the run with its
// stack in the message, and leaves no half-written file.
func guard(f func() error) (err error) {
	defer func() {
		if p := recover(); p != nil {
			err = fault.Internal.Errorf("internal error (please report it): %v\n%s", p, debug.Stack())
		}
	}()
	return f()
}
