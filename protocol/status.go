package protocol

import "bytes"

// conditions holds the words of status lines, lower case, without blanks: the
// letters of older balances and the words of newer ones.
var conditions = []struct {
	word string
	is   Condition
}{
	{"h", Overload},
	{"hh", Overload},
	{"high", Overload},
	{"l", Underload},
	{"ll", Underload},
	{"low", Underload},
	{"c", Adjusting},
	{"cal.ext.", Adjusting},
	{"cal.int.", Adjusting},
	{"--", Final},
}

// parseStatus reads a status line. Columns differ between makes, so the word counts
// and not where it stands.
func parseStatus(f *Frame, body []byte) bool {
	if f.ID != "" && f.ID != "Stat" {
		return false
	}
	var buf [16]byte
	word, ok := squeeze(buf[:0], body)
	if !ok {
		return false
	}
	for _, c := range conditions {
		if string(word) == c.word {
			f.Kind, f.Condition = Status, c.is
			f.ID = ""
			return true
		}
	}
	return false
}

// squeeze writes s in lower case and without blanks; it gives up on longer text than
// any status word.
func squeeze(dst, s []byte) ([]byte, bool) {
	for _, c := range s {
		if c == ' ' {
			continue
		}
		if len(dst) == cap(dst) {
			return nil, false
		}
		if c >= 'A' && c <= 'Z' {
			c += 'a' - 'A'
		}
		dst = append(dst, c)
	}
	return dst, len(dst) > 0
}

// parseError reads "Err 053", "ERR 53", "E 53", "APP.ERR" and the like.
func parseError(f *Frame, body []byte) bool {
	if f.ID != "" && f.ID != "Stat" && !bytes.EqualFold([]byte(f.ID), []byte("ERR")) {
		return false
	}
	var buf [16]byte
	word, ok := squeeze(buf[:0], body)
	if !ok {
		return false
	}
	if code, ok := errorCode(word); ok {
		f.Kind, f.Code, f.ID = Error, code, ""
		return true
	}
	return false
}

func errorCode(word []byte) (string, bool) {
	for _, area := range []string{"app", "dis", "prt"} {
		if s := string(word); s == area+".err" || s == area+".er" {
			return string(bytes.ToUpper(word[:3])) + ".ERR", true
		}
	}
	rest := word
	for _, prefix := range []string{"err", "e"} {
		if cut, found := bytes.CutPrefix(word, []byte(prefix)); found {
			rest = cut
			break
		}
	}
	if len(rest) == len(word) || len(rest) < 2 || len(rest) > 3 {
		return "", false
	}
	for _, c := range rest {
		if !isDigit(c) && !bytes.ContainsRune([]byte("#xyz"), rune(c)) { // the manuals mask digits so
			return "", false
		}
	}
	return string(bytes.ToUpper(rest)), true
}
