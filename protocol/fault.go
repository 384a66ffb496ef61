package protocol

import "bytes"

// parseError reads the lines by which a balance reports an error. Manuals differ in
// case, in width and in the word, and so all of these are one kind:
//
//	Stat     Err 053        ERR 53       E 053       APP.ERR     DIS.ERR     PRT.ERR
//
// The code is the digits as sent, or APP.ERR, DIS.ERR and PRT.ERR. Manuals write the
// digits as "###" and "XYZ"; these are read as if they were digits.
func (f *Frame) parseError(body []byte) bool {
	var buf [longestWord]byte
	word, ok := squeeze(buf[:0], body)
	if !ok {
		return false
	}
	for _, code := range [...]string{"APP.ERR", "DIS.ERR", "PRT.ERR"} {
		area := code[:3]
		if rest, found := cutFold(word, area); found && (string(rest) == ".err" || string(rest) == ".er") {
			f.Kind, f.Code = Error, code
			return true
		}
	}
	digits, fewest := word, 1
	if rest, found := bytes.CutPrefix(word, []byte("err")); found {
		digits = rest
	} else if rest, found := bytes.CutPrefix(word, []byte("e")); found {
		digits, fewest = rest, 2
	} else {
		return false
	}
	if len(digits) < fewest || len(digits) > 3 || !isErrorNumber(digits) {
		return false
	}
	f.Kind, f.Code = Error, string(bytes.ToUpper(digits))
	return true
}

func cutFold(word []byte, prefix string) ([]byte, bool) {
	if len(word) < len(prefix) || !bytes.EqualFold(word[:len(prefix)], []byte(prefix)) {
		return nil, false
	}
	return word[len(prefix):], true
}

func isErrorNumber(s []byte) bool {
	for _, c := range s {
		if !isDigit(c) && c != '#' {
			return string(s) == "xyz"
		}
	}
	return true
}
