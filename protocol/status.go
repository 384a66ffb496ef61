package protocol

// Condition is what a status line says.
type Condition uint8

// The conditions.
const (
	NoCondition Condition = iota
	Overload              // H, HH, High
	Underload             // L, LL, Low
	Adjusting             // C, Cal.Ext., Cal.Int.
	Final                 // --: all digits shown, stable
)

var conditionNames = [...]string{"", "overload", "underload", "adjusting", "final"}

func (c Condition) String() string { return conditionNames[c] }

// conditions holds the words of status lines, lower case, without blanks: the letters
// of older balances (H, L, C; doubled in checkweighing) and the words of newer ones.
// Manuals print them in different columns and spell "Cal.Ext." with and without an
// inner blank: the word counts, not where it stands. Unknown words are text.
//
//	H             Stat        H         Stat        High
//	--            Stat       Cal.Ext.
var conditions = [...]struct {
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
	{"cal.ext", Adjusting},
	{"cal.int", Adjusting},
	{"--", Final},
}

func (f *Frame) parseCondition(body []byte) bool {
	var buf [longestWord]byte
	word, ok := squeeze(buf[:0], body)
	if !ok {
		return false
	}
	for i := range conditions {
		if string(word) == conditions[i].word {
			f.Kind, f.Condition = Status, conditions[i].is
			return true
		}
	}
	return false
}

const longestWord = 12

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
