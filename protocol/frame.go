// Package protocol turns the bytes of a balance into frames and commands into bytes.
// It speaks the SBI-style text output of laboratory balances: lines of 16 or 22
// characters, right-aligned numbers, the unit field as the sign of stability.
//
// It does no I/O, knows no clock and starts no goroutine. It refuses to guess: a line
// that is damaged, cut off or not understood is never a weight, no prefix of a valid
// line is one, and nothing inside a printed report is one.
//
// The forms are those of the interface chapters of balance operating manuals. Where
// manuals disagree, the comment beside the form says what is accepted.
package protocol

import (
	"bytes"

	"tenthmark/calc/decimal"
)

// Kind says what a line was understood as.
type Kind uint8

// The kinds of frames.
const (
	Damaged Kind = iota // bytes were lost or changed: see Frame.Damage
	Weight              // a number, with ID and unit as far as they were sent
	Status              // overload, underload, adjusting or final readout
	Error               // the balance reports an error code
	Blank               // an empty display
	Text                // everything else: report lines, dates, replies
)

var kindNames = [...]string{"damaged", "weight", "status", "error", "blank", "text"}

func (k Kind) String() string { return kindNames[k] }

// Damage says why a line cannot be trusted.
type Damage uint8

// The kinds of damage.
const (
	NoDamage     Damage = iota
	NulByte             // a NUL: a byte came with wrong parity, or the speed is wrong
	TooLong             // no terminator within the longest line
	Unterminated        // cut off by silence or by the end
	Unreadable          // control characters, which no balance prints
	WrongParity         // a byte with another parity than all others on this line
	Misaligned          // a weight whose columns do not fit: a character was lost or added
)

var damageNames = [...]string{"", "nul byte", "too long", "unterminated", "unreadable", "wrong parity", "misaligned"}

func (d Damage) String() string { return damageNames[d] }

// Frame is one line as it was understood. It and its Raw are valid until emit returns;
// what is to be kept must be copied.
type Frame struct {
	Kind             Kind
	Raw              []byte // the bytes exactly as they came, with terminator and bit 7
	Dropped          int    // bytes of an endless line beyond what Raw holds
	ID               string // identification code of the 22-character form, "" if none
	Unit             string // "" when the unit field is blank
	Sign             byte   // '+', '-' or 0 when no sign was sent
	Stable           bool   // the unit is shown, or the pattern says so
	Plain            bool   // may serve as a weighing: net, gross or no ID; g, mg, kg or blank unit; outside reports
	UnverifiedDigits int    // digits in brackets
	InReport         bool   // the line stands inside a printed report
	Reply            bool   // the line answers the question announced by Expect
	Condition        Condition
	Code             string // of an Error
	Damage           Damage

	line   []byte // the line without terminator, bit 7 and flow control
	digits []byte // the number as sent, without sign and brackets, with a point
	store  []byte // room for digits that cannot stay where they are in line
}

// begin empties the frame for another line, all but the number, which whoever reads
// the line sets or takes back. Field by field is several times as fast here as one
// assignment of the whole.
func (f *Frame) begin(raw, line []byte) {
	f.Kind, f.Raw, f.Dropped, f.InReport, f.Reply = Damaged, raw, 0, false, false
	f.Condition, f.Damage, f.line = NoCondition, NoDamage, line
	if f.Code != "" {
		f.Code = ""
	}
}

// noNumber takes back what was read of a number that turned out to be none.
func (f *Frame) noNumber() {
	f.ID, f.Unit, f.Sign, f.Stable, f.Plain, f.UnverifiedDigits, f.digits = "", "", 0, false, false, 0, nil
}

// Text gives the digits as sent, without sign and brackets and with a decimal point:
// "123.56"; "" when the frame is no Weight.
func (f *Frame) Text() string { return string(f.digits) }

// Content gives the text of the line without terminator and surrounding blanks.
func (f *Frame) Content() string { return string(bytes.TrimSpace(f.line)) }

// Value gives the number with its sign, every decimal kept; it is absent when the
// frame is no Weight.
func (f *Frame) Value() decimal.Number {
	if f.Kind != Weight {
		return decimal.Number{}
	}
	var buf [2 + decimal.MaxDigits]byte
	text := buf[:0]
	if f.Sign == '-' {
		text = append(text, '-')
	}
	n, err := decimal.Parse(string(append(text, f.digits...)))
	if err != nil {
		return decimal.Number{}
	}
	return n
}

// MassG gives the number in grams, shifting the decimal mark and no more. It is absent
// when the unit is not g, mg or kg; a blank unit is taken as grams.
func (f *Frame) MassG() decimal.Number {
	n := f.Value()
	shift, ok := gramShift(f.Unit)
	if !n.IsSet() || !ok || shift == 0 {
		if !ok {
			return decimal.Number{}
		}
		return n
	}
	return shifted(n.Unscaled(), n.Decimals()+shift)
}

// shifted gives unscaled × 10^-decimals, absent when that cannot be held.
func shifted(unscaled int64, decimals int) decimal.Number {
	const most = 999_999_999_999_999_999 / 10
	for ; decimals < 0; decimals++ {
		if unscaled > most || unscaled < -most {
			return decimal.Number{}
		}
		unscaled *= 10
	}
	if decimals > decimal.MaxDigits {
		return decimal.Number{}
	}
	return decimal.New(unscaled, decimals)
}
