package protocol

import (
	"encoding/binary"
	"math/bits"
)

// usual is the short way for what nearly always comes: a filled line with one of the
// commonest codes and units, a decimal point, and a number of at most eight columns.
// It looks at every byte, so that nothing else needs to. Whatever it declines takes the
// long way, which gives the same.
func (f *Frame) usual(line []byte) bool {
	f.ID = ""
	if len(line) == idLength+bodyLength {
		switch string(line[:idLength]) {
		case "N     ":
			f.ID = "N"
		case "G#    ":
			f.ID = "G#"
		default:
			return false
		}
		line = line[idLength:]
	}
	if len(line) != bodyLength || !isSign(line[0]) || !f.usualNumber(line) {
		return false
	}
	f.Sign, f.Plain, f.Stable = line[0], true, true
	switch string(line[unitStart:]) {
	case "g  ":
		f.Unit = "g"
	case "mg ":
		f.Unit = "mg"
	case "   ":
		f.Unit, f.Stable = "", false
	default:
		return false
	}
	return true
}

// usualNumber reads a number of eight columns, or one of seven and a digit in brackets.
func (f *Frame) usualNumber(body []byte) bool {
	const open = numberEnd - 2
	switch {
	case body[numberEnd] == ' ' && body[numberStart] == ' ':
		blanks := leadingBlanks(binary.LittleEndian.Uint64(body[numberStart+1:]))
		if blanks < 0 {
			return false
		}
		f.digits, f.UnverifiedDigits = body[numberStart+1+blanks:numberEnd], 0
		return true
	case body[numberEnd] == ']' && body[open] == '[' && isDigit(body[open+1]):
		blanks := leadingBlanks(binary.LittleEndian.Uint64(body)&^0xFF | ' ') // a blank for the sign
		if blanks < 0 {
			return false
		}
		f.digits = append(append(f.store[:0], body[blanks:open]...), body[open+1])
		f.UnverifiedDigits = 1
		return true
	}
	return false
}

// leadingBlanks looks at eight characters at once, the first of them in the lowest
// byte. When they are blanks and then digits with at most one point, flush right, it
// gives the count of blanks, else -1.
//
// All bytes below 0x80: adding 0x7F to a byte sets its top bit unless it is zero, adding
// 0x76 sets it unless it is less than ten, and nothing carries into the next byte.
func leadingBlanks(x uint64) int {
	const (
		ones = 0x0101010101010101
		tops = 0x80 * ones
	)
	if x&tops != 0 {
		return -1
	}
	blank := ^((x ^ ' '*ones) + 0x7F*ones) & tops
	point := ^((x ^ '.'*ones) + 0x7F*ones) & tops
	other := ((x ^ '0'*ones) + 0x76*ones) & tops // no digit
	n := bits.TrailingZeros64(^blank&tops) / 8
	flush := blank>>(8*uint(n)) == 0 // no blank after the first digit
	if n == 8 || !flush || other != blank|point || point&(point-1) != 0 || n == 7 && point != 0 {
		return -1
	}
	return n
}
