// Package number reads numbers as small text files hold them: Go's float
// syntax plus a D exponent, as Fortran writes it; no hexadecimal, no
// underscores, and no words for infinity or not-a-number.
package number

import "strconv"

// Parse reads one number without blanks around it. ok is false for anything
// else, for text longer than 64 bytes, and for a number that overflows.
// It does not allocate.
func Parse(text []byte) (v float64, ok bool) {
	var buf [64]byte
	n := copy(buf[:], text)
	if n != len(text) {
		return 0, false
	}
	for i, c := range buf[:n] {
		switch c {
		case 'd', 'D':
			buf[i] = 'e'
		case '+', '-', '.', 'e', 'E', '0', '1', '2', '3', '4', '5', '6', '7', '8', '9':
		default:
			return 0, false
		}
	}
	v, err := strconv.ParseFloat(string(buf[:n]), 64)
	return v, err == nil
}
