package settle

import (
	"math"
	"slices"
	"time"

	"tenthmark/calc/decimal"
)

// rawSize holds the longest line that is a weight; longer ones are cut.
const rawSize = 64

// entry is one stable line of the current dwell.
type entry struct {
	at     time.Duration
	massG  float64
	mass   decimal.Number
	unit   string
	raw    [rawSize]byte
	rawLen int
}

// window holds the lines of the current dwell, oldest first. They lie in the front
// part of a larger array, so that dropping the oldest costs nothing; when a balance is
// so fast that even that is full, every second line is dropped: no more are needed to
// judge it.
type window struct {
	array     []entry
	entries   []entry       // a part of array
	restSince time.Duration // since when the load is within the band; may be before the oldest line
	low, high float64
	scratch   []float64
}

const windowSize = 256

func (w *window) len() int { return len(w.entries) }

func (w *window) clear() { w.entries = w.entries[:0] }

func (w *window) start() time.Duration { return w.entries[0].at }

func (w *window) length() time.Duration {
	if len(w.entries) == 0 {
		return 0
	}
	return w.entries[len(w.entries)-1].at - w.entries[0].at
}

func (w *window) add(at time.Duration, massG float64, s Sample) {
	w.makeRoom()
	if len(w.entries) == 0 {
		w.low, w.high, w.restSince = massG, massG, at
	}
	w.low, w.high = min(w.low, massG), max(w.high, massG)
	w.entries = w.entries[:len(w.entries)+1]
	e := &w.entries[len(w.entries)-1]
	e.at, e.massG, e.mass, e.unit = at, massG, s.MassG, s.Unit
	e.rawLen = copy(e.raw[:], s.Raw)
}

// makeRoom moves the lines to the front of the array when its end is reached.
func (w *window) makeRoom() {
	if w.array == nil {
		w.array = make([]entry, 2*windowSize)
		w.entries = w.array[:0]
	}
	if len(w.entries) == windowSize {
		w.thin()
	}
	if len(w.entries) == cap(w.entries) || len(w.entries) == 0 {
		w.entries = w.array[:copy(w.array, w.entries)]
	}
}

// thin drops every second line, never the first.
func (w *window) thin() {
	kept := 0
	for i := 0; i < len(w.entries); i += 2 {
		w.entries[kept] = w.entries[i]
		kept++
	}
	w.entries = w.entries[:kept]
	w.span()
}

func (w *window) span() {
	w.low, w.high = math.Inf(1), math.Inf(-1)
	for i := range w.entries {
		w.low, w.high = min(w.low, w.entries[i].massG), max(w.high, w.entries[i].massG)
	}
}

// shrinkToBand drops the oldest lines until the rest lies within the band, which is
// wider by an even drift of driftGS: the load is at rest since then.
func (w *window) shrinkToBand(bandG, driftGS float64) {
	bandG *= 1 + 1e-6 // forgives the rounding of binary fractions
	if w.high-w.low <= bandG+driftGS*w.length().Seconds() {
		return
	}
	last := len(w.entries) - 1
	from := last
	low, high := w.entries[last].massG, w.entries[last].massG
	for i := last; i >= 0; i-- {
		low, high = min(low, w.entries[i].massG), max(high, w.entries[i].massG)
		if high-low > bandG+driftGS*(w.entries[last].at-w.entries[i].at).Seconds() {
			break
		}
		from = i
	}
	w.entries = w.entries[from:]
	w.restSince = w.start()
	w.span()
}

// forget drops lines that are older than so long: what they show is over.
func (w *window) forget(longest time.Duration, fewest int) {
	from := 0
	last := w.entries[len(w.entries)-1].at
	for len(w.entries)-from > fewest && last-w.entries[from+1].at >= longest {
		from++
	}
	if from > 0 {
		w.entries = w.entries[from:]
		w.span()
	}
}

// middle gives the median of the later half of the masses, g; of an even count the
// lower one of the two.
func (w *window) middle() float64 {
	w.scratch = w.scratch[:0]
	for i := w.half(); i < len(w.entries); i++ {
		w.scratch = append(w.scratch, w.entries[i].massG)
	}
	slices.Sort(w.scratch)
	return w.scratch[(len(w.scratch)-1)/2]
}

func (w *window) half() int { return len(w.entries) / 2 }

// median gives the latest line that shows the median of the later half: one line may
// flicker, and the earlier half may still creep by the last digits.
func (w *window) median() *entry {
	m := w.middle()
	for i := len(w.entries) - 1; i > w.half(); i-- {
		if w.entries[i].massG == m {
			return &w.entries[i]
		}
	}
	return &w.entries[w.half()]
}

// line fits a straight line: its slope in g/s and the standard deviation about it, g.
func (w *window) line() (slopeGS, noiseG float64) {
	n := float64(len(w.entries))
	var st, sm float64
	for i := range w.entries {
		st += w.seconds(i)
		sm += w.entries[i].massG - w.entries[0].massG
	}
	var stt, stm, smm float64
	for i := range w.entries {
		dt := w.seconds(i) - st/n
		dm := w.entries[i].massG - w.entries[0].massG - sm/n
		stt, stm, smm = stt+dt*dt, stm+dt*dm, smm+dm*dm
	}
	if stt == 0 || n < 3 {
		return 0, 0
	}
	slopeGS = stm / stt
	return slopeGS, math.Sqrt(max(0, smm-slopeGS*stm) / (n - 2))
}

func (w *window) seconds(i int) float64 { return (w.entries[i].at - w.entries[0].at).Seconds() }

// course is how the lines of a dwell run.
type course uint8

const (
	level    course = iota // no movement that the display could show
	drifting               // an even movement
	creeping               // a movement that dies away: the tail of a filter
)

// course compares the means of the three thirds of the dwell. When they differ by less
// than a digit, or by less than the noise lets one see, it is level. When the second
// step is clearly smaller than the first, the movement dies away like the tail of a
// filter, and what is still to come is the second step times r/(1 − r), r the ratio of
// the two steps (the sum of the geometric series). Less than half a digit of that is
// level.
func (w *window) course(digitG float64) course {
	a, b, c := w.thirds()
	_, noise := w.line()
	n := float64(len(w.entries)) / 3
	visible := max(digitG, 2*noise*math.Sqrt(2/n))
	if max(a, b, c)-min(a, b, c) <= visible {
		return level
	}
	r := (c - b) / (b - a)
	switch {
	case !(r > 0 && r < 0.8): // even, growing, or no clear course
		return drifting
	case math.Abs((c-b)*r/(1-r)) <= digitG/2:
		return level
	}
	return creeping
}

// thirds gives the means of the first, second and last third of the lines, g.
func (w *window) thirds() (a, b, c float64) {
	n := len(w.entries)
	mean := func(from, to int) float64 {
		to = max(to, from+1)
		sum := 0.0
		for i := from; i < to; i++ {
			sum += w.entries[i].massG
		}
		return sum / float64(to-from)
	}
	return mean(0, n/3), mean(n/3, n-n/3), mean(n-n/3, n)
}
