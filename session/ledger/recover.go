package ledger

import (
	"bytes"
	"context"
	"errors"
	"fmt"

	"tenthmark/session"
)

// settle finds out after a failed transaction whether it happened, by closing the
// connection and reading the file afresh. It returns nil only when the whole change
// is on disk.
func (l *Ledger) settle(ctx context.Context, c change, cause error) error {
	l.broken, l.unclear = cause, &c
	happened, err := l.recover(ctx)
	switch session.FaultCode(err) {
	case "ledger-damaged", "ledger-altered":
		return errors.Join(err, cause)
	}
	if err != nil {
		return &session.Fault{
			Code: "ledger-unclear", Message: "The disk of the ledger failed, and it is not known whether the last entry was saved.",
			Hint: "Stop working. When the disk is well again the ledger finds out by itself; until then nothing is taken.",
			Err:  errors.Join(cause, err),
		}
	}
	if happened {
		return nil
	}
	return explain("write", l.path, cause)
}

// Recover tries to bring a broken ledger back and gives the events whose fate was
// unclear and which turned out to be saved; the caller has to apply them. On a sound
// ledger it does nothing.
func (l *Ledger) Recover(ctx context.Context) ([]Entry, error) {
	select {
	case <-l.turn:
		defer l.leave()
	case <-ctx.Done():
		return nil, ctx.Err()
	}
	if l.closed {
		return nil, l.away()
	}
	if l.broken == nil {
		return nil, nil
	}
	pending := l.unclear
	happened, err := l.recover(context.WithoutCancel(ctx))
	if err != nil || !happened || pending == nil {
		return nil, err
	}
	return pending.entries, nil
}

// recover reopens the file, checks it and compares it with the unclear change.
func (l *Ledger) recover(ctx context.Context) (happened bool, err error) {
	before := l.Size()
	if err := l.reopen(ctx); err != nil {
		return false, err
	}
	happened, err = l.found(ctx, before)
	if err == nil && happened {
		err = l.fold(ctx)
	}
	if err != nil {
		return false, err
	}
	l.broken, l.unclear = nil, nil
	l.size.Store(l.edge.size)
	return happened, nil
}

// reopen closes the connection, whatever it says, and loads the file anew. The lock
// file stays held.
func (l *Ledger) reopen(ctx context.Context) error {
	if err := l.at(beforeReopen); err != nil {
		return err
	}
	closing := l.disconnect()
	if err := l.load(ctx); err != nil {
		return errors.Join(closing, err, l.disconnect())
	}
	return l.at(afterReopen)
}

// fold moves the write-ahead log into the database and syncs that. What is read back after
// a failed sync may be only in the system's memory; this writes it once more.
func (l *Ledger) fold(ctx context.Context) error {
	var busy, logged, moved int64
	err := l.db.QueryRowContext(ctx, `PRAGMA wal_checkpoint(TRUNCATE)`).Scan(&busy, &logged, &moved)
	if err == nil && busy != 0 {
		err = fmt.Errorf("fold the log: busy %d", busy)
	}
	return explain("sync", l.path, err)
}

// found says whether the unclear change is in the file. before is the size that was
// known to be durable.
func (l *Ledger) found(ctx context.Context, before int64) (bool, error) {
	if l.edge.size < before {
		return false, alteredFault(l.path, altered(l.edge.size, "was saved and is missing now"))
	}
	c := l.unclear
	if c == nil || len(c.entries) == 0 {
		return c != nil && l.covered == c.next.size, nil
	}
	if l.edge.size == before {
		return false, nil
	}
	rows, err := l.rows(ctx, before, len(c.entries)+1)
	if err != nil {
		return false, explain("read", l.path, err)
	}
	same := len(rows) == len(c.entries)
	for i := 0; same && i < len(rows); i++ {
		same = rows[i].seq == c.entries[i].Seq && bytes.Equal(rows[i].body, c.entries[i].Body)
	}
	if !same {
		return false, alteredFault(l.path, altered(before, "is not what was written"))
	}
	return true, nil
}
