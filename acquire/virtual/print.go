package virtual

import (
	"fmt"
	"math"
	"strings"
)

// line prints the display as the balance sends it, with CR LF: sign, nine columns of
// number, a separator and three columns of unit, and in the long form a code of six
// columns before that.
func (b *Balance) line() []byte {
	if which := b.beyond(); which != 0 {
		return b.statusLine(which)
	}
	body := b.number()
	if b.opt.Form == 22 {
		body = fmt.Sprintf("%-6s", b.opt.ID) + body
	}
	return []byte(body + "\r\n")
}

// number prints the 14 columns of a value.
func (b *Balance) number() string {
	value := b.shown()
	decimals := b.opt.decimals()
	text := fmt.Sprintf("%.*f", decimals, math.Abs(roundTo(value, decimals)))
	sign := "+"
	if math.Signbit(value) && strings.Trim(text, "0.") != "" {
		sign = "-"
	} else if b.opt.Dialect.HidePlus {
		sign = " "
	}
	end := " "
	moving := !b.held
	switch {
	case moving && b.opt.Dialect.BlankLastDigit:
		text = text[:len(text)-1] + " "
	case b.opt.Dialect.Unverified > 0:
		cut := len(text) - b.opt.Dialect.Unverified
		text, end = text[:cut]+"["+text[cut:], "]"
	}
	if b.opt.Dialect.Comma {
		text = strings.Replace(text, ".", ",", 1)
	}
	unit := "g  "
	if moving || b.opt.Dialect.NeverUnit {
		unit = "   "
	}
	return fmt.Sprintf("%s%9s%s%s", sign, text, end, unit)
}

// roundTo rounds half away from zero, forgiving the last bits of binary fractions.
func roundTo(x float64, decimals int) float64 {
	scale := math.Pow10(decimals)
	return math.Round(x*scale*(1+1e-13)) / scale
}

// statusLine prints an over- or underload.
func (b *Balance) statusLine(which byte) []byte {
	if b.opt.Dialect.SilentBeyond {
		return nil
	}
	word := map[byte]string{'H': "H", 'L': "L"}[which]
	if b.opt.Dialect.Words {
		word = map[byte]string{'H': "High", 'L': "Low"}[which]
	}
	return b.special("      " + word)
}

func (b *Balance) blankLine() []byte { return b.special("") }

// special prints a status in the form of the line.
func (b *Balance) special(body string) []byte {
	text := fmt.Sprintf("%-14s", body)
	if b.opt.Form == 22 {
		text = "Stat  " + text
	}
	return []byte(text + "\r\n")
}

// report prints what a balance prints unasked after an adjustment.
func (b *Balance) report() []byte {
	dash := strings.Repeat("-", 20)
	lines := []string{
		dash, "02.12.2026     09:43", fmt.Sprintf("Type %15s", b.opt.Model), fmt.Sprintf("Ser.no.%13s", b.opt.Serial), dash,
		"Cal. Ext.", "Nom.  +  200.0000 g  ", "Diff. +    0.0003 g  ", dash, "Name:", "", dash,
	}
	return []byte(strings.Join(lines, "\r\n") + "\r\n")
}
