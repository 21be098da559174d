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
	at := findSelf(line)
	if at < 0 {
		return self, nil, errors.New(`no digest "self" in it`)
	}
	hex := at + len(selfKey)
	end := hex + 2*len(self) + 1 // behind the closing quote
	if end >= len(line) || line[end-1] != '"' {
		return self, nil, errors.New(`no digest "self" in it`)
	}
	if err := self.UnmarshalText(line[hex : end-1]); err != nil {
		return self, nil, fmt.Errorf(`no digest "self" in it: %w`, err)
	}
	switch { // the comma that goes with the member
	case line[end] == ',':
		end++
	case line[end] == '}' && line[at-1] == ',':
		at--
	default:
		return self, nil, errors.New(`"self" is not a member of it`)
	}
	h := sha256.New()
	h.Write(line[:at])
	h.Write(line[end:])
	if got := publish.Digest(h.Sum(nil)); got != self {
		return self, nil, fmt.Errorf(`it has the digest %v, not %v as "self" says`, got, self)
	}
	return self, line, nil
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
