package protocol

import "bytes"

// Lengths without terminator: a body is sign, nine columns of number, a separator
// and three columns of unit; the long form has an identification code before it.
const (
	bodyLength = 14
	idLength   = 6
)

// parse understands one undamaged line: first by columns, then, for lines that are
// not padded with blanks, by words.
func parse(f *Frame, line []byte) {
	if len(bytes.TrimSpace(line)) == 0 {
		f.Kind = Blank
		return
	}
	id, body := split(line)
	f.ID = intern(id)
	switch {
	case parseStatus(f, body), parseError(f, body):
	case parseNumber(f, body, len(line)):
		f.Plain = isPlain(f)
	case f.ID == "Stat" && len(bytes.TrimSpace(body)) == 0:
		f.Kind = Blank
	default:
		f.Kind, f.ID = Text, ""
	}
}

// split takes the identification code off a line of the long form.
func split(line []byte) (id, body []byte) {
	if len(line) <= bodyLength && !hasCodeAhead(line) || len(line) < idLength {
		return nil, line
	}
	if looksLikeBody(line) {
		return nil, line
	}
	return bytes.TrimSpace(line[:idLength]), line[idLength:]
}

// hasCodeAhead: an unpadded long line can be as short as a short one, but it begins
// with a letter or a mark that no number begins with.
func hasCodeAhead(line []byte) bool {
	return len(line) > idLength && (isLetter(line[0]) || line[0] == '*') && line[idLength] != ' ' || len(line) > idLength+1 && isLetter(line[0]) && isSign(line[idLength])
}

// looksLikeBody says whether columns 1 to 10 are a sign and a right-aligned number.
func looksLikeBody(line []byte) bool {
	if len(line) < 10 || !isSign(line[0]) && line[0] != ' ' {
		return false
	}
	digits := 0
	for _, c := range line[1:10] {
		switch {
		case isDigit(c):
			digits++
		case c == ' ' || c == '.' || c == ',' || c == '[' || c == ']':
		default:
			return false
		}
	}
	return digits > 0 || len(line) <= bodyLength
}

func isSign(c byte) bool   { return c == '+' || c == '-' }
func isDigit(c byte) bool  { return c >= '0' && c <= '9' }
func isLetter(c byte) bool { return c >= 'A' && c <= 'Z' || c >= 'a' && c <= 'z' }

// parseNumber reads sign, number with optional brackets, and unit. A positive value
// without a sign counts only in a line of full length, because replies and dates
// begin with digits too.
func parseNumber(f *Frame, body []byte, lineLength int) bool {
	rest := body
	if len(rest) > 0 && isSign(rest[0]) {
		f.Sign, rest = rest[0], rest[1:]
	} else if lineLength != bodyLength && lineLength != bodyLength+idLength {
		return false
	}
	rest = bytes.TrimLeft(rest, " ")
	rest, ok := f.readDigits(rest)
	if !ok {
		return false
	}
	unit := bytes.Trim(rest, " ")
	if !isUnit(unit) {
		return false
	}
	f.Kind, f.Unit = Weight, intern(unit)
	f.Stable = f.Unit != "" && f.Unit != "!"
	return true
}

// readDigits copies the digits, turning a comma into a point and taking the brackets
// off. At most eighteen digits, one decimal mark, one pair of brackets at the end.
func (f *Frame) readDigits(s []byte) (rest []byte, ok bool) {
	marks, count, open := 0, 0, false
	for i, c := range s {
		switch {
		case isDigit(c):
			count++
			f.digits = append(f.digits, c)
			if open {
				f.UnverifiedDigits++
			}
		case (c == '.' || c == ',') && marks == 0 && !open:
			marks++
			f.digits = append(f.digits, '.')
		case c == '[' && !open:
			open = true
		case c == ']' && open && f.UnverifiedDigits > 0:
			return s[i+1:], count > 0 && count <= 18
		default:
			return s[i:], count > 0 && count <= 18 && !open
		}
	}
	return nil, count > 0 && count <= 18 && !open
}

// isUnit accepts up to three letters or the signs that stand in a unit field.
func isUnit(u []byte) bool {
	if len(u) > 3 {
		return false
	}
	for _, c := range u {
		if !isLetter(c) && c != '%' && c != '/' && c != '!' {
			return false
		}
	}
	return true
}

// isPlain: net, net with application tare, gross or no code at all, in a mass unit
// that shifts to grams exactly.
func isPlain(f *Frame) bool {
	switch f.ID {
	case "", "N", "N1", "G#":
	default:
		return false
	}
	_, known := gramShift[f.Unit]
	return known
}
