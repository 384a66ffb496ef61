package protocol

import "bytes"

// parse understands one undamaged line. Columns come first because they are the
// strongest evidence; then what is not filled with blanks; then words that a balance
// shows instead of a number.
func parse(f *Frame) {
	line := f.line
	if f.parseWeight(line) {
		f.Plain = f.Kind == Weight && isPlainID(f.ID) && isGrams(f.Unit)
		return
	}
	f.noNumber()
	f.parseSpecial(line)
}

// parseSpecial understands lines that hold no weight.
func (f *Frame) parseSpecial(line []byte) {
	line = bytes.TrimSpace(line)
	if rest, found := bytes.CutPrefix(line, []byte("Stat")); found && (len(rest) == 0 || rest[0] == ' ') {
		line = bytes.TrimLeft(rest, " ")
	}
	switch {
	case len(line) == 0:
		f.Kind = Blank
	case f.parseCondition(line), f.parseError(line):
	default:
		f.Kind = Text
	}
}

func (f *Frame) parseWeight(line []byte) bool {
	if len(line) <= bodyLength && f.columns(line) {
		return true
	}
	if id := line[:min(idLength, len(line))]; len(line) > idLength && f.columns(line[idLength:]) {
		if isIdentification(id) {
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

// noNumber takes back what was read of a number that turned out to be none.
func (f *Frame) noNumber() {
	f.ID, f.Unit, f.Sign, f.Stable, f.UnverifiedDigits = "", "", 0, false, 0
	f.digits, f.unscaled, f.decimals = f.digits[:0], 0, 0
}

func isGrams(unit string) bool {
	_, ok := gramShift(unit)
	return ok
}
