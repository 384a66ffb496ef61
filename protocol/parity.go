package protocol

import (
	"fmt"
	"math/bits"
)

// Parity is what a seven-bit balance puts into bit 7. A line that is opened with eight
// data bits receives it as part of the byte: 7-O-1 read as 8-N-1 turns LF into 0x8A.
type Parity uint8

// The parities.
const (
	NoParity Parity = iota // bit 7 is clear: eight bits, or seven and space parity
	OddParity
	EvenParity
	MarkParity // bit 7 is always set
)

var parityNames = [...]string{"no", "odd", "even", "mark"}

func (p Parity) String() string { return parityNames[p] }

// ParseParity reads odd, even, mark, none and space.
func ParseParity(s string) (Parity, error) {
	switch s {
	case "none", "space", "no":
		return NoParity, nil
	case "odd":
		return OddParity, nil
	case "even":
		return EvenParity, nil
	case "mark":
		return MarkParity, nil
	}
	return NoParity, fmt.Errorf("parity %q: want none, odd, even, mark or space", s)
}

// Set puts the parity into bit 7 of every byte: how to speak to a seven-bit balance
// over a line that is open with eight bits, and how to imitate one.
func (p Parity) Set(b []byte) {
	for i, c := range b {
		c &= 0x7F
		odd := bits.OnesCount8(c)%2 == 1
		if p == MarkParity || p == OddParity && !odd || p == EvenParity && odd {
			c |= 0x80
		}
		b[i] = c
	}
}

// tally counts, for some bytes, how many have bit 7 set and how many have an odd count
// of ones.
type tally struct{ bytes, high, odd int }

// parity recomputes what the bytes agree on; ok is false when they agree on nothing.
func (t tally) parity() (p Parity, ok bool) {
	switch {
	case t.high == 0:
		return NoParity, true
	case t.odd == t.bytes:
		return OddParity, true
	case t.odd == 0:
		return EvenParity, true
	case t.high == t.bytes:
		return MarkParity, true
	}
	return NoParity, false
}

// parityWatch knows which parity the last lines agreed on. A line of mixed parity
// after three that agreed was changed on its way.
type parityWatch struct {
	is    Parity
	lines int
}

const agreeingLines = 3

// line takes one line's tally and says whether its bytes can be trusted.
func (w *parityWatch) line(t tally) bool {
	p, ok := t.parity()
	switch {
	case !ok && w.is != NoParity && w.lines >= agreeingLines:
		return false
	case !ok:
		w.lines = 0
	case p == w.is:
		w.lines++
	default:
		w.is, w.lines = p, 1
	}
	return true
}
