package pipeline

import (
	"context"
	"sync"

	"catenrich/internal/table"
)

// Pass reads all of src, whose columns have been selected as wants, and gives
// each chunk's rows to see in their order, with the number of the first (from
// 0). Up to workers chunks are decoded at once. The batch is see's until it
// returns.
func Pass(ctx context.Context, src table.Source, wants []table.Want, workers int, see func(b *table.Batch, first int64) error) error {
	batches := sync.Pool{New: func() any { return new(table.Batch) }}
	rows := int64(0)
	decode := func(_ int, r *result) error {
		r.batch = batches.Get().(*table.Batch)
		r.batch.Reset(r.chunk.Rows, wants, nil)
		return src.Decode(r.chunk, r.batch)
	}
	return stream(ctx, src, workers, 2*workers, decode, func(r *result) error {
		defer func() {
			src.Release(r.chunk)
			batches.Put(r.batch)
		}()
		first := rows
		rows += int64(r.batch.Rows)
		return see(r.batch, first)
	})
}
