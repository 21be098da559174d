package delim

import "bytes"

// Lines walks the lines of a block of text that begins at a line's start and
// holds whole records. A quoted field that holds line ends stays in one line.
type Lines struct {
	dialect *Dialect
	text    []byte
	quotes  bool // a quote is somewhere in text, and quotes mean something
	loneCR  bool // a CR without LF is somewhere in text
}

// Lines returns a walker over text. What the block holds is found out once, so
// that the lines of a plain block are found by searching for LF alone.
func (d *Dialect) Lines(text []byte) Lines {
	return Lines{
		dialect: d,
		text:    text,
		quotes:  d.Quote && bytes.IndexByte(text, '"') >= 0,
		loneCR:  hasLoneCR(text),
	}
}

// hasLoneCR reports whether text holds a CR that no LF follows.
func hasLoneCR(text []byte) bool {
	if bytes.IndexByte(text, '\r') < 0 {
		return false
	}
	return bytes.Count(text, cr) != bytes.Count(text, crlf)
}

// Quotes reports whether a record of the block may hold a quoted field.
func (l *Lines) Quotes() bool { return l.quotes }

// Next returns where the line that begins at pos ends, and where the next one
// begins: text[pos:end] is the line without its line end. pos must be below
// the length of the text.
func (l *Lines) Next(pos int) (end, next int) {
	if l.loneCR {
		s := l.dialect.scan(l.text, pos, true)
		return s.end, s.next
	}
	i := bytes.IndexByte(l.text[pos:], '\n')
	if i < 0 {
		i = len(l.text) - pos
	}
	end = pos + i
	if l.quotes && bytes.IndexByte(l.text[pos:end], '"') >= 0 {
		s := l.dialect.scan(l.text, pos, false)
		return s.end, s.next
	}
	next = end + 1
	if end == len(l.text) {
		return end, end
	}
	if end > pos && l.text[end-1] == '\r' {
		end--
	}
	return end, next
}

// A scanned line is what scan found of the line that begins at some place.
type scanned struct {
	end, next int  // as of [Lines.Next]; the length of the text where it has no end
	whole     bool // the line's end is in the text, for certain
	open      int  // the quote that is not closed, or -1
}

// scan finds the end of the line that begins at pos the thorough way. loneCR
// says that text may hold a CR without LF.
func (d *Dialect) scan(text []byte, pos int, loneCR bool) scanned {
	quotes := d.Quote && !d.IsComment(text[pos:])
	i, end := pos, lineEnd(text, pos, loneCR)
	for quotes {
		q := bytes.IndexByte(text[i:end], '"')
		if q < 0 {
			break
		}
		q += i
		if q > pos && !d.startsField(text[q-1]) {
			i = q + 1
			continue
		}
		shut := closing(text, q+1)
		if shut < 0 {
			return scanned{end: len(text), next: len(text), open: q}
		}
		i = shut + 1
		if i > end {
			end = lineEnd(text, i, loneCR)
		}
	}
	switch {
	case end == len(text):
		return scanned{end: end, next: end, open: -1}
	case text[end] == '\n':
		return scanned{end: end, next: end + 1, whole: true, open: -1}
	case end+1 == len(text): // a CR whose LF may be still to come
		return scanned{end: end, next: end + 1, open: -1}
	case text[end+1] == '\n':
		return scanned{end: end, next: end + 2, whole: true, open: -1}
	}
	return scanned{end: end, next: end + 1, whole: true, open: -1}
}

// startsField reports whether a quote that follows c, outside quotes, is the
// first byte of a field.
func (d *Dialect) startsField(c byte) bool {
	return c == d.Delimiter || d.aligned() && c == '\t' || c == '\n' || c == '\r'
}

// closing returns where the quote stands that closes a field whose text begins
// at i, or -1.
func closing(text []byte, i int) int {
	for {
		q := bytes.IndexByte(text[i:], '"')
		if q < 0 {
			return -1
		}
		i += q
		if i+1 == len(text) || text[i+1] != '"' {
			return i
		}
		i += 2
	}
}

// lineEnd returns the place of the first LF or CR at or after i, or the length
// of text.
func lineEnd(text []byte, i int, loneCR bool) int {
	if !loneCR {
		j := bytes.IndexByte(text[i:], '\n')
		if j < 0 {
			return len(text)
		}
		if j > 0 && text[i+j-1] == '\r' {
			j--
		}
		return i + j
	}
	for j, c := range text[i:] {
		if c == '\n' || c == '\r' {
			return i + j
		}
	}
	return len(text)
}

// First returns the end of text's first line, where the next begins, and
// whether both are certain whatever follows text; open is the place of a quote
// that is not closed in text, or -1.
func (d *Dialect) First(text []byte) (end, next int, whole bool, open int) {
	s := d.scan(text, 0, true)
	return s.end, s.next, s.whole, s.open
}

// Cut returns the length of the longest beginning of text that ends where a
// line ends. text must begin at a line's start. With all, nothing follows text,
// and what stands after the last line end is a line too. If a quote is not
// closed in text, open is its place, at or after n, else -1.
func (d *Dialect) Cut(text []byte, all bool) (n, open int) {
	switch {
	case !d.Quote || bytes.IndexByte(text, '"') < 0:
		n, open = lastLineEnd(text, 0, len(text), all), -1
	case d.hasComments(text):
		n, open = d.cutByLine(text)
	default:
		n, open = d.cutByQuote(text, all)
	}
	if all && open < 0 {
		n = len(text)
	}
	return n, open
}

// hasComments reports whether a line of text might be a comment.
func (d *Dialect) hasComments(text []byte) bool {
	return d.Comment != "" && (d.IsComment(text) ||
		bytes.Contains(text, []byte("\n"+d.Comment)) || bytes.Contains(text, []byte("\r"+d.Comment)))
}

// cutByLine is Cut where comments may hold quotes that mean nothing.
func (d *Dialect) cutByLine(text []byte) (n, open int) {
	for n < len(text) {
		s := d.scan(text, n, true)
		if !s.whole {
			return n, s.open
		}
		n = s.next
	}
	return n, -1
}

// cutByQuote is Cut where every quote counts: it hops from quote to quote, and
// looks for line ends only in the stretches outside, from the last backwards.
func (d *Dialect) cutByQuote(text []byte, all bool) (n, open int) {
	var outside [][2]int // stretches without quoted text
	start, i := 0, 0
	open = -1
	for {
		q := bytes.IndexByte(text[i:], '"')
		if q < 0 {
			outside = append(outside, [2]int{start, len(text)})
			break
		}
		q += i
		i = q + 1
		if q > 0 && !d.startsField(text[q-1]) {
			continue
		}
		outside = append(outside, [2]int{start, q})
		shut := closing(text, q+1)
		if shut < 0 {
			open = q
			break
		}
		start, i = shut+1, shut+1
	}
	for k := len(outside) - 1; k >= 0; k-- {
		if n := lastLineEnd(text, outside[k][0], outside[k][1], all); n > 0 {
			return n, open
		}
	}
	return 0, open
}

// lastLineEnd returns the place after the last line end within text[from:to],
// or 0. A CR at the end of text is no line end unless nothing follows: its LF
// may be still to come.
func lastLineEnd(text []byte, from, to int, all bool) int {
	part := text[from:to]
	lf := bytes.LastIndexByte(part, '\n')
	tail := part[lf+1:]
	if bytes.IndexByte(tail, '\r') >= 0 {
		if to == len(text) && tail[len(tail)-1] == '\r' && !all {
			tail = tail[:len(tail)-1]
		}
		if cr := bytes.LastIndexByte(tail, '\r'); cr >= 0 {
			return from + lf + 1 + cr + 1
		}
	}
	if lf < 0 {
		return 0
	}
	return from + lf + 1
}
