package protocol

import (
	"bytes"
	"encoding/binary"
	"math/bits"
)

// takeLine is the short way for what nearly always comes: a whole line of printable
// seven-bit characters that ends with CR LF. It gives the line's length, 0 when the
// long way is needed; the frames are the same.
func (d *Decoder) takeLine(chunk []byte, emit func(*Frame)) int {
	if len(d.raw) > 0 || d.skipping {
		return 0
	}
	n := lineFeed(chunk, d.opt.MaxLine+2)
	if n < 8 || n > d.opt.MaxLine+1 || chunk[n-1] != '\r' {
		return 0
	}
	f, line := &d.frame, chunk[:n-1]
	usual := d.opt.Pattern == nil && f.usual(line)
	if !usual && !isPrintable(line) {
		return 0
	}
	d.untold, d.bareLF = false, false
	d.traffic.Bytes += n + 1
	if d.parity.is != NoParity {
		d.parity.line(tally{})
	}
	f.begin(chunk[:n+1], line)
	if usual {
		f.Kind = Weight
	} else {
		d.read(f)
	}
	d.place(f)
	emit(f)
	d.traffic.fade()
	return n + 1
}

// lineFeed finds the first LF, looking first where the usual lines have it: what comes
// before it is looked at anyway.
func lineFeed(chunk []byte, most int) int {
	const long, short = idLength + bodyLength + 1, bodyLength + 1
	if len(chunk) > long && chunk[long] == '\n' {
		return long
	}
	if len(chunk) > short && chunk[short] == '\n' {
		return short
	}
	return bytes.IndexByte(chunk[:min(len(chunk), most)], '\n')
}

// isPrintable says whether all bytes, seven or more of them, are 0x20 to 0x7E. It
// looks at eight at a time.
func isPrintable(s []byte) bool {
	if len(s) < 8 {
		return false
	}
	bad := uint64(0)
	for i := 0; i+8 <= len(s); i += 8 {
		bad |= notPrintable(binary.LittleEndian.Uint64(s[i:]))
	}
	return bad|notPrintable(binary.LittleEndian.Uint64(s[len(s)-8:])) == 0
}

// notPrintable is zero when all eight bytes are 0x20 to 0x7E: adding one carries 0x7F
// into bit 7, and taking 0x20 away borrows there from what is less.
func notPrintable(x uint64) uint64 {
	const ones = 0x0101010101010101
	return (x | (x + ones) | (x - 0x20*ones)) & (0x80 * ones)
}

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
