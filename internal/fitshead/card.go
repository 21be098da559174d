package fitshead

import (
	"bytes"
	"errors"
	"fmt"
	"strconv"
	"strings"
)

// Places in a record (section 4.1).
const (
	keywordSize = 8
	valueAt     = 10 // behind the value indicator "= "
	fixedEnd    = 30 // where a number in fixed format ends
)

var errNoQuote = errors.New("is a string without its closing quote")

func hasValue(card []byte) bool { return card[8] == '=' && card[9] == ' ' }

func isContinue(card []byte) bool { return string(card[:keywordSize]) == "CONTINUE" }

// parseValue returns the value of a record, without blanks at its end, and
// whether it stood in quotes.
func parseValue(card []byte) (text string, quoted bool, err error) {
	rest := bytes.TrimLeft(card[valueAt:], " ")
	if len(rest) == 0 || rest[0] != '\'' {
		number, _, _ := bytes.Cut(rest, []byte{'/'})
		return string(bytes.TrimRight(number, " ")), false, nil
	}
	n := quotedLength(rest)
	if n < 0 {
		return "", true, errNoQuote
	}
	text = strings.ReplaceAll(string(rest[1:n-1]), "''", "'")
	return strings.TrimRight(text, " "), true, nil
}

// quotedLength returns the length of the string in quotes that p begins with,
// or -1 if it is not closed.
func quotedLength(p []byte) int {
	for i := 1; i < len(p); i++ {
		if p[i] != '\'' {
			continue
		}
		if i+1 == len(p) || p[i+1] != '\'' {
			return i + 1
		}
		i++
	}
	return -1
}

// commentOf returns the comment of a record that holds a number.
func commentOf(card []byte) string {
	_, comment, _ := bytes.Cut(card[valueAt:], []byte{'/'})
	return string(bytes.TrimSpace(comment))
}

func parseInt(text string) (int64, bool) {
	v, err := strconv.ParseInt(strings.TrimPrefix(text, "+"), 10, 64)
	return v, err == nil && !strings.HasPrefix(text, "+-")
}

// parseFloat reads a number, whose exponent may be marked by D (section 4.2.4).
func parseFloat(text string) (float64, bool) {
	text = strings.Map(func(c rune) rune {
		if c == 'D' || c == 'd' {
			return 'E'
		}
		return c
	}, text)
	if strings.Trim(text, "+-.0123456789eE") != "" {
		return 0, false
	}
	v, err := strconv.ParseFloat(text, 64)
	return v, err == nil
}

// appendInt appends a record with a whole number in fixed format.
func appendInt(dst []byte, key string, v int64, comment string) []byte {
	return appendCard(dst, fmt.Sprintf("%-8s= %*d", key, fixedEnd-valueAt, v), comment)
}

// appendText appends a record with a string; where that is too long, CONTINUE
// records follow (section 4.2.1.2). No pair of quotes is torn apart.
func appendText(dst []byte, key, value, comment string) []byte {
	const room = CardSize - valueAt - 2 // between the quotes
	head := fmt.Sprintf("%-8s= '", key)
	quoted := strings.ReplaceAll(value, "'", "''")
	for len(quoted) > room {
		cut := room - 1
		if strings.Count(quoted[:cut], "'")%2 == 1 {
			cut--
		}
		dst = appendCard(dst, head+quoted[:cut]+"&'", "")
		head, quoted = "CONTINUE  '", quoted[cut:]
	}
	return appendCard(dst, fmt.Sprintf("%s%-8s'", head, quoted), comment)
}

// appendCard appends a record, filled up with blanks; a comment is cut where
// the record ends, or left out where there is no room for it.
func appendCard(dst []byte, text, comment string) []byte {
	if comment != "" {
		text = fmt.Sprintf("%-*s / %s", fixedEnd, text, comment)
	}
	card := bytes.Repeat([]byte{' '}, CardSize)
	copy(card, text)
	return append(dst, card...)
}
