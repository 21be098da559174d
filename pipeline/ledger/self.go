package ledger

import (
	"bytes"
	"crypto/sha256"
	"errors"
	"fmt"

	"catenrich/internal/publish"
)

// selfKey begins the member that holds a manifest's own digest.
const selfKey = `"self":"`

// checkSelf proves that a manifest has the digest it says: the SHA-256 of its
// line without the member "self". What has it is, to the byte, what was
// written, and so canonical: reading a hundred thousand manifests, one need not
// make each canonical again. It returns the digest and the line.
func checkSelf(text []byte) (self publish.Digest, line []byte, err error) {
	line, ended := bytes.CutSuffix(text, []byte("\n"))
	if !ended {
		return self, nil, errors.New("it does not end in a newline")
	}
	at, hex, end, err := selfMember(line)
	if err != nil {
		return self, nil, err
	}
	if err := self.UnmarshalText(line[hex : hex+2*len(self)]); err != nil {
		return self, nil, fmt.Errorf(`no digest "self" in it: %w`, err)
	}
	if got := digestWithout(line, at, end); got != self {
		return self, nil, fmt.Errorf(`it has the digest %v, not %v as "self" says`, got, self)
	}
	return self, line, nil
}

// seal returns a manifest's bytes: the canonical JSON of v, whose member "self"
// is still zero, with the digest of the rest in its place, and a newline.
func seal(v any) ([]byte, error) {
	line, err := canonical(v)
	if err != nil {
		return nil, err
	}
	at, hex, end, err := selfMember(line)
	if err != nil {
		return nil, err
	}
	copy(line[hex:], digestWithout(line, at, end).String())
	return append(line, '\n'), nil
}

// digestWithout is the SHA-256 of a line without line[from:to].
func digestWithout(line []byte, from, to int) publish.Digest {
	h := sha256.New()
	h.Write(line[:from])
	h.Write(line[to:])
	return publish.Digest(h.Sum(nil))
}

// selfMember finds the member "self" of the outermost object: line[from:to] is
// what its absence takes away, the comma included, and its digest begins at hex.
func selfMember(line []byte) (from, hex, to int, err error) {
	const digits = 2 * len(publish.Digest{})
	from = findSelf(line)
	if from < 0 {
		return 0, 0, 0, errors.New(`no digest "self" in it`)
	}
	hex = from + len(selfKey)
	to = hex + digits + 1 // behind the closing quote
	if to >= len(line) || line[to-1] != '"' {
		return 0, 0, 0, errors.New(`no digest "self" in it`)
	}
	switch { // the comma that goes with the member
	case line[to] == ',':
		to++
	case line[to] == '}' && line[from-1] == ',':
		from--
	default:
		return 0, 0, 0, errors.New(`"self" is not a member of it`)
	}
	return from, hex, to, nil
}

// findSelf returns where the key "self" of the outermost object begins, or -1.
func findSelf(line []byte) int {
	depth := 0
	for i := 0; i < len(line); i++ {
		switch line[i] {
		case '{', '[':
			depth++
		case '}', ']':
			depth--
		case '"':
			if depth == 1 && bytes.HasPrefix(line[i:], []byte(selfKey)) && (line[i-1] == ',' || line[i-1] == '{') {
				return i
			}
			for i++; i < len(line) && line[i] != '"'; i++ {
				if line[i] == '\\' {
					i++
				}
			}
		}
	}
	return -1
}
