// Package desk is the single owner of all runs in the daemon. Orders go in, events
// come out: an order is decided by package session, recorded in the ledger, and only
// then applied, answered and announced. What the desk says has happened is on disk.
//
// It refuses to change anything that the ledger did not take, and it never decides
// a rule of the trade itself: those are in package session.
package desk

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"time"

	"github.com/rs/zerolog"

	"tenthmark/session"
)

// Record is the ledger as the desk needs it.
type Record interface {
	// Append makes the drafts durable, all or none, and gives the lines as stored.
	// A draft is encoded when its number is known.
	Append(ctx context.Context, drafts ...func(seq int64) ([]byte, error)) ([][]byte, error)
	// Recover tries to bring a record back that failed, and gives the lines whose fate
	// was unclear and that turned out to be stored. On a sound record it does nothing.
	Recover(ctx context.Context) ([][]byte, error)
	// Replay hands over every stored line from number from on.
	Replay(ctx context.Context, from int64, each func(line []byte) error) error
	// RunLines gives the stored lines of one run, in order.
	RunLines(ctx context.Context, id string) ([][]byte, error)
	// LoadSnapshot gives a state of the book that was kept, as of the events before
	// next; found is false when there is none that can be trusted.
	LoadSnapshot(ctx context.Context) (state []byte, next int64, found bool, err error)
	// SaveSnapshot keeps one.
	SaveSnapshot(ctx context.Context, state []byte, next int64) error
}

// Clock is where the desk takes the time from.
type Clock interface {
	Now() time.Time         // wall clock with the zone of the bench
	Running() time.Duration // monotonic, since the daemon started
}

// Desk owns the book. Its fields belong to the goroutine of Run, but for orders,
// which is how everybody else reaches it.
type Desk struct {
	record  Record
	clock   Clock
	log     zerolog.Logger
	book    *session.Book
	orders  chan func()
	done    chan struct{}
	crier   *crier
	steps   stepWatch
	kept    int64 // number of events that the newest snapshot covers
	trouble error // the last append failed with this
}

// New gives a desk whose book is what the record says. It reads the events since the
// snapshot that was kept last, or all of them.
func New(ctx context.Context, record Record, clock Clock, log zerolog.Logger) (*Desk, error) {
	d := &Desk{
		record: record, clock: clock, log: log, book: session.NewBook(),
		orders: make(chan func()), done: make(chan struct{}), crier: newCrier(),
	}
	if err := d.recall(ctx); err != nil {
		return nil, err
	}
	return d, nil
}

// Run serves orders until ctx is cancelled, then those that are already waiting.
func (d *Desk) Run(ctx context.Context) error {
	defer close(d.done)
	defer d.crier.close()
	for {
		select {
		case order := <-d.orders:
			order()
		case <-ctx.Done():
			return d.drain()
		}
	}
}

// drain serves whoever waited when the desk was told to stop.
func (d *Desk) drain() error {
	for {
		select {
		case order := <-d.orders:
			order()
		case <-time.After(20 * time.Millisecond):
			return nil
		}
	}
}

// errClosed answers orders that come after the desk has stopped.
var errClosed = &session.Fault{Code: "shutting-down", Message: "The daemon is shutting down.", Hint: "Wait until it runs again; what was acknowledged is recorded."}

// at runs work in the desk's goroutine and waits for it.
func (d *Desk) at(ctx context.Context, work func()) error {
	finished := make(chan struct{})
	select {
	case d.orders <- func() { defer close(finished); work() }:
	case <-d.done:
		return errClosed
	case <-ctx.Done():
		return ctx.Err()
	}
	<-finished
	return nil
}

// View reads the book. look must not keep what it is given, nor change it.
func (d *Desk) View(ctx context.Context, look func(*session.Book) error) error {
	var err error
	if wait := d.at(ctx, func() { err = look(d.book) }); wait != nil {
		return wait
	}
	return err
}

// Decision turns an order into events, or refuses it.
type Decision func(*session.Book) ([]session.Draft, error)

// Do carries out an order: decided, recorded, applied, announced. The events it
// gives are durable. then, if given, decides on what follows from them in the same
// breath.
func (d *Desk) Do(ctx context.Context, actor session.Actor, decide Decision, then ...Decision) ([]session.Event, error) {
	var events []session.Event
	var err error
	wait := d.at(ctx, func() {
		for _, step := range append([]Decision{decide}, then...) {
			var drafts []session.Draft
			if drafts, err = step(d.book); err != nil {
				return
			}
			var made []session.Event
			if made, err = d.write(actor, drafts); err != nil {
				return
			}
			events = append(events, made...)
		}
	})
	if wait != nil {
		return nil, wait
	}
	return events, err
}

// write records drafts and applies them. It is not cancelled half way: whoever
// asked may have gone, the record must not be left in doubt.
func (d *Desk) write(actor session.Actor, drafts []session.Draft) ([]session.Event, error) {
	if len(drafts) == 0 {
		return nil, nil
	}
	if err := d.heal(); err != nil {
		return nil, err
	}
	now, running := d.clock.Now(), d.clock.Running()
	if step := d.steps.check(now, running); step != nil {
		drafts = append([]session.Draft{{Kind: session.ClockStepped, Body: step}}, drafts...)
	}
	encoders := make([]func(int64) ([]byte, error), len(drafts))
	for i, draft := range drafts {
		encoders[i] = encoder(draft, actor, now, running)
	}
	lines, err := d.record.Append(context.Background(), encoders...)
	if err != nil {
		d.failed(err)
		return nil, err
	}
	d.recovered()
	return d.apply(lines)
}

// heal brings the record back after a fault, and the book in step with what it turns
// out to hold.
func (d *Desk) heal() error {
	if d.trouble == nil {
		return nil
	}
	lines, err := d.record.Recover(context.Background())
	if err != nil {
		return err
	}
	_, err = d.apply(lines)
	return err
}

// Heal tries to bring the record back after a fault, without waiting for an order.
func (d *Desk) Heal(ctx context.Context) error {
	var err error
	wait := d.at(ctx, func() {
		if err = d.heal(); err == nil {
			d.recovered()
		}
	})
	return errors.Join(wait, err)
}

// encoder gives the function that makes an event's line once its number is known.
func encoder(draft session.Draft, actor session.Actor, now time.Time, running time.Duration) func(int64) ([]byte, error) {
	return func(seq int64) ([]byte, error) {
		body, err := json.Marshal(draft.Body)
		if err != nil {
			return nil, fmt.Errorf("encode %s: %w", draft.Kind, err)
		}
		_, offset := now.Zone()
		who := actor
		if draft.Kind == session.ClockStepped {
			who = session.Daemon
		}
		return session.Event{
			Seq: seq, At: session.At(now), OffsetMin: offset / 60, RunMS: running.Milliseconds(),
			Actor: who, Kind: draft.Kind, Subject: draft.Subject, Body: body,
		}.Encode()
	}
}

// apply brings the book in step with lines that are durable, and announces them.
func (d *Desk) apply(lines [][]byte) ([]session.Event, error) {
	events := make([]session.Event, 0, len(lines))
	for _, line := range lines {
		if err := d.book.Apply(line); err != nil {
			return nil, fmt.Errorf("apply what was recorded: %w", err)
		}
		e, err := session.DecodeEvent(line)
		if err != nil {
			return nil, err
		}
		events = append(events, e)
		d.crier.cry(Notice{Event: &e})
	}
	d.keep()
	return events, nil
}

// failed and recovered log the change, not every repetition.
func (d *Desk) failed(err error) {
	if d.trouble == nil {
		d.log.Error().Err(err).Msg("ledger does not take events")
	}
	d.trouble = err
	d.crier.cry(Notice{Trouble: err})
}

func (d *Desk) recovered() {
	if d.trouble != nil {
		d.log.Info().Msg("ledger takes events again")
		d.trouble = nil
	}
}

// Trouble gives the error that the ledger answered the last append with, nil when
// it took it.
func (d *Desk) Trouble(ctx context.Context) error {
	var trouble error
	if err := d.at(ctx, func() { trouble = d.trouble }); err != nil {
		return err
	}
	return trouble
}

// ErrSlow ends the subscription of a listener that did not keep up.
var ErrSlow = errors.New("listener too slow")
