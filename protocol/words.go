package protocol

import "bytes"

// Lines that are not filled with blanks are read by words. Balances that print at full
// length separate the elements by one blank and add none at the end:
//
//	N +123.56 g     + 123.56 g     +123.5[6] g
//
// The sign must be there, because dates and replies begin with digits too, and two
// blanks in a row are none of this form: such a line has columns, and when they do not
// fit, a character was lost.
func (f *Frame) words(line []byte) bool {
	if len(line) == 0 || line[0] == ' ' || bytes.Contains(line, []byte("  ")) {
		return false
	}
	id, body, ok := cutAtSign(line)
	if !ok {
		return false
	}
	f.Sign = body[0]
	body = bytes.TrimPrefix(body[1:], []byte(" "))
	n := f.readNumber(body)
	if n == 0 {
		return false
	}
	unit := bytes.TrimPrefix(body[n:], []byte(" "))
	if !isUnit(unit) {
		return false
	}
	f.Kind, f.ID = Weight, intern(bytes.Trim(id, " "))
	f.setUnit(unit)
	return true
}

// cutAtSign cuts a line before the sign of its number. Codes may hold a hyphen
// ("x-Net"), numbers hold no sign: the last one counts. A blank stands before the
// sign, or else "AB12-3", a model, would be a number.
func cutAtSign(line []byte) (id, body []byte, ok bool) {
	at := bytes.LastIndexAny(line, "+-")
	if at < 0 || len(bytes.Trim(line[:at], " ")) > idLength || !isIdentification(line[:at]) {
		return nil, nil, false
	}
	if at > 0 && line[at-1] != ' ' {
		return nil, nil, false
	}
	return line[:at], line[at:], true
}

// loosely reads what looks like a weight but fits neither columns nor words. With a
// code that is never a weighing (report lines have other widths) it is data. With a
// plain code a character was lost or added, and the number cannot be trusted.
func (f *Frame) loosely(line []byte) bool {
	id, body, ok := cutAtSign(line)
	if !ok {
		return false
	}
	sign := body[0]
	body = bytes.TrimLeft(body[1:], " ")
	n := f.readNumber(body)
	if n == 0 {
		return false
	}
	unit := bytes.Trim(body[n:], " ")
	if bytes.HasPrefix(unit, []byte("*")) {
		unit = unit[1:]
	}
	if !isUnit(unit) {
		return false
	}
	code := intern(bytes.Trim(id, " "))
	if isPlainID(code) {
		f.noNumber()
		f.Kind, f.Damage = Damaged, Misaligned
		return true
	}
	f.Kind, f.ID, f.Sign = Weight, code, sign
	f.setUnit(unit)
	return true
}
