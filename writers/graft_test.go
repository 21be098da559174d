package writers

import (
	"context"
	"crypto/sha256"
	"io"
	"math"
	"os"
	"path/filepath"
	"sync"
	"testing"

	"catenrich/internal/table"
	"catenrich/readers"
)

// fileOutput is a table.Output that does the plain thing, for tests.
type fileOutput struct {
	f      *os.File
	offset int64
	failAt int64 // fail when that many bytes would be passed; 0 is never
}

var errFull = &os.PathError{Op: "write", Path: "output", Err: io.ErrShortWrite}

func newFileOutput(t testing.TB) *fileOutput {
	f, err := os.Create(filepath.Join(t.TempDir(), "out.parquet"))
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { f.Close() })
	return &fileOutput{f: f}
}

func (o *fileOutput) Write(p []byte) (int, error) {
	if o.failAt > 0 && o.offset+int64(len(p)) > o.failAt {
		return 0, errFull
	}
	n, err := o.f.Write(p)
	o.offset += int64(n)
	return n, err
}

func (o *fileOutput) Offset() int64 { return o.offset }

func (o *fileOutput) CopyRange(src *os.File, off, n int64) error {
	m, err := io.Copy(o, io.NewSectionReader(src, off, n))
	if err == nil && m < n {
		err = io.ErrUnexpectedEOF
	}
	return err
}

func (o *fileOutput) Patch(off int64, p []byte) error { _, err := o.f.WriteAt(p, off); return err }

func (o *fileOutput) Sum() (sum [32]byte) {
	h := sha256.New()
	io.Copy(h, io.NewSectionReader(o.f, 0, o.offset))
	return [32]byte(h.Sum(nil))
}

func (o *fileOutput) Scratch() (*os.File, error) {
	f, err := os.CreateTemp(filepath.Dir(o.f.Name()), "scratch")
	if err == nil {
		os.Remove(f.Name())
	}
	return f, err
}

// A kernel fills b.Out for the rows from first on.
type kernel func(b *table.Batch, first int64)

// A graftJob is one run from a file to an output.
type graftJob struct {
	path    string
	want    []string // columns the kernel reads, as floats
	spec    table.Spec
	kernel  kernel
	workers int
}

// run drives a source and a sink as a pipeline does: chunks in order, workers
// that decode, compute and encode, and appends in order.
func (j *graftJob) run(out table.Output) (*Parquet, error) {
	src, err := readers.OpenParquet(j.path)
	if err != nil {
		return nil, err
	}
	defer src.Close()
	sink, err := NewParquet(src, j.spec)
	if err != nil {
		return nil, err
	}
	var wants []table.Want
	for _, name := range j.want {
		i, err := src.Schema().Index(name, "test")
		if err != nil {
			return nil, err
		}
		wants = append(wants, table.Want{Field: i, As: table.Float})
	}
	if err := src.Select(wants, j.spec.Added); err != nil {
		return nil, err
	}
	if err := sink.Begin(out); err != nil {
		return nil, err
	}
	if err := j.pump(src, sink, wants); err != nil {
		return nil, err
	}
	if err := sink.Finish(); err != nil {
		return nil, err
	}
	return sink, src.Check()
}

type flight struct {
	chunk *table.Chunk
	batch *table.Batch
	piece table.Piece
	err   error
	done  chan struct{}
}

func (j *graftJob) pump(src table.Source, sink table.Sink, wants []table.Want) error {
	todo := make(chan *flight)
	order := make(chan *flight, 2*j.workers)
	batches := sync.Pool{New: func() any { return new(table.Batch) }}
	ctx, stop := context.WithCancel(context.Background())
	var wg sync.WaitGroup
	defer func() {
		stop()
		for range order {
		}
		wg.Wait()
	}()
	wg.Go(func() {
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
	})
	for range j.workers {
		wg.Go(func() {
			for f := range todo {
				f.batch = batches.Get().(*table.Batch)
				f.batch.Reset(f.chunk.Rows, wants, j.spec.Added)
				if f.err = src.Decode(f.chunk, f.batch); f.err == nil {
					j.kernel(f.batch, f.chunk.FirstRow)
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

// added are the new columns of most tests: one of each kind.
var added = []table.Field{
	{Name: "twice", Kind: table.Float, Unit: "Mpc", UCD: "pos.distance", Description: "twice the first column, null where it is"},
	{Name: "noise", Kind: table.Float},
	{Name: "new_flag", Kind: table.Flag},
	{Name: "new_state", Kind: table.Int},
}

// noise is a number for a row that no compression foresees.
func noise(row int64) float64 {
	x := uint64(row)*0x9e3779b97f4a7c15 + 0x1234567
	x ^= x >> 29
	x *= 0xbf58476d1ce4e5b9
	x ^= x >> 32
	return 1 + float64(x>>12)/(1<<52)
}

// fill computes the columns of added; row 7 of every 11 of noise is null, and
// -0, +0 and infinities come along.
func fill(b *table.Batch, first int64) {
	for i := range b.Rows {
		row := first + int64(i)
		b.Out[0].Float[i] = math.NaN()
		if len(b.In) > 0 {
			b.Out[0].Float[i] = 2 * b.In[0].Float[i]
		}
		b.Out[1].Float[i] = expectNoise(row)
		b.Out[2].Flag[i] = uint8(row % 3)
		b.Out[3].Int[i] = int32(row) - 5
	}
}

func expectNoise(row int64) float64 {
	switch row % 11 {
	case 7:
		return math.NaN()
	case 3:
		return math.Copysign(0, -1)
	}
	return noise(row)
}
