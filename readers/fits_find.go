package readers

import (
	"bufio"
	"bytes"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"strconv"
	"strings"

	"github.com/klauspost/compress/gzip"

	"catenrich/internal/fault"
	"catenrich/internal/fitshead"
)

// A fitsWalk goes from one header-data unit to the next.
type fitsWalk struct {
	r    io.Reader
	skip func(n int64) error
	at   int64 // of the header that was read last
	next int64 // of the one behind it
	err  error // of reading or decompressing, other than the end of the file
}

func (w *fitsWalk) Read(p []byte) (int, error) {
	n, err := w.r.Read(p)
	if err != nil && err != io.EOF {
		w.err = err
	}
	return n, err
}

// find reads the headers up to that of the table.
func (f *FITS) find() error {
	section := io.NewSectionReader(f.file, 0, f.opened.size)
	w := &fitsWalk{r: section}
	w.skip = func(n int64) error {
		_, err := section.Seek(n, io.SeekCurrent)
		return err
	}
	begin := f.begin(w)
	if f.packed = bytes.HasPrefix(begin, []byte{0x1f, 0x8b}); f.packed {
		section.Seek(0, io.SeekStart)
		z, err := gzip.NewReader(bufio.NewReader(section))
		if err != nil {
			return f.damaged(err)
		}
		w.r = z
		w.skip = func(n int64) error {
			_, err := io.CopyN(io.Discard, w, n)
			return err
		}
		begin = f.begin(w)
		w.r = io.MultiReader(bytes.NewReader(begin), z)
	} else {
		section.Seek(0, io.SeekStart)
	}
	switch {
	case w.err != nil:
		return f.damaged(w.err)
	case len(begin) == 0:
		return fault.Data.Errorf("%s is empty", f.path)
	case string(begin) != fitsBegin:
		return fault.Data.Errorf("%s is not a FITS file: it does not begin with %s", f.path, fitsBegin)
	}
	return f.choose(w)
}

// fitsBegin is how every FITS file begins.
const fitsBegin = "SIMPLE  ="

// begin reads what should be fitsBegin.
func (f *FITS) begin(w *fitsWalk) []byte {
	begin := make([]byte, len(fitsBegin))
	n, _ := io.ReadFull(w, begin)
	return begin[:n]
}

// choose walks until it meets the table that was asked for.
func (f *FITS) choose(w *fitsWalk) error {
	var met []string
	for n := 0; ; n++ {
		h, err := w.header(n)
		if errors.Is(err, io.EOF) {
			return f.notFound(met)
		}
		if w.err != nil {
			return f.damaged(w.err)
		}
		if err != nil {
			return f.hduError(n, err)
		}
		size, err := h.DataSize()
		if err != nil {
			return f.hduError(n, err)
		}
		kind := h.Kind()
		if f.wanted(n, h, kind) {
			if kind != fitshead.BinaryTable {
				return fault.Data.Errorf("%s: HDU %d (%s) is %v, and only binary tables are read%s", f.path, n, f.asked(), kind, remedy(kind))
			}
			f.hdu, f.at = n, w.at
			return f.take(h)
		}
		met = append(met, describeHDU(n, h, kind))
		if err := f.pass(w, n, size); err != nil {
			return err
		}
	}
}

// pass goes behind the data of a unit.
func (f *FITS) pass(w *fitsWalk, n int, size int64) error {
	if missing := w.next + size - f.opened.size; !f.packed && missing > 0 {
		return f.hduError(n, fmt.Errorf("its %d bytes of data are cut short: the file ends %d bytes before they do", size, missing))
	}
	w.next += fitshead.Padded(size)
	if err := w.skip(fitshead.Padded(size)); w.err != nil {
		return f.damaged(w.err)
	} else if err != nil {
		return f.hduError(n, fmt.Errorf("its %d bytes of data are cut short: the file ends before they do", size))
	}
	return nil
}

// header reads the header of unit n. Behind the last unit, special records may
// stand (section 3.5 of the standard): they are an io.EOF too.
func (w *fitsWalk) header(n int) (*fitshead.Header, error) {
	w.at = w.next
	h, err := fitshead.Read(w)
	if err != nil {
		return nil, err
	}
	if n > 0 && !h.Begins("XTENSION") {
		return nil, io.EOF
	}
	w.next += h.Size()
	return h, nil
}

// wanted reports whether unit n is the table that was asked for.
func (f *FITS) wanted(n int, h *fitshead.Header, kind fitshead.Kind) bool {
	if f.options.HDU == "" {
		return kind == fitshead.BinaryTable
	}
	if number, err := strconv.Atoi(f.options.HDU); err == nil {
		return n == number
	}
	return strings.EqualFold(h.Name(), strings.TrimRight(f.options.HDU, " "))
}

// asked says what was asked for.
func (f *FITS) asked() string { return fmt.Sprintf("input.hdu = %q", f.options.HDU) }

// remedy says what to do about a unit that is no binary table.
func remedy(k fitshead.Kind) string {
	switch k {
	case fitshead.ASCIITable:
		return ": convert it to a binary table first"
	case fitshead.CompressedTable, fitshead.CompressedImage:
		return ": uncompress it first"
	}
	return ""
}

// describeHDU says in a few words what a unit is.
func describeHDU(n int, h *fitshead.Header, kind fitshead.Kind) string {
	if name := h.Name(); name != "" {
		return fmt.Sprintf("HDU %d %.40q is %v%s", n, name, kind, remedy(kind))
	}
	return fmt.Sprintf("HDU %d is %v%s", n, kind, remedy(kind))
}

// notFound says what there is instead of the table.
func (f *FITS) notFound(met []string) error {
	const most = 8
	more := ""
	if len(met) > most {
		more = fmt.Sprintf("; and %d more", len(met)-most)
		met = met[:most]
	}
	what := "holds no binary table"
	if f.options.HDU != "" {
		what = fmt.Sprintf("has no HDU %q (input.hdu)", f.options.HDU)
	}
	return fault.Data.Errorf("%s %s: %s%s", f.path, what, strings.Join(met, "; "), more)
}

// hduError says which unit an error is of.
func (f *FITS) hduError(n int, err error) error {
	return fault.Data.Errorf("%s: HDU %d: %w", f.path, n, err)
}

// damaged says which failed, the reading or the decompressing.
func (f *FITS) damaged(err error) error {
	if in := new(fs.PathError); errors.As(err, &in) {
		return fault.IO.Errorf("reading %s: %w", f.path, err)
	}
	return fault.Data.Errorf("%s cannot be decompressed, it is damaged or cut short: %w", f.path, err)
}

// take makes out the columns of the table, and that a plain file has its rows.
func (f *FITS) take(h *fitshead.Header) error {
	t, err := fitshead.ParseTable(h)
	if err != nil {
		return f.hduError(f.hdu, err)
	}
	f.table = t
	if !f.packed && f.opened.size < f.rowOffset(t.Rows)+t.PCount() {
		return f.cutShort()
	}
	return nil
}
