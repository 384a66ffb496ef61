package protocol

// Options of a decoder. The zero value suits an SBI-style line.
type Options struct {
	Pattern *Pattern // for balances that print something else
	MaxLine int      // longest line in bytes without terminator; 0: 64
}

const usualMaxLine = 64

// Decoder cuts bytes into lines and understands them. It may be fed in any portions:
// the same bytes give the same frames.
type Decoder struct {
	opt      Options
	raw      []byte // the present line, as it came
	line     []byte // the same with bit 7 stripped and flow control dropped
	damage   Damage
	skipping bool // until the next terminator: what came before is not trusted
	afterCR  bool // the last terminator was CR: an LF now belongs to it
	report   report
	traffic  traffic
	digits   [32]byte
	frame    Frame
}

// NewDecoder gives a decoder that trusts the first byte to begin a line. Call Resync
// after opening a line that may be in the middle of one.
func NewDecoder(opt Options) *Decoder {
	if opt.MaxLine == 0 {
		opt.MaxLine = usualMaxLine
	}
	return &Decoder{opt: opt, raw: make([]byte, 0, opt.MaxLine+2), line: make([]byte, 0, opt.MaxLine+2)}
}

// Resync makes the decoder drop everything up to the next terminator: after opening,
// or when bytes may have been lost.
func (d *Decoder) Resync() {
	d.start()
	d.skipping, d.afterCR = true, false
	d.report = report{}
}

func (d *Decoder) start() {
	d.raw, d.line, d.damage = d.raw[:0], d.line[:0], NoDamage
}

// Feed takes bytes as they come. emit is called for each line; the frame is valid
// until it returns.
func (d *Decoder) Feed(chunk []byte, emit func(*Frame)) {
	for _, b := range chunk {
		d.traffic.count(b)
		d.take(b, emit)
	}
}

func (d *Decoder) take(b byte, emit func(*Frame)) {
	c := b & 0x7F
	if d.afterCR && c != '\n' {
		d.afterCR = false
		d.finish(emit)
	}
	if len(d.raw) < cap(d.raw) {
		d.raw = append(d.raw, b)
	}
	switch c {
	case '\n':
		d.afterCR = false
		d.finish(emit)
	case '\r':
		d.afterCR = true
	case 0x11, 0x13: // XON and XOFF belong to the line, not to the text
	case 0:
		d.damage = NulByte
	default:
		d.add(c)
	}
}

func (d *Decoder) add(c byte) {
	if len(d.line) >= d.opt.MaxLine {
		d.damage = TooLong
		return
	}
	if c < 0x20 || c == 0x7F {
		d.damage = max(d.damage, Unreadable)
	}
	d.line = append(d.line, c)
}

// finish hands over the line that just ended.
func (d *Decoder) finish(emit func(*Frame)) {
	if !d.skipping {
		d.understand()
		emit(&d.frame)
	}
	d.skipping = false
	d.start()
}

// Gap tells the decoder that the line fell silent. A line that ended with CR alone is
// complete; one without terminator was cut off, and what may still come of it is
// dropped.
func (d *Decoder) Gap(emit func(*Frame)) {
	if d.afterCR {
		d.afterCR = false
		d.finish(emit)
		return
	}
	if len(d.raw) == 0 || d.skipping {
		return
	}
	d.damage = Unterminated
	d.understand()
	emit(&d.frame)
	d.start()
	d.skipping = true
}

// End is Gap for a line that is over: nothing more will come.
func (d *Decoder) End(emit func(*Frame)) { d.Gap(emit) }

// understand fills the frame from the line.
func (d *Decoder) understand() {
	f := &d.frame
	*f = Frame{Raw: d.raw, digits: d.digits[:0]}
	if d.damage != NoDamage {
		f.Kind, f.Damage = Damaged, d.damage
		return
	}
	if d.opt.Pattern != nil {
		d.opt.Pattern.parse(f, d.line)
		return
	}
	parse(f, d.line)
	d.report.watch(f, d.line)
}
