package protocol

import "bytes"

// The unit field holds up to three characters, left-aligned. Blank means "stability
// not shown": not at rest, or a balance that never sends a unit. "!" marks a
// calculated value, which is no weight.
//
// Only g, mg and kg serve as weighings: they shift to grams exactly by moving the
// decimal mark. The other units of mass are understood and shown, and refused as
// weighings, because a converted number is no longer the number that was sent.

// gramShift gives by how many decimals a unit moves the mark on the way to grams.
func gramShift(unit string) (shift int, ok bool) {
	switch unit {
	case "g", "":
		return 0, true
	case "mg":
		return 3, true
	case "kg":
		return -3, true
	}
	return 0, false
}

const unitLength = 3

// isUnit accepts up to three letters or signs that stand in a unit field.
func isUnit(u []byte) bool {
	if len(u) > unitLength {
		return false
	}
	for _, c := range u {
		if !isLetter(c) && c != '%' && c != '/' && c != '!' {
			return false
		}
	}
	return true
}

// setUnit takes a unit without the blanks around it.
func (f *Frame) setUnit(u []byte) {
	f.Unit = intern(u)
	f.Stable = f.Unit != "" && f.Unit != "!"
}

// isIdentification says whether the first six columns can be an identification code:
// blank, or letters, digits and the signs that occur in codes ("G#", "*N", "W10%",
// "Tot.cp", "L ID"), beginning with a letter or an asterisk. The remnant of a broken
// number can therefore never be taken for a code.
func isIdentification(id []byte) bool {
	id = bytes.Trim(id, " ")
	if len(id) == 0 {
		return true
	}
	if !isLetter(id[0]) && id[0] != '*' {
		return false
	}
	for _, c := range id {
		if !isLetter(c) && !isDigit(c) && bytes.IndexByte([]byte(".#*%-/ "), c) < 0 {
			return false
		}
	}
	return true
}

// isPlainID: net, net with application tare, gross, or no code at all.
func isPlainID(id string) bool {
	switch id {
	case "", "N", "N1", "G#":
		return true
	}
	return false
}

func isSign(c byte) bool   { return c == '+' || c == '-' }
func isDigit(c byte) bool  { return c >= '0' && c <= '9' }
func isLetter(c byte) bool { return c >= 'A' && c <= 'Z' || c >= 'a' && c <= 'z' }
