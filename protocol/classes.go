package protocol

import "math/bits"

// What a byte counts for. The low half counts bit 7, the high half odd parity, so that
// one sum over some bytes gives both; control says that it is no printable character.
const (
	control = 1 << 31
	xon     = 0x11
	xoff    = 0x13
)

var classes = func() (t [256]uint32) {
	for b := range t {
		t[b] = uint32(b >> 7)
		t[b] |= uint32(bits.OnesCount8(uint8(b))%2) << 16
		if c := b & 0x7F; c < 0x20 || c == 0x7F {
			t[b] |= control
		}
	}
	return t
}()
