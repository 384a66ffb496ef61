package protocol

import "tenthmark/calc/decimal"

// Options of a decoder. The zero value suits an SBI-style line.
type Options struct {
	Pattern *Pattern // for balances that print something else
	MaxLine int      // longest line in bytes without terminator; 0: 64
}

const (
	usualMaxLine = 64
	mostRaw      = 4096 // of an endless line, Frame.Raw keeps the first bytes
)

// Decoder cuts bytes into lines and understands them. It may be fed in any portions:
// the same bytes give the same frames.
//
// A line ends with CR LF, or with one of the two when the other is missing. The end by
// CR alone shows only when the next byte comes, or by Gap.
type Decoder struct {
	opt     Options
	raw     []byte // the present line, as it came
	line    []byte // the same with bit 7 stripped and flow control dropped
	dropped int
	damage  Damage
	tally   tally

	skipping bool // until the next terminator: what comes before is not trusted
	untold   bool // skipping since Resync, and nothing came yet
	afterCR  bool // a CR came: the line is over unless an LF follows
	bareLF   bool // the last terminator was LF alone: a CR now belongs to it
	expected int  // replies still to come

	parity  parityWatch
	report  report
	traffic Traffic
	frame   Frame
}

// NewDecoder gives a decoder that trusts the first byte to begin a line. Call Resync
// after opening a line that may be in the middle of one.
func NewDecoder(opt Options) *Decoder {
	if opt.MaxLine == 0 {
		opt.MaxLine = usualMaxLine
	}
	d := &Decoder{opt: opt, raw: make([]byte, 0, opt.MaxLine+2), line: make([]byte, 0, opt.MaxLine)}
	d.frame.store = make([]byte, 0, decimal.MaxDigits+2)
	return d
}

// Resync makes the decoder drop everything up to the next terminator: after opening,
// or when bytes may have been lost. When Gap is called before any byte came, the line
// was silent, the next byte begins a line, and nothing is dropped.
func (d *Decoder) Resync() {
	d.start()
	d.skipping, d.untold, d.afterCR, d.bareLF, d.expected = true, true, false, false, 0
	d.report = report{joined: true}
}

// Expect announces that a question was asked that the balance answers with so many
// lines of free form (model, serial number, version). Until they came, or Expect(0)
// closes the window, a line that is no signed weight, no status and no error is
// taken for a reply: "0012345678" is then a serial number, never a weight.
func (d *Decoder) Expect(lines int) { d.expected = lines }

func (d *Decoder) start() {
	d.raw, d.line, d.dropped, d.damage, d.tally = d.raw[:0], d.line[:0], 0, NoDamage, tally{}
}

// Feed takes bytes as they come. emit is called for each line; the frame is valid
// until it returns.
func (d *Decoder) Feed(chunk []byte, emit func(*Frame)) {
	for len(chunk) > 0 {
		if n := d.takeLine(chunk, emit); n > 0 {
			chunk = chunk[n:]
			continue
		}
		if n := d.takeText(chunk, emit); n > 0 {
			chunk = chunk[n:]
			continue
		}
		d.takeControl(chunk[0], emit)
		chunk = chunk[1:]
	}
}

// takeText takes the printable bytes at the beginning of chunk and gives their count.
func (d *Decoder) takeText(chunk []byte, emit func(*Frame)) int {
	n, sum := 0, uint32(0)
	for ; n < len(chunk); n++ {
		c := classes[chunk[n]]
		if c&control != 0 || n == 1<<12 {
			break
		}
		sum += uint32(c)
	}
	if n == 0 {
		return 0
	}
	if d.afterCR {
		d.finish(emit, false)
	}
	text := chunk[:n]
	d.count(n, int(sum&0xFFFF), int(sum>>16))
	d.keep(text)
	room := min(n, d.opt.MaxLine-len(d.line))
	if room < n {
		d.spoil(TooLong)
	}
	at := len(d.line)
	d.line = append(d.line, text[:room]...)
	if sum&0xFFFF != 0 {
		for i := at; i < len(d.line); i++ {
			d.line[i] &= 0x7F
		}
	}
	return n
}

func (d *Decoder) takeControl(b byte, emit func(*Frame)) {
	c := b & 0x7F
	if d.afterCR && c != '\n' && c != '\r' && c != xon && c != xoff {
		d.finish(emit, false)
	}
	class := classes[b]
	if c != xon && c != xoff {
		d.count(1, int(class&1), int(class>>16&1))
	}
	d.keep1(b)
	switch c {
	case '\n':
		d.finish(emit, true)
	case '\r':
		d.afterCR = true
	case xon, xoff: // belong to the line, not to the text
	case 0:
		d.traffic.Nul++
		d.spoil(NulByte)
	default:
		d.traffic.Strange++
		d.takeStrange(c)
	}
}

// takeStrange: no balance prints control characters, but a pattern may ask for a tab
// or for the marks STX and ETX around a line.
func (d *Decoder) takeStrange(c byte) {
	const stx, etx, tab, formFeed = 2, 3, 9, 12
	framing := c == stx || c == etx || c == tab || c == formFeed
	if d.opt.Pattern == nil || !framing {
		d.spoil(Unreadable)
	}
	if len(d.line) < d.opt.MaxLine {
		d.line = append(d.line, c)
	} else {
		d.spoil(TooLong)
	}
}

func (d *Decoder) count(n, high, odd int) {
	d.untold = false
	d.tally.bytes += n
	d.tally.high += high
	d.tally.odd += odd
	d.traffic.Bytes += n
	d.traffic.High += high
}

// keep stores bytes as they came, as many as an endless line may have.
func (d *Decoder) keep(b []byte) {
	room := min(len(b), mostRaw-len(d.raw))
	d.raw = append(d.raw, b[:room]...)
	d.dropped += len(b) - room
}

func (d *Decoder) keep1(b byte) {
	if len(d.raw) < mostRaw {
		d.raw = append(d.raw, b)
	} else {
		d.dropped++
	}
}

// spoil marks the present line; the first damage is the one that is named.
func (d *Decoder) spoil(why Damage) {
	if d.damage == NoDamage {
		d.damage = why
	}
}

// finish hands over the line that just ended.
func (d *Decoder) finish(emit func(*Frame), byLF bool) {
	byCR := d.afterCR
	d.afterCR = false
	if !byLF && d.bareLF && len(d.line) == 0 && d.damage == NoDamage {
		d.bareLF = false // LF CR: this CR belonged to the line before
		return
	}
	d.bareLF = byLF && !byCR
	if !d.skipping {
		d.frameLine()
		emit(&d.frame)
	} else {
		d.traffic.mark(d.tally)
	}
	d.skipping = false
	d.start()
	d.traffic.fade()
}

// Gap tells the decoder that the line fell silent. A line that ended with CR alone is
// complete; one without terminator was cut off, is handed over as damaged, and what may
// still come of it is dropped.
func (d *Decoder) Gap(emit func(*Frame)) {
	switch {
	case d.afterCR:
		d.finish(emit, false)
	case d.untold:
		d.skipping, d.untold = false, false
	case len(d.line) == 0 && d.damage == NoDamage || d.skipping:
	default:
		d.damage = Unterminated
		d.frameLine()
		emit(&d.frame)
		d.start()
		d.skipping = true
	}
}

// End is Gap for a line that is over: nothing more will come.
func (d *Decoder) End(emit func(*Frame)) { d.Gap(emit) }

// frameLine fills the frame from the line that was gathered.
func (d *Decoder) frameLine() {
	if d.damage == NoDamage && !d.parity.line(d.tally) {
		d.damage = WrongParity
	}
	d.traffic.mark(d.tally)
	d.frame.begin(d.raw, d.line)
	d.frame.Dropped, d.frame.Damage = d.dropped, d.damage
	d.read(&d.frame)
	d.place(&d.frame)
}

// read says what a line is by itself.
func (d *Decoder) read(f *Frame) {
	switch {
	case f.Damage != NoDamage:
		f.noNumber()
	case d.opt.Pattern != nil:
		d.opt.Pattern.parse(f)
	default:
		parse(f)
	}
}

// place says what a line is where it stands: in a report, after a question.
func (d *Decoder) place(f *Frame) {
	if r := &d.report; f.Kind == Weight && !r.inside && !r.dashes {
		r.twoBefore, r.before = r.before, Weight
	} else {
		r.watch(f)
	}
	if d.expected > 0 {
		d.reply(f)
	}
	d.traffic.Frames++
	if f.Kind != Text && f.Kind != Damaged {
		d.traffic.Read++
	}
}

// reply marks the answer to a question.
func (d *Decoder) reply(f *Frame) {
	if f.InReport {
		return
	}
	bare := f.Kind == Weight && f.Sign == 0 && f.Unit == ""
	if f.Kind != Text && !bare {
		return
	}
	d.expected--
	f.Kind, f.Reply, f.Plain = Text, true, false
	f.noNumber()
}
