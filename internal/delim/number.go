package delim

import (
	"math"
	"strconv"
)

// ParseFloat returns the float64 nearest to the number that text spells, ties
// to even. Blanks around it do not count. The syntax is that of Go's floating-
// point literals in base ten, with an optional sign, without underscores, and
// with D or d allowed in the place of E, as Fortran writes double precision.
//
// An empty text and the word nan in any case, with or without a sign, are a
// missing value: NaN and true. ok is false, and v is NaN, for text that is no
// number, for the words of infinity, and for numbers beyond the largest
// float64; a number too small for one is a zero.
//
// The short way, for up to 19 digits whose integer is exact in a float64 and
// powers of ten up to 22, needs one rounding only: Clinger 1990, "How to read
// floating point numbers accurately". strconv has the long way.
func ParseFloat(text []byte) (v float64, ok bool) {
	text = Trim(text)
	n := scanNumber(text)
	if !n.ok {
		return math.NaN(), isMissing(text)
	}
	if n.mantissa < 1<<53 && n.exact && -22 <= n.exponent && n.exponent <= 22 {
		v = float64(n.mantissa)
		if n.exponent < 0 {
			v /= powersOfTen[-n.exponent]
		} else {
			v *= powersOfTen[n.exponent]
		}
		if n.negative {
			v = -v
		}
		return v, true
	}
	return parseLong(text, n.marker)
}

// IsNumber reports whether text is a number by its syntax, in the range of
// float64 or beyond it.
func IsNumber(text []byte) bool { return scanNumber(Trim(text)).ok }

// powersOfTen are the ones that a float64 holds exactly.
var powersOfTen = [...]float64{
	1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11,
	1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22,
}

// A number is what scanNumber found: ±mantissa × 10^exponent.
type number struct {
	ok       bool
	negative bool
	exact    bool // mantissa has all digits, and exponent is small
	mantissa uint64
	exponent int
	marker   int // place of a D in the place of E, or -1
}

// scanNumber reads text as a number, and refuses what is none.
func scanNumber(text []byte) number {
	n := number{exact: true, marker: -1}
	i := 0
	if i < len(text) && (text[i] == '+' || text[i] == '-') {
		n.negative = text[i] == '-'
		i++
	}
	start := i
	for i < len(text) && text[i]-'0' <= 9 {
		n.mantissa = n.mantissa*10 + uint64(text[i]-'0')
		i++
	}
	digits := i - start
	if i < len(text) && text[i] == '.' {
		i++
		point := i
		for i < len(text) && text[i]-'0' <= 9 {
			n.mantissa = n.mantissa*10 + uint64(text[i]-'0')
			i++
		}
		n.exponent = point - i
		digits += i - point
	}
	if digits == 0 {
		return n
	}
	// Leading zeros count too: 0.000…1 with so many goes the long way.
	n.exact = digits <= 19
	if i < len(text) {
		switch text[i] {
		case 'D', 'd':
			n.marker = i
		case 'E', 'e':
		default:
			return n
		}
		e, end := scanExponent(text, i+1)
		if end != len(text) || end == i+1 {
			return n
		}
		n.exponent += e
	}
	n.ok = true
	return n
}

// scanExponent reads a signed integer at i. Without a digit, end is i.
func scanExponent(text []byte, i int) (e, end int) {
	start, negative := i, false
	if i < len(text) && (text[i] == '+' || text[i] == '-') {
		negative = text[i] == '-'
		i++
	}
	first := i
	for i < len(text) && text[i]-'0' <= 9 {
		if e < 1e6 {
			e = e*10 + int(text[i]-'0')
		}
		i++
	}
	if i == first {
		return 0, start
	}
	if negative {
		e = -e
	}
	return e, i
}

// parseLong has strconv read a number that scanNumber accepted.
func parseLong(text []byte, marker int) (float64, bool) {
	if marker >= 0 {
		text = append([]byte(nil), text...)
		text[marker] = 'e'
	}
	v, err := strconv.ParseFloat(string(text), 64)
	if err != nil { // out of range: the syntax was checked
		return math.NaN(), false
	}
	return v, true
}

// isMissing reports whether text stands for no value.
func isMissing(text []byte) bool {
	if len(text) == 4 && (text[0] == '-' || text[0] == '+') {
		text = text[1:]
	}
	return len(text) == 0 || len(text) == 3 && text[0]|0x20 == 'n' && text[1]|0x20 == 'a' && text[2]|0x20 == 'n'
}
