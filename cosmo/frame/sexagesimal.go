package frame

import (
	"math"

	"catenrich/internal/number"
)

// RightAscension reads a right ascension from text and returns it in degrees:
// hours, minutes and seconds ("08:27:05.07", "8 27 05", "08h27m05.07s"), or, if
// there is only one number, decimal degrees. ok is false unless the text is
// one of these and 0 ≤ hours < 24, or 0 ≤ degrees ≤ 360.
func RightAscension(text []byte) (deg float64, ok bool) {
	p, ok := parseAngle(text, "hms")
	if !ok {
		return 0, false
	}
	if p.fields == 1 {
		return p.value, p.value >= 0 && p.value <= 360
	}
	if p.negative || p.whole >= 24 {
		return 0, false
	}
	return p.seconds() / 240, true
}

// Declination reads a declination from text and returns it in degrees:
// degrees, minutes and seconds ("+15:58:32.9", "-0 32 01", "+15d58m32.9s"), or, if
// there is only one number, decimal degrees. The sign of "-00:12:00" counts.
// ok is false unless the text is one of these and between -90 and 90.
func Declination(text []byte) (deg float64, ok bool) {
	p, ok := parseAngle(text, "dms")
	if !ok {
		return 0, false
	}
	deg = p.value
	if p.fields > 1 {
		deg = p.seconds() / 3600
		if p.negative {
			deg = -deg
		}
	}
	return deg, deg >= -90 && deg <= 90
}

// Sexagesimal fills ra and dec, in degrees, from text; what cannot be read
// becomes NaN, to which [Directions] gives its status bit.
func Sexagesimal(ra, dec []float64, raText, decText [][]byte) {
	raText, dec, decText = raText[:len(ra)], dec[:len(ra)], decText[:len(ra)]
	for i := range ra {
		var ok bool
		if ra[i], ok = RightAscension(raText[i]); !ok {
			ra[i] = math.NaN()
		}
		if dec[i], ok = Declination(decText[i]); !ok {
			dec[i] = math.NaN()
		}
	}
}

// An angle is what stands in a sexagesimal field. With one field only value is
// set, sign included; else whole, minutes and secs, without the sign.
type angle struct {
	negative       bool
	fields         int
	whole, minutes int
	secs, value    float64
}

// seconds returns the angle in its own seconds; whole units and minutes are
// joined as integers, so there is one rounding.
func (p *angle) seconds() float64 {
	return float64(3600*p.whole+60*p.minutes) + p.secs
}

// parseAngle reads one number, or two or three that are separated by colons,
// by blanks, or by the letters of units. Minutes and seconds are below 60.
func parseAngle(text []byte, units string) (p angle, ok bool) {
	text = trim(text)
	if len(text) == 0 || len(text) > 64 {
		return p, false
	}
	if !hasSeparator(text, units) {
		p.fields = 1
		p.value, ok = number.Parse(text)
		return p, ok
	}
	if text[0] == '+' || text[0] == '-' {
		p.negative = text[0] == '-'
		text = text[1:]
	}
	var separator byte
	for len(text) > 0 {
		n := 0
		for n < len(text) && (isDigit(text[n]) || text[n] == '.') {
			n++
		}
		if n == 0 || p.fields == 3 || !p.add(text[:n]) {
			return p, false
		}
		text = text[n:]
		if len(text) == 0 {
			break
		}
		if text, ok = p.skip(text, units, &separator); !ok {
			return p, false
		}
	}
	return p, p.fields > 1
}

// add takes the next field: whole units, minutes, then seconds. The last of
// them may have decimals, which for minutes move into the seconds.
func (p *angle) add(digits []byte) bool {
	v, ok := number.Parse(digits)
	if !ok || p.secs != 0 || p.fields > 0 && v >= 60 || v > 360 {
		return false
	}
	whole := math.Floor(v)
	switch p.fields {
	case 0:
		if whole != v {
			return false
		}
		p.whole = int(whole)
	case 1:
		p.minutes, p.secs = int(whole), float64((v-whole)*60)
	case 2:
		p.secs = v
	}
	p.fields++
	return true
}

// skip steps over the separator after a field. One text uses one kind: all
// colons, all blanks, or the unit letters in their order, the last of which
// may end the text.
func (p *angle) skip(text []byte, units string, separator *byte) (rest []byte, ok bool) {
	c, kind := lower(text[0]), lower(text[0])
	if c == units[p.fields-1] {
		kind = 'u'
	} else if c != ':' && c != ' ' {
		return nil, false
	}
	if *separator != 0 && *separator != kind {
		return nil, false
	}
	*separator = kind
	rest = trim(text[1:])
	return rest, len(rest) > 0 || kind == 'u'
}

// hasSeparator tells sexagesimal text from one number. A "d" between digits
// without an "m" after it is a decimal exponent, as Fortran writes it.
func hasSeparator(text []byte, units string) bool {
	for _, c := range text {
		if c == ':' || c == ' ' || lower(c) == units[1] || units[0] == 'h' && lower(c) == 'h' {
			return true
		}
	}
	return false
}

func isDigit(c byte) bool { return c >= '0' && c <= '9' }

func lower(c byte) byte {
	if c >= 'A' && c <= 'Z' {
		c += 'a' - 'A'
	}
	return c
}

// trim cuts blanks and tabs at both ends.
func trim(b []byte) []byte {
	for len(b) > 0 && (b[0] == ' ' || b[0] == '\t') {
		b = b[1:]
	}
	for len(b) > 0 && (b[len(b)-1] == ' ' || b[len(b)-1] == '\t') {
		b = b[:len(b)-1]
	}
	return b
}
