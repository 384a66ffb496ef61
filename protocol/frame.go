// Package protocol turns the bytes of a balance into frames and commands into bytes.
// It speaks the SBI-style text output of laboratory balances: lines of 16 or 22
// characters, right-aligned numbers, the unit field as the sign of stability.
//
// It does no I/O, knows no clock and starts no goroutine. It refuses to guess: a line
// that is damaged, cut off or not understood is never a weight, and no prefix of a
// valid line is one.
package protocol

import (
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

// Damage says why a line cannot be trusted.
type Damage uint8

// The kinds of damage.
const (
	NoDamage     Damage = iota
	NulByte             // a byte arrived with wrong parity, or the speed is wrong
	TooLong             // no terminator within the longest line
	Unterminated        // the line was cut off by silence or by the end
	Unreadable          // bytes that no balance prints
)

var damageNames = [...]string{"", "a byte was lost on the line", "longer than any line", "cut off", "unreadable bytes"}

func (d Damage) String() string { return damageNames[d] }

// Frame is one line as it was understood. Raw is valid until the decoder is fed again.
type Frame struct {
	Kind             Kind
	Raw              []byte // the bytes exactly as they came, with terminator and bit 7
	ID               string // identification code of the 22-character form, "" if none
	Unit             string // "" when the unit field is blank
	Sign             byte   // '+', '-' or 0 when no sign was sent
	Stable           bool   // the unit is shown, or the pattern says so
	Plain            bool   // may serve as a weighing: see Decoder
	UnverifiedDigits int    // digits in brackets
	InReport         bool   // the line stands inside a printed report
	Condition        Condition
	Code             string // of an Error
	Damage           Damage

	digits []byte // the number as sent, without sign and brackets, with a point
}

// Text gives the digits as sent, without sign and brackets: "123.56".
func (f *Frame) Text() string { return string(f.digits) }

// Value gives the number with its sign; it is absent when the frame is no Weight.
func (f *Frame) Value() decimal.Number {
	if f.Kind != Weight {
		return decimal.Number{}
	}
	text := string(f.digits)
	if f.Sign == '-' {
		text = "-" + text
	}
	n, err := decimal.Parse(text)
	if err != nil {
		return decimal.Number{}
	}
	return n
}

// gramShift gives the power of ten that turns a unit into grams.
var gramShift = map[string]int{"g": 0, "mg": 3, "kg": -3, "": 0}

// MassG gives the number in grams, shifting the decimal mark and no more. It is absent
// when the unit is not g, mg or kg; a blank unit is taken as grams.
func (f *Frame) MassG() decimal.Number {
	n := f.Value()
	shift, ok := gramShift[f.Unit]
	if !n.IsSet() || !ok {
		return decimal.Number{}
	}
	switch decimals := n.Decimals() + shift; {
	case shift == 0:
		return n
	case decimals >= 0 && decimals <= decimal.MaxDigits:
		return decimal.New(n.Unscaled(), decimals)
	default:
		return decimal.New(n.Unscaled()*pow10(-decimals), 0)
	}
}

func pow10(n int) int64 {
	p := int64(1)
	for range n {
		p *= 10
	}
	return p
}
