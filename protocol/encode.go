package protocol

import (
	"bytes"
	"errors"
	"fmt"
	"strings"

	"tenthmark/calc/decimal"
)

// Line is what a balance is about to print: the other direction of Frame, for the
// virtual balance and for round trips.
type Line struct {
	ID         string         // of the long form, "" prints a blank code; a status always goes out as Stat
	Value      decimal.Number // absent: Status, or a blank display
	Unit       string         // "" prints a blank unit field: not at rest
	Unverified int            // the last digits that go into brackets
	LastOff    bool           // the last digit is switched off while the load moves
	Status     string         // instead of a value: "H", "High", "C", "--", "Err 53"
}

// Dialect is how a balance prints.
type Dialect struct {
	Long     bool   // 22 characters with the identification code; else 16
	Unfilled bool   // elements separated by one blank, no columns
	Comma    bool   // a comma as decimal mark
	HidePlus bool   // a blank for the plus sign
	End      string // terminator; "": CR LF
	Parity   Parity // goes into bit 7
}

// ErrDoesNotFit marks a line that has no room for what it should hold.
var ErrDoesNotFit = errors.New("does not fit the line")

// Encode appends the line in the short form of 16 characters or the long one of 22,
// terminator included. A number that does not fit nine columns is an error.
func Encode(dst []byte, l Line, long bool) ([]byte, error) {
	return Dialect{Long: long}.Append(dst, l)
}

// Append appends the line, terminator included.
func (d Dialect) Append(dst []byte, l Line) ([]byte, error) {
	start := len(dst)
	var err error
	switch {
	case !l.Value.IsSet():
		dst = d.appendStatus(dst, l.Status)
	case d.Unfilled:
		dst, err = d.appendWords(dst, l)
	default:
		dst, err = d.appendColumns(dst, l)
	}
	if err != nil {
		return dst[:start], err
	}
	return d.end(dst, start), nil
}

// end adds the terminator and puts the parity into what was appended.
func (d Dialect) end(dst []byte, start int) []byte {
	if d.End == "" {
		dst = append(dst, '\r', '\n')
	} else {
		dst = append(dst, d.End...)
	}
	if d.Parity != NoParity {
		d.Parity.Set(dst[start:])
	}
	return dst
}

func (d Dialect) appendColumns(dst []byte, l Line) ([]byte, error) {
	sign, digits, err := d.number(l)
	if err != nil {
		return dst, err
	}
	const columns = numberEnd - numberStart
	number := fmt.Sprintf("%*s ", columns, digits)
	if l.Unverified > 0 {
		number = fmt.Sprintf("%*s", columns+1, digits) // the closing bracket takes the separator's place
	}
	if len(number) > columns+1 || len(l.Unit) > unitLength || len(l.ID) > idLength {
		return dst, fmt.Errorf("encode %s %s %s: %w", l.ID, l.Value, l.Unit, ErrDoesNotFit)
	}
	if d.Long {
		dst = fmt.Appendf(dst, "%-*s", idLength, l.ID)
	}
	return fmt.Appendf(dst, "%s%s%-*s", sign, number, unitLength, l.Unit), nil
}

func (d Dialect) appendWords(dst []byte, l Line) ([]byte, error) {
	_, digits, err := d.number(l)
	if err != nil {
		return dst, err
	}
	words := []string{signOf(l.Value) + strings.TrimRight(digits, " ")}
	if d.Long && l.ID != "" {
		words = append([]string{l.ID}, words...)
	}
	if l.Unit != "" {
		words = append(words, l.Unit)
	}
	return append(dst, strings.Join(words, " ")...), nil
}

// number gives sign and digits as the display shows them.
func (d Dialect) number(l Line) (sign, digits string, err error) {
	digits = strings.TrimPrefix(l.Value.String(), "-")
	if d.Comma {
		digits = strings.Replace(digits, ".", ",", 1)
	}
	if l.LastOff {
		digits = digits[:len(digits)-1] + " "
	}
	if n := l.Unverified; n > 0 {
		cut := len(digits) - n
		if cut < 1 || strings.ContainsAny(digits[cut:], "., ") {
			return "", "", fmt.Errorf("encode %s with %d digits in brackets: %w", l.Value, n, ErrDoesNotFit)
		}
		digits = digits[:cut] + "[" + digits[cut:] + "]"
	}
	sign = signOf(l.Value)
	if sign == "+" && d.HidePlus {
		sign = " "
	}
	return sign, digits, nil
}

func signOf(n decimal.Number) string {
	if strings.HasPrefix(n.String(), "-") {
		return "-"
	}
	return "+"
}

// appendStatus appends a status or a blank display. The columns are those of the
// printed grids, which differ between the short and the long form.
func (d Dialect) appendStatus(dst []byte, word string) []byte {
	start := len(dst)
	if d.Long || d.Unfilled {
		dst = append(dst, "Stat"...)
	}
	if d.Unfilled {
		return append(append(dst, ' '), word...)
	}
	if d.Long {
		dst = append(dst, "  "...)
	}
	dst = append(append(dst, strings.Repeat(" ", statusColumn(word))...), word...)
	for len(dst)-start < d.width() {
		dst = append(dst, ' ')
	}
	return dst
}

func statusColumn(word string) int {
	switch word = strings.ToUpper(word); {
	case strings.HasPrefix(word, "CAL"), strings.HasPrefix(word, "E "):
		return 5
	case strings.Contains(word, "ERR"):
		return 3
	}
	return 6
}

func (d Dialect) width() int {
	if d.Long {
		return idLength + bodyLength
	}
	return bodyLength
}

// AppendText appends a line of free form: a reply, a line of a report.
func (d Dialect) AppendText(dst []byte, text string) []byte {
	start := len(dst)
	return d.end(append(dst, text...), start)
}

// Report is a printed header or footer.
type Report struct {
	Date, Time string      // as printed, "14.01.2011" and "09:43"; "" on a balance without clock
	Labels     [][2]string // left and right: {"Type", "ABCD"}, {"Ser.no.", "12345678"}
	Signature  bool        // a footer: "Name:" and a blank line
}

// dashLine is the line that opens and closes a header or footer.
const dashLine = "-------------------"

// AppendReport appends a header or footer with its lines of dashes.
func (d Dialect) AppendReport(dst []byte, r Report) []byte {
	dst = d.AppendText(dst, dashLine)
	if r.Date != "" {
		dst = d.AppendText(dst, spread(r.Date, r.Time))
	}
	for _, l := range r.Labels {
		dst = d.AppendText(dst, spread(l[0], l[1]))
	}
	if r.Signature {
		dst = d.AppendText(d.AppendText(dst, "Name:"), "")
	}
	return d.AppendText(dst, dashLine)
}

// spread puts one text to the left and one to the right of a report line.
func spread(left, right string) string {
	gap := max(1, len(dashLine)-len(left)-len(right))
	return left + string(bytes.Repeat([]byte(" "), gap)) + right
}
