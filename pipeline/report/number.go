package report

import (
	"math"
	"strconv"
	"strings"

	"catenrich/internal/exact"
)

// Spaces that do not break: between groups of digits, and before a unit.
const (
	narrow = "\u202f"
	space  = "\u00a0"
)

// count is a whole number in groups of three digits.
func count(n int64) string {
	if n < 0 {
		return "−" + count(-n)
	}
	digits := strconv.FormatInt(n, 10)
	var b strings.Builder
	for i, d := range digits {
		if i > 0 && (len(digits)-i)%3 == 0 {
			b.WriteString(narrow)
		}
		b.WriteRune(d)
	}
	return b.String()
}

// change is a difference with its sign.
func change(n int64) string {
	if n > 0 {
		return "+" + count(n)
	}
	return count(n)
}

// share is n of total in per cent: a tenth, or finer where that would be zero,
// and never a round 0 or 100 that is not so.
func share(n, total int64) string {
	if total == 0 {
		return "–"
	}
	p := 100 * float64(n) / float64(total)
	switch {
	case n == 0 || n == total:
		return strconv.FormatFloat(p, 'f', 0, 64) + space + "%"
	case p < 0.001:
		return "<" + space + "0.001" + space + "%"
	case p < 0.1:
		return strconv.FormatFloat(p, 'g', 1, 64) + space + "%"
	case p > 99.9:
		return ">" + space + "99.9" + space + "%"
	}
	return strconv.FormatFloat(p, 'f', 1, 64) + space + "%"
}

// number is v to so many significant digits, as a word where it is none.
func number(v float64, digits int) string {
	switch {
	case math.IsNaN(v):
		return "none"
	case math.IsInf(v, 0):
		return "infinite"
	case v == 0:
		return "0"
	}
	size := math.Abs(v)
	if size < 1e-3 || size >= 1e6 {
		text := strconv.FormatFloat(v, 'e', digits-1, 64)
		mantissa, exponent, _ := strings.Cut(text, "e")
		if strings.Contains(mantissa, ".") {
			mantissa = strings.TrimRight(strings.TrimRight(mantissa, "0"), ".")
		}
		return strings.Replace(mantissa, "-", "−", 1) + "×10" + superscript(strings.TrimPrefix(strings.Replace(exponent, "+", "", 1), "0"))
	}
	whole := 1
	for limit := 10.0; size >= limit; limit *= 10 {
		whole++
	}
	for limit := 1.0; size < limit; limit /= 10 {
		whole--
	}
	return fixed(v, max(digits-whole, 0))
}

// plain is a number of the settings, as short as it can be written.
func plain(v float64) string {
	return strings.Replace(strconv.FormatFloat(v, 'g', -1, 64), "-", "−", 1)
}

// fixed is v to so many decimal places, with grouped digits and a real minus.
func fixed(v float64, places int) string {
	text := strconv.FormatFloat(math.Abs(v), 'f', places, 64)
	whole, rest, point := strings.Cut(text, ".")
	n, err := strconv.ParseInt(whole, 10, 64)
	if err != nil {
		return text
	}
	text = count(n)
	if point {
		text += "." + rest
	}
	if v < 0 && strings.Trim(text, "0.") != "" {
		text = "−" + text
	}
	return text
}

// signed is fixed with a sign in any case.
func signed(v float64, places int) string {
	if v > 0 {
		return "+" + fixed(v, places)
	}
	return fixed(v, places)
}

// power is 10 to the whole number k, as tick labels have it.
func power(k int) string {
	if k >= -3 && k <= 3 {
		return strconv.FormatFloat(exact.Exp10(float64(k)), 'f', max(-k, 0), 64)
	}
	return "10" + superscript(strconv.Itoa(k))
}

func superscript(digits string) string {
	return strings.NewReplacer("-0", "⁻", "-", "⁻", "0", "⁰", "1", "¹", "2", "²", "3", "³", "4", "⁴", "5", "⁵", "6", "⁶", "7", "⁷", "8", "⁸", "9", "⁹").Replace(digits)
}

// plural is "1 file" or "3 files".
func plural(n int64, word string) string {
	if n == 1 {
		return "1" + space + word
	}
	return count(n) + space + word + "s"
}
