package writers

import (
	"crypto/sha256"
	"io"
	"math"
	"os"
	"path/filepath"
	"slices"
	"testing"

	"catenrich/internal/table"
	"catenrich/readers"
	"catenrich/writers/writertest"
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

// A graftJob is one run from a file to an output.
type graftJob struct {
	path    string
	want    []string // columns the kernel reads, as floats
	text    []string // columns that are decoded as text and not looked at
	spec    table.Spec
	kernel  writertest.Kernel
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
	for at, name := range slices.Concat(j.want, j.text) {
		i, err := src.Schema().Index(name, "test")
		if err != nil {
			return nil, err
		}
		as := table.Float
		if at >= len(j.want) {
			as = table.Bytes
		}
		wants = append(wants, table.Want{Field: i, As: as})
	}
	if err := src.Select(wants, j.spec.Added); err != nil {
		return nil, err
	}
	if err := sink.Begin(out); err != nil {
		return nil, err
	}
	if err := writertest.Pump(src, sink, wants, j.spec.Added, j.workers, j.kernel); err != nil {
		return nil, err
	}
	if err := sink.Finish(); err != nil {
		return nil, err
	}
	return sink, src.Check()
}

// added are the new columns of most tests: one of each kind.
var added = []table.Field{
	{Name: "twice", Kind: table.Float, Unit: "Mpc", UCD: "pos.distance", Description: "twice the first column, null where it is", Source: "invented & <escaped>"},
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
