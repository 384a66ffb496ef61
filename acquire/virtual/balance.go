// Package virtual is a balance without a balance: a model of a load cell that speaks
// the same lines as the real one, on a pseudo-terminal or a TCP connection. It is for
// trying tenthmark without hardware, for the demo and for tests.
//
// It is a model and no script. Hands put loads on the pan, bump the table and press
// keys; the cell follows through its filter, with noise, draught and drift; the
// balance's own stability logic blanks the unit while the value moves.
//
// Step is pure: the same seed, hands and steps give the same lines. Where a load comes
// to rest depends on the seed and on the order of the loads alone, not on the time, so
// what is taken from a balance without Flicker repeats exactly even when the timing
// of a busy computer does not: like many real balances it holds the display still
// while it declares it stable.
//
// It refuses to pass for a real instrument: its model begins with VB.
package virtual

import (
	"math"
	"sync"
	"time"
)

// Balance is a virtual balance. Its methods may be called from several goroutines.
type Balance struct {
	opt Options

	mu     sync.Mutex // over everything below
	cell   *cell
	watch  *stability
	zeroG  float64 // what counts as nothing on the pan
	tareG  float64
	heldG  float64 // the display while it is held
	held   bool
	wantT  tareKey // pressed, and done once the value is stable
	owedP  int     // lines that are to be printed once the value is stable
	auto   bool    // automatic printing is on
	told   bool    // OnChange has printed the present load
	sinceS float64 // since the last line of OnInterval
	out    []byte  // what is to be sent
	input  parser
}

type tareKey uint8

const (
	noKey tareKey = iota
	tareOnly
	zeroOnly
	tareOrZero
)

// New makes a balance that stands switched on with nothing on its pan.
func New(opt Options) (*Balance, error) {
	if err := opt.Check(); err != nil {
		return nil, err
	}
	opt = opt.withDefaults()
	b := &Balance{opt: opt, cell: newCell(opt), watch: newStability(opt), auto: opt.Output != OnRequest && opt.Output != OnRequestNow}
	b.told = true
	return b, nil
}

// Options gives what the balance was made with, defaults filled in.
func (b *Balance) Options() Options { return b.opt }

// SetLoad puts so much on the pan in place of what lay there, g; 0 empties it.
func (b *Balance) SetLoad(massG float64) {
	b.mu.Lock()
	defer b.mu.Unlock()
	b.cell.setLoad(massG)
	b.told = false
	b.watch.disturb()
}

// Put adds to what lies on the pan, g.
func (b *Balance) Put(massG float64) { b.SetLoad(b.Load() + massG) }

// Load gives what lies on the pan, g.
func (b *Balance) Load() float64 {
	b.mu.Lock()
	defer b.mu.Unlock()
	return b.cell.loadG
}

// Drip lets a drop fall into the vessel: the load grows and is not laid down anew.
func (b *Balance) Drip(massG float64) {
	b.mu.Lock()
	defer b.mu.Unlock()
	b.cell.loadG += massG
	b.told = false
	b.watch.disturb()
}

// Touch rests a hand on the pan for so long.
func (b *Balance) Touch(forceG float64, d time.Duration) {
	b.mu.Lock()
	defer b.mu.Unlock()
	b.cell.push = push{forceG, d.Seconds()}
	b.watch.disturb()
}

// Bump knocks against the table; the display swings by some sizeG.
func (b *Balance) Bump(sizeG float64) {
	b.mu.Lock()
	defer b.mu.Unlock()
	b.cell.swing = swing{sizeG: sizeG}
	b.watch.disturb()
}

// Evaporate makes the load lose so much each second.
func (b *Balance) Evaporate(lossGS float64) {
	b.mu.Lock()
	defer b.mu.Unlock()
	b.cell.evaporateS = lossGS
}

// PressTare presses the tare key: done once the value is stable.
func (b *Balance) PressTare() { b.press(tareOrZero) }

// PressZero presses the zero key.
func (b *Balance) PressZero() { b.press(zeroOnly) }

func (b *Balance) press(key tareKey) {
	b.mu.Lock()
	defer b.mu.Unlock()
	b.wantT = key
}

// PressPrint presses PRINT: one line, once the value is stable. On some makes it stops
// and starts automatic printing.
func (b *Balance) PressPrint() {
	b.mu.Lock()
	defer b.mu.Unlock()
	b.print()
}

func (b *Balance) print() {
	switch {
	case b.opt.Dialect.AutoToggles && b.opt.Output != OnRequest && b.opt.Output != OnRequestNow:
		b.auto = !b.auto
	case b.opt.Output == OnRequestNow:
		b.out = append(b.out, b.line()...)
	default:
		b.owedP++
	}
}

// Truth gives what the display would show of the present load without noise, draught,
// hands, bumps and lag, g.
func (b *Balance) Truth() float64 {
	b.mu.Lock()
	defer b.mu.Unlock()
	return b.cell.calm() - b.zeroG - b.tareG
}

// Stable says whether the balance declares its value stable.
func (b *Balance) Stable() bool {
	b.mu.Lock()
	defer b.mu.Unlock()
	return b.held
}

// Step moves the balance's world on by dt and gives the bytes it sends meanwhile. One
// step is one update of the display.
func (b *Balance) Step(dt time.Duration) []byte {
	b.mu.Lock()
	defer b.mu.Unlock()
	value := b.cell.step(dt.Seconds())
	b.watch.add(value, dt.Seconds())
	b.hold(value)
	if b.held && b.wantT != noKey {
		b.tare()
	}
	b.printDue(dt.Seconds())
	sent := b.out
	b.out = nil
	return sent
}

// hold keeps the display still while the value is stable, and lets it go when the
// value leaves it by more than the stability width.
func (b *Balance) hold(value float64) {
	stable := b.watch.stable()
	switch {
	case !stable || b.opt.Flicker:
		b.heldG = value
	case !b.held:
		b.heldG = b.cell.calm()
	case math.Abs(b.cell.calm()-b.heldG) > 1.5*b.opt.ReadabilityG:
		b.heldG = b.cell.calm() // it follows what evaporates
	}
	b.held = stable
}

// tare sets the present value to zero. Near the zero of the empty pan the combined key
// zeroes.
func (b *Balance) tare() {
	key := b.wantT
	b.wantT = noKey
	if key == tareOrZero && math.Abs(b.heldG-b.zeroG) < b.opt.CapacityG/50 {
		key = zeroOnly
	}
	if key == zeroOnly {
		b.zeroG, b.tareG = b.heldG, 0
	} else {
		b.tareG = b.heldG - b.zeroG
	}
	b.told = false
	if b.auto {
		b.out = append(b.out, b.blankLine()...)
	}
}

// printDue prints what is due at this update.
func (b *Balance) printDue(dtS float64) {
	if b.owedP > 0 && (b.held || b.beyond() != 0) {
		b.out = append(b.out, b.line()...)
		b.owedP--
	}
	b.sinceS += dtS
	if !b.auto {
		return
	}
	switch b.opt.Output {
	case Auto:
		b.out = append(b.out, b.line()...)
	case AutoStable:
		if b.held {
			b.out = append(b.out, b.line()...)
		}
	case OnInterval:
		if b.sinceS >= b.opt.IntervalS {
			b.sinceS = 0
			b.out = append(b.out, b.line()...)
		}
	case OnChange:
		if b.held && !b.told {
			b.told = true
			b.out = append(b.out, b.line()...)
		}
	}
}

// shown is the value on the display, g.
func (b *Balance) shown() float64 { return b.heldG - b.zeroG - b.tareG }

// beyond is 'H' for an overload, 'L' for an underload, 0 for neither.
func (b *Balance) beyond() byte {
	switch gross := b.heldG - b.zeroG; {
	case gross > b.opt.CapacityG+9*b.opt.ReadabilityG:
		return 'H'
	case gross < -b.opt.CapacityG/20:
		return 'L'
	}
	return 0
}
