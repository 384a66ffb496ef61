package protocol

import (
	"fmt"
	"strings"

	"tenthmark/calc/decimal"
)

// Line is what a balance is about to print: the other direction of Frame, for the
// virtual balance and for round trips.
type Line struct {
	ID     string // "" with the long form prints a blank code
	Value  decimal.Number
	Unit   string // "" prints a blank unit field: not stable
	Status string // instead of a value: "H", "High", "C", "--", "Err 53", "" with no value is a blank display
}

// Encode appends the line in the short form of 16 characters or the long one of 22,
// terminator included. A number that does not fit nine columns is an error.
func Encode(dst []byte, l Line, long bool) ([]byte, error) {
	body := fmt.Sprintf("%-14s", "")
	id := l.ID
	switch {
	case l.Value.IsSet():
		sign, digits := "+", l.Value.String()
		if cut, negative := strings.CutPrefix(digits, "-"); negative {
			sign, digits = "-", cut
		}
		if len(digits) > 9 || len(l.Unit) > 3 {
			return dst, fmt.Errorf("encode line: %s %s does not fit", l.Value, l.Unit)
		}
		body = fmt.Sprintf("%s%9s %-3s", sign, digits, l.Unit)
	case l.Status != "":
		body = fmt.Sprintf("%-14s", strings.Repeat(" ", 6-len(l.Status)/2)+l.Status)
		id = "Stat"
	default:
		id = "Stat"
	}
	if long {
		dst = fmt.Appendf(dst, "%-6s", id)
	}
	return append(append(dst, body...), '\r', '\n'), nil
}
