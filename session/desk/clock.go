package desk

import (
	"time"

	"tenthmark/session"
)

// SystemClock is the computer's clock in a time zone.
type SystemClock struct {
	started time.Time // with its monotonic reading
	zone    *time.Location
}

// NewSystemClock starts counting the daemon's running time now.
func NewSystemClock(zone *time.Location) *SystemClock {
	return &SystemClock{started: time.Now(), zone: zone}
}

// Now gives the wall clock's time.
func (c *SystemClock) Now() time.Time { return time.Now().In(c.zone) }

// Running gives the monotonic time since the daemon started.
func (c *SystemClock) Running() time.Duration { return time.Since(c.started) }

// SteppedBody is the body of a ClockStepped event.
type SteppedBody struct {
	WallMS      int64        `json:"wall_ms"`      // the wall clock moved by this since the last event
	MonotonicMS int64        `json:"monotonic_ms"` // and in truth this much time passed
	StepMS      int64        `json:"step_ms"`      // the difference: by how much the clock was set
	Before      session.Time `json:"before"`       // the last event's time
}

// stepTolerance is how far wall and monotonic clock may part before it counts as a
// step: slewing by a time service stays below it.
const stepTolerance = 2 * time.Second

// stepWatch notices that the wall clock was set.
type stepWatch struct {
	wall    time.Time
	running time.Duration
}

// check compares with the last call; nil when the clocks agree.
func (w *stepWatch) check(wall time.Time, running time.Duration) *SteppedBody {
	last := *w
	w.wall, w.running = wall.Round(0), running
	if last.wall.IsZero() {
		return nil
	}
	moved, passed := w.wall.Sub(last.wall), running-last.running
	if step := moved - passed; step > stepTolerance || step < -stepTolerance {
		return &SteppedBody{moved.Milliseconds(), passed.Milliseconds(), step.Milliseconds(), session.At(last.wall)}
	}
	return nil
}
