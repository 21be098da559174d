package writers

import (
	"encoding/binary"
	"errors"
	"strings"
	"sync"

	"catenrich/internal/fault"
	"catenrich/internal/parquetfoot"
	"catenrich/internal/table"
	"catenrich/readers"
)

// storeRoom is how many bytes of pages wait in memory for the end of their
// row group.
const storeRoom = 64 << 20

// A Parquet is a [table.Sink] that grafts new columns onto a Parquet file: the
// output is the whole input, byte for byte, then for each row group the chunks
// of the new columns, then the page indexes, copies of the old ones among them,
// then a footer that is the old one with the new columns spliced in. Nothing
// old is decoded, and every offset of a page or bloom filter stays right.
//
// Begin reading here; parquet_page.go makes pages, parquet_store.go keeps them
// until their row group is complete, parquet_chunk.go sums them up, and
// parquet_keys.go extends metadata that describes the whole schema.
type Parquet struct {
	src      *readers.Parquet
	foot     *parquetfoot.Footer
	columns  []newColumn
	codec    int32
	level    int
	entries  []parquetfoot.Entry
	warnings []string

	out    table.Output
	copied int64
	sum    func() [32]byte

	group int   // the row group that is being filled
	rows  int64 // how many rows of it are in
	store pageStore

	chunks, columnIndexes, offsetIndexes spool

	mu       sync.Mutex
	encoders []*pageEncoder
	buffers  [][]byte
	largest  int // bytes of a slice's pages so far, to make the next buffer in one go
}

// NewParquet returns a sink that extends src. Of spec it takes Added, Narrow,
// Encoding ("", "byte_stream_split" or "plain"), Codec ("" or "zstd", "snappy",
// "none"), Level (of zstd, 0 is the fastest) and Metadata. A name that the file
// has already, or that differs from one only in case, is a fault.Config.
func NewParquet(src *readers.Parquet, spec table.Spec) (*Parquet, error) {
	w := &Parquet{src: src, foot: src.Footer(), level: spec.Level}
	var err error
	if w.codec, err = codecID(spec.Codec, spec.Level); err != nil {
		return nil, err
	}
	switch spec.Encoding {
	case "", "byte_stream_split", "plain":
	default:
		return nil, fault.Config.Errorf("output.encoding is %q, want byte_stream_split or plain", spec.Encoding)
	}
	if err := w.addColumns(&spec); err != nil {
		return nil, err
	}
	w.entries, w.warnings = extendEntries(w.foot, spec.Added, w.columns, spec.Metadata)
	for i := range w.warnings {
		w.warnings[i] = src.Schema().File + ": " + w.warnings[i]
	}
	return w, nil
}

// addColumns takes over the added fields.
func (w *Parquet) addColumns(spec *table.Spec) error {
	file := w.src.Schema().File
	if name := w.src.Schema().Clash(spec.Added); name != "" {
		return fault.Config.Errorf("%s has a column %q already (or one that differs only in case): choose another with add.prefix, or leave it out", file, name)
	}
	seen := make(map[string]bool)
	for i := range spec.Added {
		f := &spec.Added[i]
		if lower := strings.ToLower(f.Name); f.Name == "" || seen[lower] {
			return fault.Config.Errorf("%s: the name %q is given to two new columns, or to none", file, f.Name)
		} else {
			seen[lower] = true
		}
		if f.Kind == table.Bytes {
			return fault.Internal.Errorf("writers: the new column %q holds text, which is not offered", f.Name)
		}
		w.columns = append(w.columns, newColumnOf(f, spec.Narrow, spec.Encoding == "plain"))
	}
	// Each new chunk takes more than 60 bytes of the footer.
	if int64(w.foot.Len())+int64(w.foot.Groups())*int64(len(w.columns))*60 > parquetfoot.MaxSize {
		return fault.Data.Errorf("%s: %w", file, parquetfoot.ErrTooLarge)
	}
	return nil
}

// Warnings says what of the input's metadata could not be kept, and why.
func (w *Parquet) Warnings() []string { return w.warnings }

// Begin copies the input.
func (w *Parquet) Begin(out table.Output) error {
	if out.Offset() != 0 {
		return fault.Internal.Errorf("writers: the output has %d bytes before the input is copied", out.Offset())
	}
	w.out = out
	w.store = pageStore{room: storeRoom, scratch: out.Scratch, release: w.putBuffer}
	for _, s := range []*spool{&w.chunks, &w.columnIndexes, &w.offsetIndexes} {
		s.scratch = out.Scratch
	}
	file, size := w.src.File()
	if err := out.CopyRange(file, 0, size); err != nil {
		return err
	}
	w.copied = size
	if late, ok := out.(interface{ Mark() func() [32]byte }); ok {
		w.sum = late.Mark() // hashing goes on beside the work
	} else {
		w.sum = sync.OnceValue(out.Sum)
		w.sum()
	}
	return nil
}

// Verbatim implements [table.Sink]: the whole input.
func (w *Parquet) Verbatim() (size int64, sum [32]byte) {
	if w.sum == nil {
		return 0, sum
	}
	return w.copied, w.sum()
}

// Encode makes one page for each new column.
func (w *Parquet) Encode(c *table.Chunk, b *table.Batch) (table.Piece, error) {
	if b.Rows != c.Rows || len(b.Out) != len(w.columns) {
		return table.Piece{}, fault.Internal.Errorf("writers: a batch of %d rows and %d columns for a slice of %d rows and %d columns",
			b.Rows, len(b.Out), c.Rows, len(w.columns))
	}
	e, buf := w.encoder()
	pages := make([]page, len(w.columns))
	for i := range w.columns {
		var p page
		buf, p.from, p.meta = e.encode(buf, &w.columns[i], &b.Out[i], c.Rows)
		p.to = len(buf)
		pages[i] = p
	}
	w.putEncoder(e, len(buf))
	piece := table.Piece{Parts: make([][]byte, len(pages)), Meta: slicePages{buf, pages}}
	for i, p := range pages {
		piece.Parts[i] = buf[p.from:p.to]
	}
	return piece, nil
}

// slicePages is the Meta of a piece: its parts lie in one buffer.
type slicePages struct {
	buf   []byte
	pages []page
}

func (w *Parquet) encoder() (*pageEncoder, []byte) {
	w.mu.Lock()
	defer w.mu.Unlock()
	var buf []byte
	if n := len(w.buffers); n > 0 {
		buf, w.buffers = w.buffers[n-1][:0], w.buffers[:n-1]
	} else {
		buf = make([]byte, 0, w.largest+w.largest/32)
	}
	if n := len(w.encoders); n > 0 {
		e := w.encoders[n-1]
		w.encoders = w.encoders[:n-1]
		return e, buf
	}
	return &pageEncoder{codec: newCodec(w.codec, w.level), statistics: !w.foot.Indexed && w.foot.Ordered}, buf
}

func (w *Parquet) putEncoder(e *pageEncoder, used int) {
	w.mu.Lock()
	defer w.mu.Unlock()
	w.largest = max(w.largest, used)
	w.encoders = append(w.encoders, e)
}

func (w *Parquet) putBuffer(b []byte) {
	w.mu.Lock()
	defer w.mu.Unlock()
	w.buffers = append(w.buffers, b)
}

// Append stores the pages of a slice and, after the last of its row group,
// writes the row group's new chunks.
func (w *Parquet) Append(p table.Piece, c *table.Chunk, _ *table.Batch) error {
	if err := w.skipEmpty(c.Group); err != nil {
		return err
	}
	s := p.Meta.(slicePages)
	if err := w.store.add(s.buf, s.pages); err != nil {
		return err
	}
	w.rows += int64(c.Rows)
	if !c.Last {
		return nil
	}
	if _, rows := w.foot.GroupRows(w.group); rows != w.rows {
		return fault.Internal.Errorf("writers: row group %d has %d rows, and %d came", w.group, rows, w.rows)
	}
	return w.finishGroup()
}

// skipEmpty gives their chunks to row groups without rows, up to group.
func (w *Parquet) skipEmpty(group int) error {
	for w.group < group {
		if _, rows := w.foot.GroupRows(w.group); rows != 0 || w.rows != 0 {
			return fault.Internal.Errorf("writers: row group %d was left incomplete, with %d of %d rows", w.group, w.rows, rows)
		}
		if err := w.finishGroup(); err != nil {
			return err
		}
	}
	return nil
}

// finishGroup lays out the new chunks of a row group, one behind another, and
// spools what the footer and the page indexes will say of them.
func (w *Parquet) finishGroup() error {
	var e parquetfoot.Encoder
	if w.foot.Indexed {
		if err := w.copyIndexes(); err != nil {
			return err
		}
	}
	for i := range w.columns {
		k := columnChunk{column: &w.columns[i], codec: w.codec, ordered: w.foot.Ordered, offset: w.out.Offset()}
		for s := range w.store.slices {
			if err := w.store.copyPage(w.out, s, i); err != nil {
				return err
			}
			k.pages = append(k.pages, w.store.slices[s].pages[i].meta)
		}
		if err := w.record(&e, &k); err != nil {
			return err
		}
	}
	w.store.clear()
	w.group++
	w.rows = 0
	return nil
}

// copyIndexes spools the old chunks' page indexes, to stand before the new
// ones of the same row group: parquet-go takes all column indexes of a file for
// one run of bytes that begins with the first chunk's, and all offset indexes
// for another.
func (w *Parquet) copyIndexes() error {
	chunks, err := w.foot.Chunks(w.group, nil)
	if err != nil {
		return err
	}
	file, _ := w.src.File()
	var buf []byte
	for i := range chunks {
		for _, x := range []struct {
			at parquetfoot.Place
			to *spool
		}{{chunks[i].ColumnIndex, &w.columnIndexes}, {chunks[i].OffsetIndex, &w.offsetIndexes}} {
			buf = grow(buf[:0], int(x.at.Length))
			if _, err := file.ReadAt(buf, x.at.Offset); err != nil {
				return fault.IO.Errorf("reading %s: %w", file.Name(), err)
			}
			if err := x.to.add(buf); err != nil {
				return err
			}
		}
	}
	return nil
}

// record spools one chunk's metadata and, if the old chunks have page indexes,
// its own.
func (w *Parquet) record(e *parquetfoot.Encoder, k *columnChunk) error {
	total := k.total()
	r := chunkRecord{unpacked: int64(total.unpacked), stored: int64(total.stored)}
	if w.foot.Indexed {
		if k.ordered && len(k.pages) > 0 {
			e.B = e.B[:0]
			k.columnIndex(e)
			r.columnIndex = int64(len(e.B))
			if err := w.columnIndexes.add(e.B); err != nil {
				return err
			}
		}
		e.B = e.B[:0]
		k.offsetIndex(e)
		r.offsetIndex = int64(len(e.B))
		if err := w.offsetIndexes.add(e.B); err != nil {
			return err
		}
	}
	e.B = e.B[:0]
	k.metadata(e)
	r.meta = e.B
	return w.chunks.add(r.append(nil))
}

// Finish writes the page indexes, all column indexes before all offset
// indexes, and the footer.
func (w *Parquet) Finish() error {
	defer w.close()
	if err := w.skipEmpty(w.foot.Groups()); err != nil {
		return err
	}
	at := indexPlace{column: w.out.Offset(), offset: w.out.Offset() + w.columnIndexes.size}
	for _, s := range []*spool{&w.columnIndexes, &w.offsetIndexes} {
		if _, err := s.reader().WriteTo(w.out); err != nil {
			return fault.IO.Wrap(err)
		}
	}
	n, err := w.writeFooter(at)
	if errors.Is(err, parquetfoot.ErrTooLarge) {
		return fault.Data.Errorf("%s: %w", w.src.Schema().File, err)
	}
	if err != nil {
		return err
	}
	tail := binary.LittleEndian.AppendUint32(nil, uint32(n))
	_, err = w.out.Write(append(tail, "PAR1"...))
	return err
}

// writeFooter splices the spooled metadata into the old footer.
func (w *Parquet) writeFooter(at indexPlace) (int64, error) {
	x := parquetfoot.Extension{Entries: w.entries}
	for i := range w.columns {
		x.Columns = append(x.Columns, parquetfoot.Column{Name: w.columns[i].name, Physical: w.columns[i].physical})
	}
	in := w.chunks.reader()
	encoders := make([]parquetfoot.Encoder, len(w.columns))
	chunks := make([][]byte, len(w.columns))
	var r chunkRecord
	var old []parquetfoot.Chunk
	x.Group = func(g int) (more parquetfoot.GroupExtension, err error) {
		if w.foot.Indexed {
			if old, err = w.foot.Chunks(g, old); err != nil {
				return more, err
			}
			for i := range old {
				more.Moved = append(more.Moved, parquetfoot.MovedIndexes{OffsetIndex: at.offset, ColumnIndex: at.column})
				at.offset += old[i].OffsetIndex.Length
				at.column += old[i].ColumnIndex.Length
			}
		}
		for i := range w.columns {
			if err := r.read(in); err != nil {
				return more, err
			}
			encoders[i].B = encoders[i].B[:0]
			r.encode(&encoders[i], &at)
			chunks[i] = encoders[i].B
			more.Uncompressed += r.unpacked
			more.Compressed += r.stored
		}
		more.Chunks = chunks
		return more, nil
	}
	return w.foot.Extend(w.out, &x)
}

// close gives back memory and scratch files.
func (w *Parquet) close() {
	w.store.close()
	for _, s := range []*spool{&w.chunks, &w.columnIndexes, &w.offsetIndexes} {
		s.close()
		s.buf = nil
	}
	w.encoders, w.buffers = nil, nil
}
