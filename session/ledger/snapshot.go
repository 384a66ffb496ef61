package ledger

import (
	"context"
	"crypto/sha256"
	"database/sql"
	"encoding/hex"
	"errors"
	"fmt"
	"strings"
)

// Snapshot is the state that the events before Size lead to, in the caller's own
// encoding. It is a cache and no record: it is signed together with the tree it was
// made from, one that does not fit is as good as none, and Verify lets the caller
// compare it with a replay.
type Snapshot struct {
	Size  int64
	State []byte
}

// snapshotText gives the signed lines; as the first one has spaces it is never taken for
// a checkpoint.
func snapshotText(head Head, state []byte) string {
	sum := sha256.Sum256(state)
	return fmt.Sprintf("tenthmark state snapshot\n%s%s\n", head.text(), hex.EncodeToString(sum[:]))
}

// SaveSnapshot stores the state that all events before size lead to and drops older
// snapshots.
func (l *Ledger) SaveSnapshot(ctx context.Context, snap Snapshot) error {
	if err := l.enter(ctx); err != nil {
		return err
	}
	defer l.leave()
	if err := l.sound(); err != nil {
		return err
	}
	if snap.Size < 1 || snap.Size > l.edge.size {
		return fmt.Errorf("snapshot of %d events: the ledger has %d", snap.Size, l.edge.size)
	}
	edge, err := l.frontierAt(ctx, snap.Size)
	if err != nil {
		return err
	}
	signed, err := l.signer.sign(snapshotText(Head{l.Origin(), snap.Size, edge.root()}, snap.State))
	if err != nil {
		return err
	}
	return explain("save snapshot", l.path, l.storeSnapshot(ctx, snap, signed))
}

func (l *Ledger) storeSnapshot(ctx context.Context, snap Snapshot, signed []byte) error {
	tx, err := l.db.BeginTx(ctx, nil)
	if err != nil {
		return err
	}
	_, err = tx.ExecContext(ctx, `DELETE FROM snapshot`)
	if err == nil {
		_, err = tx.ExecContext(ctx, `INSERT INTO snapshot (size, note, state) VALUES (?, ?, ?)`, snap.Size, signed, snap.State)
	}
	if err != nil {
		return errors.Join(err, tx.Rollback())
	}
	return tx.Commit()
}

// LoadSnapshot gives the newest snapshot that fits the tree and the key. found is false
// when there is none; then replay from event 0.
func (l *Ledger) LoadSnapshot(ctx context.Context) (snap Snapshot, found bool, err error) {
	if err := l.enter(ctx); err != nil {
		return Snapshot{}, false, err
	}
	defer l.leave()
	snap, signed, err := l.snapshotRow(ctx)
	if errors.Is(err, sql.ErrNoRows) {
		return Snapshot{}, false, nil
	}
	if err != nil {
		return Snapshot{}, false, explain("read snapshot", l.path, err)
	}
	edge, err := l.frontierAt(ctx, snap.Size)
	if err != nil || !l.keys.fits(snap, signed, edge.root()) {
		return Snapshot{}, false, nil
	}
	return snap, true, nil
}

func (s *store) snapshotRow(ctx context.Context) (snap Snapshot, signed []byte, err error) {
	err = s.db.QueryRowContext(ctx, `SELECT size, note, state FROM snapshot ORDER BY size DESC LIMIT 1`).
		Scan(&snap.Size, &signed, &snap.State)
	return snap, signed, err
}

// fits says whether a key of the ledger signed this state for this tree.
func (k keyring) fits(snap Snapshot, signed []byte, root [32]byte) bool {
	for i := len(k) - 1; i >= 0; i-- {
		text, err := openNote(signed, k[i].key)
		if err == nil {
			return text == snapshotText(Head{originOf(k[i].key), snap.Size, root}, snap.State)
		}
	}
	return false
}

// originOf gives the name in a public key.
func originOf(publicKey string) string {
	origin, _, _ := strings.Cut(publicKey, "+")
	return origin
}
