package desk

import (
	"context"
	"errors"
	"sync"
	"testing"
	"time"

	"github.com/rs/zerolog"

	"tenthmark/calc"
	"tenthmark/calc/decimal"
	"tenthmark/session"
)

// memory is a record that lives in memory and can be told to fail.
type memory struct {
	mu      sync.Mutex
	lines   [][]byte
	fail    error
	happens bool     // whether the failing append stores its lines
	late    [][]byte // stored by an append that answered with fail
	state   []byte
	next    int64
}

func (m *memory) Append(_ context.Context, drafts ...func(int64) ([]byte, error)) ([][]byte, error) {
	m.mu.Lock()
	defer m.mu.Unlock()
	var out [][]byte
	for _, d := range drafts {
		line, err := d(int64(len(m.lines) + len(out)))
		if err != nil {
			return nil, err
		}
		out = append(out, line)
	}
	if m.fail != nil {
		if m.happens {
			m.late = out
		}
		return nil, m.fail
	}
	m.lines = append(m.lines, out...)
	return out, nil
}

// Recover gives what an append that seemed to fail stored all the same.
func (m *memory) Recover(context.Context) ([][]byte, error) {
	m.mu.Lock()
	defer m.mu.Unlock()
	if m.fail != nil {
		return nil, m.fail
	}
	late := m.late
	m.lines, m.late = append(m.lines, late...), nil
	return late, nil
}

func (m *memory) Replay(_ context.Context, from int64, each func([]byte) error) error {
	for _, line := range m.lines[from:] {
		if err := each(line); err != nil {
			return err
		}
	}
	return nil
}

func (m *memory) RunLines(_ context.Context, id string) ([][]byte, error) {
	var out [][]byte
	for _, line := range m.lines {
		if e, err := session.DecodeEvent(line); err != nil {
			return nil, err
		} else if e.Subject == id {
			out = append(out, line)
		}
	}
	return out, nil
}

func (m *memory) LoadSnapshot(context.Context) ([]byte, int64, bool, error) {
	return m.state, m.next, m.state != nil, nil
}

func (m *memory) SaveSnapshot(_ context.Context, state []byte, next int64) error {
	m.state, m.next = state, next
	return nil
}

// handClock is a clock that a test sets.
type handClock struct {
	wall    time.Time
	running time.Duration
}

func (c *handClock) Now() time.Time         { return c.wall }
func (c *handClock) Running() time.Duration { return c.running }

func startDesk(t *testing.T, m *memory, clock Clock) *Desk {
	t.Helper()
	d, err := New(t.Context(), m, clock, zerolog.Nop())
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	stopped := make(chan error, 1)
	go func() { stopped <- d.Run(ctx) }()
	t.Cleanup(func() {
		cancel()
		if err := <-stopped; err != nil {
			t.Error(err)
		}
	})
	return d
}

var anna = session.Operator("a.lindqvist")

func register(b *session.Book) ([]session.Draft, error) {
	return b.Register(session.Burette{
		Name: "B-07", Class: "AS",
		CapacityML:    session.Amount{Number: decimal.MustParse("50")},
		SubdivisionML: session.Amount{Number: decimal.MustParse("0.1")},
	})
}

func openRun(b *session.Book) ([]session.Draft, error) {
	return b.OpenRun(session.Request{Burette: "B-07", Station: "bench-1"}, session.Setting{Inputs: calc.DefaultInputs(), Rule: "simple"},
		session.Identity{}, time.Date(2026, 12, 1, 9, 0, 0, 0, time.UTC))
}

func testClock() *handClock {
	return &handClock{wall: time.Date(2026, 12, 1, 9, 0, 0, 0, time.FixedZone("bench", 3600))}
}

func TestWhatIsAnsweredIsRecordedFirst(t *testing.T) {
	m := &memory{}
	d := startDesk(t, m, testClock())
	events, err := d.Do(t.Context(), anna, register)
	if err != nil || len(events) != 1 || len(m.lines) != 1 {
		t.Fatalf("events %v, %v, %d lines", events, err, len(m.lines))
	}
	if e := events[0]; e.Actor != anna || e.OffsetMin != 60 || e.At.Format(session.TimeForm) != "2026-12-01T08:00:00.000Z" {
		t.Errorf("event %+v lacks actor, time or offset", e)
	}
	m.fail = errors.New("disk full")
	if _, err := d.Do(t.Context(), anna, openRun); !errors.Is(err, m.fail) {
		t.Errorf("got %v, want the record's error", err)
	}
	err = d.View(t.Context(), func(b *session.Book) error {
		if len(b.Runs) != 0 || b.Next != 1 {
			t.Errorf("the book has %d runs and %d events after an append that failed", len(b.Runs), b.Next)
		}
		return nil
	})
	if err != nil || d.Trouble(t.Context()) == nil {
		t.Errorf("view %v, trouble %v", err, d.Trouble(t.Context()))
	}
	m.fail = nil
	if _, err := d.Do(t.Context(), anna, openRun); err != nil || d.Trouble(t.Context()) != nil {
		t.Errorf("after the fault: %v, trouble %v", err, d.Trouble(t.Context()))
	}
}

func TestAClockStepIsAnEventAndOrderStays(t *testing.T) {
	m, clock := &memory{}, testClock()
	d := startDesk(t, m, clock)
	if _, err := d.Do(t.Context(), anna, register); err != nil {
		t.Fatal(err)
	}
	clock.wall, clock.running = clock.wall.Add(-2*time.Hour), clock.running+time.Minute
	events, err := d.Do(t.Context(), anna, openRun)
	if err != nil || len(events) != 2 || events[0].Kind != session.ClockStepped || events[1].Seq != 2 {
		t.Fatalf("events %+v, %v; want the step first", events, err)
	}
}

func TestListenersHearEventsAndSlowOnesAreDropped(t *testing.T) {
	d := startDesk(t, &memory{}, testClock())
	notices, stop := d.Listen()
	defer stop()
	slow, _ := d.Listen()
	if _, err := d.Do(t.Context(), anna, register); err != nil {
		t.Fatal(err)
	}
	if n := <-notices; n.Event == nil || n.Event.Kind != session.BuretteRegistered {
		t.Errorf("heard %+v", n)
	}
	for range backlog + 1 {
		_, err := d.Do(t.Context(), anna, func(b *session.Book) ([]session.Draft, error) {
			return b.Change(b.Burettes["B-07"].Burette, "nothing in particular")
		})
		if err != nil {
			t.Fatal(err)
		}
		<-notices
	}
	n := 0
	for range slow {
		n++
	}
	if n != backlog {
		t.Errorf("the slow listener heard %d notices before it was dropped, want %d", n, backlog)
	}
}

func TestAfterAStopTheBookIsTheSame(t *testing.T) {
	m := &memory{}
	d := startDesk(t, m, testClock())
	for _, decide := range []Decision{register, openRun} {
		if _, err := d.Do(t.Context(), anna, decide); err != nil {
			t.Fatal(err)
		}
	}
	if err := d.Keep(t.Context()); err != nil || m.next != 2 {
		t.Fatalf("snapshot covers %d events, %v; want 2", m.next, err)
	}
	again := startDesk(t, m, testClock())
	err := again.View(t.Context(), func(b *session.Book) error {
		if b.Next != 2 || b.OpenRunAt("bench-1") == nil {
			t.Errorf("after the stop: %d events, open run %v", b.Next, b.OpenRunAt("bench-1"))
		}
		return nil
	})
	if err != nil {
		t.Error(err)
	}
}

func TestWhatHappenedInSpiteOfAFaultIsAppliedOnce(t *testing.T) {
	m := &memory{fail: errors.New("I/O error"), happens: true}
	d := startDesk(t, m, testClock())
	if _, err := d.Do(t.Context(), anna, register); err == nil {
		t.Fatal("the fault was not reported")
	}
	m.fail = nil
	if err := d.Heal(t.Context()); err != nil {
		t.Fatal(err)
	}
	err := d.View(t.Context(), func(b *session.Book) error {
		if b.Burettes["B-07"] == nil || b.Next != 1 {
			t.Errorf("after the fault: burette %v, %d events", b.Burettes["B-07"], b.Next)
		}
		return nil
	})
	if err != nil || d.Trouble(t.Context()) != nil {
		t.Error(err, d.Trouble(t.Context()))
	}
}
