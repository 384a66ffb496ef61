package protocol

import (
	"fmt"
	"math/bits"
)

// traffic counts what tells a wrong line setting from a right one.
type traffic struct {
	bytes, high, odd, even, nul, strange int
}

func (t *traffic) count(b byte) {
	t.bytes++
	if b >= 0x80 {
		t.high++
	}
	if bits.OnesCount8(b)%2 == 1 {
		t.odd++
	} else {
		t.even++
	}
	switch c := b & 0x7F; {
	case c == 0:
		t.nul++
	case c < 0x20 && c != '\r' && c != '\n' && c != 0x11 && c != 0x13, c == 0x7F:
		t.strange++
	}
}

// fewestBytes: below this the counts say nothing.
const fewestBytes = 32

// Diagnosis names a line setting that does not fit, from the bytes so far; "" when
// nothing looks wrong.
func (d *Decoder) Diagnosis() string {
	t := d.traffic
	switch {
	case t.bytes < fewestBytes:
		return ""
	case (t.nul+t.strange)*10 > t.bytes:
		return fmt.Sprintf("%d of %d bytes are no text: the speed is probably wrong, or the balance sends with another parity", t.nul+t.strange, t.bytes)
	case t.high*10 <= t.bytes:
		return ""
	case t.high == t.bytes:
		return "looks like 7 data bits, mark parity"
	case t.odd == t.bytes:
		return "looks like 7 data bits, odd parity"
	case t.even == t.bytes:
		return "looks like 7 data bits, even parity"
	}
	return fmt.Sprintf("%d of %d bytes have their top bit set: parity or data bits do not fit", t.high, t.bytes)
}
