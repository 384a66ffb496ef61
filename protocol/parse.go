package protocol

import "bytes"

// parse understands one undamaged line. Columns come first because they are the
// strongest evidence; then what is not filled with blanks; then words that a balance
// shows instead of a number.
func parse(f *Frame) {
	line := f.line
	f.noNumber()
	if isStatus(line) && f.parseSpecial(line) {
		return
	}
	if f.parseWeight(line) {
		f.Plain = f.Kind == Weight && isPlainID(f.ID) && isGrams(f.Unit)
		return
	}
	f.noNumber()
	f.parseSpecial(line)
}

const statusCode = "Stat"

// isStatus: the line has the code of a status.
func isStatus(line []byte) bool {
	return len(line) >= len(statusCode) && string(line[:len(statusCode)]) == statusCode &&
		(len(line) == len(statusCode) || line[len(statusCode)] == ' ')
}

// parseSpecial understands lines that hold no weight; false says that it is but text.
func (f *Frame) parseSpecial(line []byte) bool {
	line = bytes.TrimSpace(line)
	if isStatus(line) {
		line = bytes.TrimLeft(line[len(statusCode):], " ")
	}
	switch {
	case len(line) == 0:
		f.Kind = Blank
	case f.parseCondition(line), f.parseError(line):
	default:
		f.Kind = Text
		return false
	}
	return true
}

func (f *Frame) parseWeight(line []byte) bool {
	if len(line) <= bodyLength && f.columns(line) {
		return true
	}
	if len(line) > idLength && f.columns(line[idLength:]) {
		if id := line[:idLength]; string(id) == "N     " {
			f.ID = "N"
			return true
		} else if isIdentification(id) {
			f.ID = intern(bytes.Trim(id, " "))
			return true
		}
		f.noNumber()
	}
	// a short line filled up to the width of the long one
	if len(line) == idLength+bodyLength && isSign(line[0]) && isBlank(line[bodyLength:]) && f.columns(line[:bodyLength]) {
		return true
	}
	return f.words(line) || f.loosely(line)
}

func isGrams(unit string) bool {
	_, ok := gramShift(unit)
	return ok
}
