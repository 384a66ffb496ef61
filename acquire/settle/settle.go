// Package settle finds the moments at which a load has come to rest on a balance's
// pan: lines with their times go in, settled weights come out.
//
// It is pure. It knows no clock (every sample brings its moment), no line and no
// logger. It invents no number: a settled weight is one of the lines that the
// balance sent, with its bytes. It refuses to decide from less than the balance
// shows: a gap, an overload or a damaged line starts the waiting anew.
//
// How a weight is taken (see Options for the sizes and the reasons):
//
//  1. The load must have moved away from the last taken weight by more than the
//     re-arm step. Without that, one load at rest would be taken again and again.
//  2. Then, for the dwell, every line must be marked stable and all of them lie
//     within the band.
//  3. What still creeps (the tail of the balance's filter) waits; what drifts evenly
//     (an open vessel that evaporates) is taken, after twice the dwell.
//  4. The weight is the latest line that shows the median of the dwell's later half:
//     one line may flicker, and the earlier half may still creep by the last digits.
package settle

import (
	"math"
	"time"

	"tenthmark/calc/decimal"
)

// Kind says what a line was, as far as settling is concerned.
type Kind uint8

// The kinds of samples.
const (
	Weight    Kind = iota // a plain weight
	Blank                 // the display is dark: taring, or between two states
	Beyond                // over- or underload: the load is surely another one
	Disturbed             // damage, an error, a report, an outage: what was seen before does not count
)

// Sample is one line of the balance. Raw may be reused by the caller afterwards.
type Sample struct {
	Kind   Kind
	MassG  decimal.Number // in g
	Unit   string         // as sent
	Stable bool           // whether the balance marked it so
	Raw    []byte
}

// Settled is a weight that was taken.
type Settled struct {
	MassG decimal.Number // g, with the digits as sent
	Unit  string         // as sent
	Raw   []byte         // the line, exactly as it came
	At    time.Duration  // when the line came, on the clock of Observe
	Taken time.Duration  // when it was decided
	Dwell Dwell
	Trace []Point // the last seconds before it was taken, oldest first
}

// Dwell sums up the lines that the decision rests on.
type Dwell struct {
	Lines   int
	Length  time.Duration // from its first to its last line
	SlopeGS float64       // straight line through it, g/s: the drift
	NoiseG  float64       // standard deviation about that line, g
	Waiting time.Duration // from the first movement of the load to the dwell's start
	Beyond  time.Duration // how much longer than the asked dwell it took
}

// Point is one weight of the trace.
type Point struct {
	At     time.Duration
	MassG  float64
	Stable bool
}

// Detector takes weights. It is made by New and belongs to one goroutine.
type Detector struct {
	opt    Options
	window window // the lines of the current dwell
	trace  trace

	haveLast bool
	lastAt   time.Duration // of the last line of any kind
	interval time.Duration // typical time between lines, 0: not known

	arm arming
	run burst
}

// New makes a detector. Options are checked by Options.Check, which New demands.
func New(opt Options) (*Detector, error) {
	if err := opt.Check(); err != nil {
		return nil, err
	}
	return &Detector{opt: opt, arm: arming{armed: true}}, nil
}

// Observe takes one line that came at the moment at (never before the last one)
// and says whether a weight is taken with it.
func (d *Detector) Observe(at time.Duration, s Sample) (Settled, bool) {
	d.keepTime(at)
	switch {
	case s.Kind != Weight || !s.MassG.IsSet():
		d.interrupt(at, s.Kind)
		return Settled{}, false
	case d.opt.Mode == Print:
		return d.observePrint(at, s)
	}
	massG := s.MassG.Float()
	d.trace.add(Point{at, massG, s.Stable})
	d.arm.observe(at, massG, s.Stable && !d.opt.NoFlag, d.opt)
	if !s.Stable && !d.opt.NoFlag {
		d.window.clear()
		return Settled{}, false
	}
	d.window.add(at, massG, s)
	d.window.shrinkToBand(d.opt.BandG, d.opt.DriftGS)
	d.window.forget(2*d.dwell(), d.opt.MinLines)
	d.arm.follow(&d.window, d.dwell())
	if !d.arm.armed || !d.ripe() {
		return Settled{}, false
	}
	return d.take(at), true
}

// Tared tells that the balance was sent the tare command: the next zero is taken, even
// if the display stood near zero before.
func (d *Detector) Tared() {
	d.arm.tared = true
	d.arm.blank()
	d.window.clear()
}

// Progress says how far the dwell has come, 0 … 1; 0 when no weight is waited for.
func (d *Detector) Progress() float64 {
	if !d.arm.armed || d.window.len() == 0 {
		return 0
	}
	return min(1, float64(d.window.length())/float64(d.dwell()))
}

// Armed says whether the next load that comes to rest is taken.
func (d *Detector) Armed() bool { return d.arm.armed }

// dwell is longer without the balance's own word that it is stable.
func (d *Detector) dwell() time.Duration {
	if d.opt.NoFlag {
		return d.opt.Dwell * 3 / 2
	}
	return d.opt.Dwell
}

// keepTime follows the rate of the lines; a gap starts the waiting anew.
func (d *Detector) keepTime(at time.Duration) {
	if d.haveLast {
		step := at - d.lastAt
		if step > d.gap() {
			d.window.clear()
			d.arm.break_()
		}
		if d.interval == 0 {
			d.interval = step
		}
		d.interval += (step - d.interval) / 8
	}
	d.haveLast, d.lastAt = true, at
}

// gap is the longest pause between two lines of one dwell.
func (d *Detector) gap() time.Duration { return max(d.opt.Gap, 3*d.interval) }

// interrupt handles what is no weight.
func (d *Detector) interrupt(at time.Duration, kind Kind) {
	d.window.clear()
	switch kind {
	case Beyond:
		d.arm.away(at)
	case Blank:
		d.arm.blank()
	}
}

// ripe says whether the window is a whole dwell of a load at rest. An even drift needs
// twice the dwell, to tell it from the long tail of a filter; so does a display that
// flickers by more than one digit up and down, because draught is slow and one dwell may lie on one
// of its waves.
func (d *Detector) ripe() bool {
	w := &d.window
	if w.len() < d.opt.MinLines || w.length() < d.dwell() {
		return false
	}
	long := w.length() >= 2*d.dwell()
	switch w.course(d.opt.DigitG) {
	case level:
		_, noise := w.line()
		return long || noise <= 0.75*d.opt.DigitG
	case drifting:
		return long
	}
	return false
}

// take makes the settled weight of the window and disarms.
func (d *Detector) take(at time.Duration) Settled {
	w := &d.window
	chosen := w.median()
	slope, noise := w.line()
	s := Settled{
		MassG: chosen.mass, Unit: chosen.unit, Raw: append([]byte(nil), chosen.raw[:chosen.rawLen]...),
		At: chosen.at, Taken: at, Trace: d.trace.since(at - traceSpan),
		Dwell: Dwell{
			Lines: w.len(), Length: w.length(), SlopeGS: slope, NoiseG: noise,
			Waiting: max(0, w.restSince-d.arm.moved), Beyond: max(0, at-w.restSince-d.dwell()),
		},
	}
	d.arm.taken(at, chosen.massG)
	w.clear()
	return s
}

// observePrint takes every stable line: somebody pressed PRINT. A balance that
// prints by itself several times a second is not pressed by anybody.
func (d *Detector) observePrint(at time.Duration, s Sample) (Settled, bool) {
	massG := s.MassG.Float()
	d.trace.add(Point{at, massG, s.Stable})
	if d.run.observe(at) || !s.Stable && !d.opt.NoFlag {
		return Settled{}, false
	}
	return Settled{
		MassG: s.MassG, Unit: s.Unit, Raw: append([]byte(nil), s.Raw...), At: at, Taken: at,
		Dwell: Dwell{Lines: 1}, Trace: d.trace.since(at - traceSpan),
	}, true
}

// Streaming says that in mode Print the lines come too fast to be pressed by hand,
// and that therefore none is taken.
func (d *Detector) Streaming() bool { return d.run.streaming }

// burst notices lines that nobody presses.
type burst struct {
	any       bool
	last      time.Duration
	quick     int
	streaming bool
}

// A hand presses PRINT at most twice a second, and not many times in a row.
const (
	handInterval = 400 * time.Millisecond
	handPresses  = 4
	quietAfter   = 3 * time.Second
)

func (b *burst) observe(at time.Duration) bool {
	step := at - b.last
	switch {
	case !b.any || step >= quietAfter:
		b.quick, b.streaming = 0, false
	case step < handInterval:
		b.quick++
	}
	b.any, b.last = true, at
	b.streaming = b.streaming || b.quick >= handPresses
	return b.streaming
}

// distance is |a − b|, which is never smaller than any step when one is no number.
func distance(a, b float64) float64 {
	if d := math.Abs(a - b); !math.IsNaN(d) {
		return d
	}
	return math.Inf(1)
}
