package delim

import (
	"encoding/binary"
	"math"
	"math/bits"
	"slices"
	"strconv"
)

// MaxFloatLen is the most bytes that a number of [AppendFloat],
// [AppendFloat32] or [AppendDigits] takes.
const MaxFloatLen = 32

// The decimal exponents, as of scientific notation, of numbers that are
// written without one: 0.00001 to just below 1e17, which holds all distances,
// times and volumes of a catalogue in their usual units.
const (
	minPlain = -5
	maxPlain = 16
)

// AppendFloat appends the shortest decimal that reads back as v, and of those
// the one nearest to v. From 0.00001 up to 1e17 it is plain, with a point only
// where there is a fraction: 0.25, 1000, -3.5; outside it has an exponent
// without a plus sign or padding: 1.5e-7, 1e17. Zero is 0 or -0. v must be
// finite.
func AppendFloat(dst []byte, v float64) []byte {
	b := math.Float64bits(v)
	dst = slices.Grow(dst, MaxFloatLen)
	if b>>63 != 0 {
		dst = append(dst, '-')
		b &^= 1 << 63
	}
	if b == 0 {
		return append(dst, '0')
	}
	digits, exponent := shortest(b, 52, 1023)
	return appendDecimal(dst, digits, exponent)
}

// AppendFloat32 appends the shortest decimal that reads back as the float32
// nearest to v, in the form of [AppendFloat]. A finite v that a float32 would
// turn into an infinity or a zero is written as a float64: text has room.
func AppendFloat32(dst []byte, v float64) []byte {
	narrow := float32(v)
	b := uint64(math.Float32bits(narrow))
	if b&^(1<<31) == 0 || b&^(1<<31) >= 0x7f800000 {
		return AppendFloat(dst, v)
	}
	dst = slices.Grow(dst, MaxFloatLen)
	if b>>31 != 0 {
		dst = append(dst, '-')
		b &^= 1 << 31
	}
	digits, exponent := shortest(b, 23, 127)
	return appendDecimal(dst, digits, exponent)
}

// AppendDigits appends v rounded to n significant digits, half to even of its
// exact value, without trailing zeros, in the form of [AppendFloat]; or the
// shortest form if that has n digits or fewer. n is 1 to 17.
func AppendDigits(dst []byte, v float64, n int) []byte {
	// A normal float64 holds any 15 digits: with fewer, rounding finds the
	// shortest form by itself.
	if n > 15 || math.Abs(v) < 0x1p-1022 {
		at := len(dst)
		dst = AppendFloat(dst, v)
		if significant(dst[at:]) <= n {
			return dst
		}
		dst = dst[:at]
	}
	dst = slices.Grow(dst, MaxFloatLen)
	if math.Signbit(v) {
		dst = append(dst, '-')
		v = -v
	}
	if v == 0 {
		return append(dst, '0')
	}
	var room [MaxFloatLen]byte
	text := strconv.AppendFloat(room[:0], v, 'e', n-1, 64)
	return appendScientific(dst, text)
}

// appendScientific appends a number of the form d.ddde±dd in ours.
func appendScientific(dst, text []byte) []byte {
	var digits uint64
	count, i := 0, 0
	for ; text[i] != 'e'; i++ {
		if text[i] != '.' {
			digits = digits*10 + uint64(text[i]-'0')
			count++
		}
	}
	e, _ := scanExponent(text, i+1)
	return appendDecimal(dst, digits, e-count+1)
}

// significant counts the digits of a number in our form, without the zeros
// that only hold a place.
func significant(text []byte) (n int) {
	zeros := 0
	for _, c := range text {
		switch {
		case c == 'e':
			return n
		case c == '0':
			zeros++
		case '1' <= c && c <= '9':
			if n > 0 {
				n += zeros
			}
			n, zeros = n+1, 0
		}
	}
	return n
}

// appendDecimal appends digits × 10^exponent, digits above 0 and below 10^17.
// dst has room for MaxFloatLen bytes less a sign.
//
// The digits are brought to 17 by zeros at the end and made into bytes eight
// at a time, so that where they end, and where the point falls, are shifts.
func appendDecimal(dst []byte, digits uint64, exponent int) []byte {
	if digits < 1e9 { // of a float32, or next to zero
		digits *= 1e8
		exponent -= 8
	}
	for digits < 1e15 {
		digits *= 10
		exponent--
	}
	short := bit(digits < 1e16) // as often as not, so without a branch
	digits *= 1 + 9*short
	exponent += 16 - int(short) // of scientific notation
	head := digits / 1e9
	tail := digits - head*1e9
	last := tail % 10
	a, b := eightDigits(head), eightDigits(tail/10)

	count := 16 - bits.LeadingZeros64(b)/8
	if b == 0 {
		count = 8 - bits.LeadingZeros64(a)/8
	}
	if last != 0 {
		count = 17
	}
	const zeros = 0x3030303030303030
	a |= zeros
	b |= zeros

	at := len(dst)
	p := (*[MaxFloatLen - 1]byte)(dst[at : at+MaxFloatLen-1])
	switch {
	case 0 <= exponent && exponent < 8:
		// The digits before the point, the point, and the rest closed up to it.
		whole := exponent + 1
		shift := uint(8 * whole)
		binary.LittleEndian.PutUint64(p[0:], a)
		if count <= whole {
			return dst[:at+whole]
		}
		p[whole] = '.'
		rest := (*[17]byte)(p[whole+1:])
		binary.LittleEndian.PutUint64(rest[0:], a>>shift|b<<(64-shift))
		binary.LittleEndian.PutUint64(rest[8:], b>>shift|(last|'0')<<(64-shift))
		return dst[:at+count+1]
	case minPlain <= exponent && exponent < 0:
		binary.LittleEndian.PutUint64(p[0:], zeros-'0'<<8+'.'<<8) // 0.000000
		first := 1 - exponent
		rest := (*[17]byte)(p[first:])
		putDigits(rest, a, b, last)
		return dst[:at+first+count]
	case 8 <= exponent && exponent <= maxPlain:
		whole := exponent + 1
		putDigits((*[17]byte)(p[0:]), a, b, last)
		if count <= whole {
			return dst[:at+whole]
		}
		copy(p[whole+1:18], p[whole:17])
		p[whole] = '.'
		return dst[:at+count+1]
	}
	putDigits((*[17]byte)(p[1:]), a, b, last)
	p[0] = p[1]
	n := 1
	if count > 1 {
		p[1] = '.'
		n = count + 1
	}
	return strconv.AppendInt(append(dst[:at+n], 'e'), int64(exponent), 10)
}

func putDigits(p *[17]byte, a, b, last uint64) {
	binary.LittleEndian.PutUint64(p[0:], a)
	binary.LittleEndian.PutUint64(p[8:], b)
	p[16] = byte(last) | '0'
}

// eightDigits returns the eight decimal digits of x, below 10^8, one a byte,
// the first of them in the lowest byte. It halves the lanes three times: the
// multiply and shift in each is a division by 10^4, 100 and 10.
func eightDigits(x uint64) uint64 {
	high := x / 10000
	x = high | (x-high*10000)<<32
	high = (x * 10486 >> 20) & 0x0000007f_0000007f
	x = high | (x-high*100)<<16
	high = (x * 103 >> 10) & 0x000f_000f_000f_000f
	return high | (x-high*10)<<8
}

// AppendDigits32 is [AppendDigits] of the float32 nearest to v, where that is
// neither an infinity nor a zero that v is not. n is 1 to 9.
func AppendDigits32(dst []byte, v float64, n int) []byte {
	at := len(dst)
	dst = AppendFloat32(dst, v)
	if significant(dst[at:]) <= n {
		return dst
	}
	if narrow := float64(float32(v)); narrow != 0 && narrow-narrow == 0 {
		v = narrow
	}
	return AppendDigits(dst[:at], v, n)
}
