package protocol

import "fmt"

// Traffic counts what came, to tell a wrong line setting from a right one. When it has
// counted for long it halves all counts, so that a line that goes bad shows.
type Traffic struct {
	Bytes   int // all bytes
	High    int // with bit 7 set
	Marked  int // bytes of lines in which bit 7 came
	Odd     int // of these, with an odd count of ones
	Nul     int // NUL, which stands for a byte with a wrong parity
	Strange int // control characters that no balance prints
	Frames  int // lines, whole or damaged
	Read    int // lines understood as weight, status, error or blank
}

const (
	fewestBytes = 32 // below this the counts say nothing
	mostBytes   = 1 << 14
)

func (t *Traffic) fade() {
	if t.Bytes < mostBytes {
		return
	}
	for _, n := range []*int{&t.Bytes, &t.High, &t.Marked, &t.Odd, &t.Nul, &t.Strange, &t.Frames, &t.Read} {
		*n /= 2
	}
}

// Traffic gives the counts so far.
func (d *Decoder) Traffic() Traffic {
	t := d.traffic
	t.mark(d.tally)
	return t
}

// Diagnosis names a line setting that does not fit, from the recent bytes, in words
// for the person at the bench; "" when nothing looks wrong.
func (d *Decoder) Diagnosis() string {
	t := d.Traffic()
	strange := t.Nul + t.Strange
	switch {
	case t.Bytes < fewestBytes:
		return ""
	case strange*10 > t.Bytes && t.Strange == 0:
		return fmt.Sprintf("%d of %d bytes came as NUL: the balance sends with another parity than the line expects, or the speed is wrong", t.Nul, t.Bytes)
	case strange*10 > t.Bytes:
		return fmt.Sprintf("unreadable bytes (%d of %d are no text): wrong speed (baud)?", strange, t.Bytes)
	case t.High*10 <= t.Bytes:
		return ""
	}
	if p, ok := t.likelyParity(); ok {
		return fmt.Sprintf("looks like 7 data bits, %s parity", p)
	}
	return fmt.Sprintf("unreadable bytes (%d of %d have their top bit set and agree on no parity): wrong speed (baud)?", t.High, t.Bytes)
}

// mark takes the bytes of a line into account for the parity.
func (t *Traffic) mark(line tally) {
	if line.high > 0 {
		t.Marked += line.bytes
		t.Odd += line.odd
	}
}

// likelyParity allows one byte in fifty to be disturbed.
func (t Traffic) likelyParity() (Parity, bool) {
	few := t.Marked / 50
	switch {
	case t.Marked-t.Odd <= few:
		return OddParity, true
	case t.Odd <= few:
		return EvenParity, true
	case t.Marked-t.High <= few:
		return MarkParity, true
	}
	return NoParity, false
}

// Parity gives the parity that the recent bytes carry in bit 7, NoParity when they
// carry none or too few came.
func (d *Decoder) Parity() Parity {
	t := d.Traffic()
	if t.Bytes < fewestBytes || t.High*10 <= t.Bytes {
		return NoParity
	}
	p, _ := t.likelyParity()
	return p
}
