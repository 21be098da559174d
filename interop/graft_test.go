package interop

import (
	"context"
	"crypto/sha256"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"testing"

	"catenrich/internal/table"
	"catenrich/readers"
	"catenrich/writers"
)

// added are the columns that every file gets: each kind, with nulls.
var added = []table.Field{
	{Name: "grafted_value", Kind: table.Float, Unit: "Mpc", UCD: "pos.distance", Description: "a value of the test & its <marks>"},
	{Name: "grafted_flag", Kind: table.Flag},
	{Name: "grafted_status", Kind: table.Int},
}

// wantValue and its fellows say what each row must hold.
func wantValue(row int64) float64 {
	switch row % 13 {
	case 5:
		return math.NaN()
	case 8:
		return math.Copysign(0, -1)
	}
	x := uint64(row+1) * 0x9e3779b97f4a7c15
	return math.Sqrt(float64(row)) + float64(x>>11)/(1<<53)
}

func wantFlag(row int64) uint8   { return uint8(row % 3) }
func wantStatus(row int64) int32 { return int32(row*7919) % 1000 }

// output is a table.Output over a plain file.
type output struct {
	f      *os.File
	offset int64
}

func (o *output) Write(p []byte) (int, error) {
	n, err := o.f.Write(p)
	o.offset += int64(n)
	return n, err
}
func (o *output) Offset() int64 { return o.offset }
func (o *output) CopyRange(src *os.File, off, n int64) error {
	_, err := io.Copy(o, io.NewSectionReader(src, off, n))
	return err
}
func (o *output) Patch(off int64, p []byte) error { _, err := o.f.WriteAt(p, off); return err }
func (o *output) Sum() (sum [32]byte) {
	h := sha256.New()
	io.Copy(h, io.NewSectionReader(o.f, 0, o.offset))
	return [32]byte(h.Sum(nil))
}
func (o *output) Scratch() (*os.File, error) {
	return os.CreateTemp(filepath.Dir(o.f.Name()), "scratch")
}

// graft adds the columns to a file, reading the first numeric column it has.
func graft(t testing.TB, in, out string, spec table.Spec) (warnings []string) {
	t.Helper()
	warnings, err := tryGraft(in, out, spec)
	if err != nil {
		t.Fatalf("grafting onto %s: %v", filepath.Base(in), err)
	}
	return warnings
}

func tryGraft(in, out string, spec table.Spec) (warnings []string, err error) {
	src, err := readers.OpenParquet(in)
	if err != nil {
		return nil, err
	}
	defer src.Close()
	if spec.Added == nil {
		spec.Added = added
	}
	sink, err := writers.NewParquet(src, spec)
	if err != nil {
		return nil, err
	}
	// Every column that can be decoded is, to have it looked at.
	var wants []table.Want
	for i, f := range src.Schema().Fields {
		switch {
		case f.Type.Numeric():
			wants = append(wants, table.Want{Field: i, As: table.Float})
		case f.Type != table.Other:
			wants = append(wants, table.Want{Field: i, As: table.Bytes})
		}
	}
	if err := src.Select(wants, spec.Added); err != nil {
		return nil, err
	}
	f, err := os.Create(out)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	if err := sink.Begin(&output{f: f}); err != nil {
		return nil, err
	}
	var b table.Batch
	for {
		c, err := src.Next(context.Background())
		if err == io.EOF {
			break
		}
		if err != nil {
			return nil, err
		}
		if err := src.Decode(c, &b); err != nil {
			return nil, err
		}
		for i := range b.Rows {
			row := c.FirstRow + int64(i)
			b.Out[0].Float[i], b.Out[1].Flag[i], b.Out[2].Int[i] = wantValue(row), wantFlag(row), wantStatus(row)
		}
		p, err := sink.Encode(c, &b)
		if err != nil {
			return nil, err
		}
		if err := sink.Append(p, c, &b); err != nil {
			return nil, err
		}
		src.Release(c)
	}
	if err := sink.Finish(); err != nil {
		return nil, err
	}
	return sink.Warnings(), src.Check()
}

// samePrefix reports whether out begins with the whole of in.
func samePrefix(in, out string) error {
	a, err := os.Open(in)
	if err != nil {
		return err
	}
	defer a.Close()
	b, err := os.Open(out)
	if err != nil {
		return err
	}
	defer b.Close()
	info, err := a.Stat()
	if err != nil {
		return err
	}
	ha, hb := sha256.New(), sha256.New()
	io.Copy(ha, a)
	io.CopyN(hb, b, info.Size())
	if string(ha.Sum(nil)) != string(hb.Sum(nil)) {
		return fmt.Errorf("%s does not begin with %s", out, in)
	}
	return nil
}
