package settle

import "time"

// traceSpan is how much of the past is kept with a weight.
const traceSpan = 10 * time.Second

const traceSize = 256

// trace is a ring of the latest weights, stable or not.
type trace struct {
	points [traceSize]Point
	next   int
	count  int
}

func (t *trace) add(p Point) {
	t.points[t.next] = p
	t.next = (t.next + 1) % traceSize
	t.count = min(t.count+1, traceSize)
}

// since gives the points from a moment on, oldest first.
func (t *trace) since(at time.Duration) []Point {
	out := make([]Point, 0, t.count)
	for i := range t.count {
		p := t.points[(t.next-t.count+i+traceSize)%traceSize]
		if p.At >= at {
			out = append(out, p)
		}
	}
	return out
}
