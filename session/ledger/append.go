package ledger

import (
	"context"
	"database/sql"
	"errors"
	"fmt"

	"golang.org/x/mod/sumdb/tlog"
	"tenthmark/session"
)

// step names a moment at which the disk can fail, for tests.
type step string

// The steps of a write. "before" means that the step fails and did not happen,
// "after" that it happened and is reported as failed.
const (
	beforeBegin  step = "before begin"
	afterBegin   step = "after begin"
	beforeInsert step = "before insert"
	afterInsert  step = "after insert"
	beforeCommit step = "before commit"
	afterCommit  step = "after commit"
	beforeReopen step = "before reopen"
	afterReopen  step = "after reopen"
)

func (l *Ledger) at(s step) error {
	if l.opt.fault == nil {
		return nil
	}
	return l.opt.fault(s)
}

// signEvery is how many events may stand behind the newest checkpoint; then one is
// signed with the next event. It bounds what a start has to rehash.
const signEvery = 8192

// Append stores the drafts as the next events, all or none. When it returns without
// error they are on disk. On an error nothing is recorded, unless the error has the
// code "ledger-unclear": then the disk gave no answer, every further Append is
// refused, and Recover finds out.
func (l *Ledger) Append(ctx context.Context, drafts ...Draft) ([]Entry, error) {
	if len(drafts) == 0 {
		return nil, nil
	}
	if err := l.enter(ctx); err != nil {
		return nil, err
	}
	defer l.leave()
	if err := l.sound(); err != nil {
		return nil, err
	}
	c, err := l.draft(drafts)
	if err != nil {
		return nil, err
	}
	if err := l.write(ctx, c); err != nil {
		return nil, err
	}
	return c.entries, nil
}

// sound refuses to go on when it is not known what the disk holds.
func (l *Ledger) sound() error {
	if l.broken == nil {
		return nil
	}
	return refuseBroken(l.broken)
}

func refuseBroken(cause error) error {
	return &session.Fault{
		Code: "ledger-broken", Message: "Nothing is written to the ledger until the disk's fault is gone.",
		Hint: "Look at the earlier message; the daemon tries again by itself.", Err: cause,
	}
}

// change is what one transaction writes.
type change struct {
	entries    []Entry
	nodes      [][]byte
	next       frontier // the tree afterwards
	checkpoint []byte   // nil for none
}

// draft encodes the events and hashes them onto a copy of the tree.
func (l *Ledger) draft(drafts []Draft) (change, error) {
	c := change{next: l.edge.clone()}
	for _, d := range drafts {
		seq := c.next.size
		body, err := d(seq)
		if err != nil {
			return change{}, fmt.Errorf("event %d: %w", seq, err)
		}
		if err := checkBody(seq, body); err != nil {
			return change{}, err
		}
		c.entries = append(c.entries, Entry{seq, body})
		c.nodes = append(c.nodes, packHashes(c.next.push(tlog.RecordHash(body), nil)))
	}
	if c.next.size-l.covered < signEvery {
		return c, nil
	}
	var err error
	c.checkpoint, err = l.signHead(&c.next)
	return c, err
}

// write makes c durable and takes it over, or finds out that it did not happen.
func (l *Ledger) write(ctx context.Context, c change) error {
	if err := ctx.Err(); err != nil {
		return err
	}
	ctx = context.WithoutCancel(ctx) // an interrupted commit would leave open what happened
	cause := l.transact(ctx, c)
	if cause == nil {
		l.take(c)
		return nil
	}
	return l.settle(ctx, c, cause)
}

// take makes c the present state.
func (l *Ledger) take(c change) {
	l.edge = c.next
	if c.checkpoint != nil {
		l.covered = c.next.size
	}
	l.size.Store(l.edge.size)
}

// transact writes c in one transaction. An error says nothing about what the disk holds.
func (l *Ledger) transact(ctx context.Context, c change) error {
	if err := l.at(beforeBegin); err != nil {
		return err
	}
	tx, err := l.db.BeginTx(ctx, nil)
	if err != nil {
		return err
	}
	if err := errors.Join(l.at(afterBegin), l.insertRows(ctx, tx, c)); err != nil {
		return errors.Join(err, tx.Rollback())
	}
	if err := l.at(beforeCommit); err != nil {
		return errors.Join(err, tx.Rollback())
	}
	if err := tx.Commit(); err != nil {
		return err
	}
	return l.at(afterCommit)
}

func (l *Ledger) insertRows(ctx context.Context, tx *sql.Tx, c change) error {
	insert := tx.StmtContext(ctx, l.insert)
	for i, e := range c.entries {
		if err := l.at(beforeInsert); err != nil {
			return err
		}
		if _, err := insert.ExecContext(ctx, e.Seq, e.Body, c.nodes[i]); err != nil {
			return err
		}
		if err := l.at(afterInsert); err != nil {
			return err
		}
	}
	if c.checkpoint == nil {
		return nil
	}
	_, err := tx.ExecContext(ctx, `INSERT INTO checkpoint (size, note) VALUES (?, ?)`, c.next.size, c.checkpoint)
	return err
}
