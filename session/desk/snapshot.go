package desk

import (
	"context"
	"encoding/json"
	"fmt"

	"tenthmark/session"
)

// snapshotEvery is how many events come between two snapshots. A snapshot is a cache
// of what the events say and nothing more: without it, or when it does not fit, the
// whole record is read.
const snapshotEvery = 5000

// recall brings the book in step with the record.
func (d *Desk) recall(ctx context.Context) error {
	state, next, found, err := d.record.LoadSnapshot(ctx)
	if err != nil {
		return fmt.Errorf("load snapshot: %w", err)
	}
	if found {
		book := session.NewBook()
		if err := json.Unmarshal(state, book); err == nil && book.Next == next {
			d.book, d.kept = book, next
		} else {
			d.log.Warn().Err(err).Msg("snapshot is of no use, reading the whole ledger")
		}
	}
	if err := d.record.Replay(ctx, d.book.Next, d.applyAndShelve); err != nil {
		return fmt.Errorf("replay ledger: %w", err)
	}
	d.book.Shelve()
	return nil
}

// applyAndShelve keeps memory bounded while a long record is read.
func (d *Desk) applyAndShelve(line []byte) error {
	if err := d.book.Apply(line); err != nil {
		return err
	}
	if d.book.Next%snapshotEvery == 0 {
		d.book.Shelve()
	}
	return nil
}

// keep saves a snapshot when enough has happened since the last one. A snapshot that
// cannot be saved costs time at the next start and nothing else.
func (d *Desk) keep() {
	if d.book.Next-d.kept >= snapshotEvery {
		d.saveSnapshot()
	}
}

func (d *Desk) saveSnapshot() {
	d.book.Shelve()
	state, err := json.Marshal(d.book)
	if err == nil {
		err = d.record.SaveSnapshot(context.Background(), state, d.book.Next)
	}
	if err != nil {
		d.log.Warn().Err(err).Msg("snapshot not saved")
	}
	d.kept = d.book.Next
}

// Keep saves a snapshot now: before the daemon stops.
func (d *Desk) Keep(ctx context.Context) error { return d.at(ctx, d.saveSnapshot) }

// fetch puts a run from the shelf back into the book.
func (d *Desk) fetch(ctx context.Context, id string) error {
	if d.book.Runs[id] != nil || d.book.Summaries[id] == nil {
		return nil
	}
	lines, err := d.record.RunLines(ctx, id)
	if err != nil {
		return err
	}
	run, err := session.RunFromLines(lines)
	if err != nil {
		return fmt.Errorf("fetch run %s: %w", id, err)
	}
	d.book.Runs[id] = run
	return nil
}

// ViewRun looks at one run, wherever it is. look must not keep what it is given, nor
// change it.
func (d *Desk) ViewRun(ctx context.Context, id string, look func(*session.Run) error) error {
	var err error
	wait := d.at(ctx, func() {
		var run *session.Run
		if err = d.fetch(ctx, id); err != nil {
			return
		}
		if run, err = d.book.Run(id); err == nil {
			err = look(run)
		}
	})
	if wait != nil {
		return wait
	}
	return err
}

// RunDecision turns an order on one run into events, or refuses it.
type RunDecision func(*session.Run) ([]session.Draft, error)

// DoRun is Do for one run, wherever it is.
func (d *Desk) DoRun(ctx context.Context, actor session.Actor, id string, decide RunDecision, then ...RunDecision) ([]session.Event, error) {
	on := func(decide RunDecision) Decision {
		return func(b *session.Book) ([]session.Draft, error) {
			if err := d.fetch(ctx, id); err != nil {
				return nil, err
			}
			run, err := b.Run(id)
			if err != nil {
				return nil, err
			}
			return decide(run)
		}
	}
	steps := make([]Decision, len(then))
	for i, step := range then {
		steps[i] = on(step)
	}
	return d.Do(ctx, actor, on(decide), steps...)
}
