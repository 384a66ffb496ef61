package protocol

// The columns of a body, counted from 0: a sign, nine columns for the number, flush
// right, a separator, and the unit, flush left. In the 22-character form six columns
// of identification code stand before it.
//
//   - 123.56 g      N     +   123.56 g      +  123.5[6]g
//     0123456789012     012345 0123456789012    0123456789012
//
// Accepted besides: a blank for the plus sign; the last digit switched off while the
// load moves (the number then ends one column earlier); trailing blanks that were cut
// off; the unit directly after the ninth column, as one make prints it.
//
// A character that was lost or added moves what follows it, and the columns show it:
// such a line is Misaligned, never a weight. For the same reason trailing blanks are
// all there or all cut off: "mg " that lost its m would be "g ".
const (
	idLength    = 6
	numberStart = 1
	numberEnd   = 10
	unitStart   = 11
	bodyLength  = 14
)

// columns reads a body by its columns. It leaves the frame's kind alone when they do
// not fit.
func (f *Frame) columns(body []byte) bool {
	if len(body) < numberEnd || len(body) > bodyLength {
		return false
	}
	sign := body[0]
	if !isSign(sign) && sign != ' ' {
		return false
	}
	i := numberStart
	for i < numberEnd && body[i] == ' ' {
		i++
	}
	n := f.readNumber(body[i:])
	if n == 0 {
		return false
	}
	f.Sign = sign
	if sign == ' ' {
		f.Sign = 0
	}
	unit, ok := unitColumns(body, i+n)
	if !ok || sign == ' ' && len(unit) == 0 && len(body) < bodyLength {
		return false
	}
	f.Kind = Weight
	f.setUnit(unit)
	return true
}

// unitColumns gives the unit when it and the end of the number stand where they must.
func unitColumns(body []byte, end int) (unit []byte, ok bool) {
	start := unitStart
	bracket := body[end-1] == ']'
	switch {
	case bracket != (end == unitStart):
		return nil, false // a closing bracket stands in the separator's place
	case end == numberEnd && len(body) > numberEnd && body[numberEnd] != ' ':
		start = numberEnd // no separator
	case bracket:
		if len(body) > unitStart && body[unitStart] == '*' {
			start++ // a mark that one manual prints after the bracket
		}
	case end == numberEnd:
	case end == numberEnd-1 && (len(body) >= bodyLength || len(body) > unitStart && body[unitStart] != ' '):
		if body[numberEnd-1] != ' ' || body[numberEnd] != ' ' {
			return nil, false
		}
	default:
		return nil, false
	}
	if start >= len(body) {
		return nil, len(body) == end
	}
	unit = body[start:]
	for len(unit) > 0 && unit[len(unit)-1] == ' ' {
		unit = unit[:len(unit)-1]
	}
	filled := len(body) >= start+unitLength
	return unit, isUnit(unit) && (filled || len(unit) == len(body)-start && len(unit) > 0)
}

func isBlank(s []byte) bool {
	for _, c := range s {
		if c != ' ' {
			return false
		}
	}
	return true
}
