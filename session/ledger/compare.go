package ledger

import (
	"context"
	"fmt"

	"golang.org/x/mod/sumdb/tlog"
)

// Growth is the proof that a ledger only grew since a checkpoint that was kept elsewhere.
type Growth struct {
	Older Head
	Newer Head
	Path  []tlog.Hash // RFC 6962 consistency proof
}

// Compare proves that the ledger continues the older checkpoint: same origin, signed by
// one of the ledger's keys, and the older tree is the beginning of the present one. An
// error with ErrAltered in its chain says that it does not. Compare trusts the stored
// tree nodes; Verify with the older checkpoint recomputes them from the events.
func (l *Ledger) Compare(ctx context.Context, older []byte) (Growth, error) {
	signed, err := l.Checkpoint(ctx)
	if err != nil {
		return Growth{}, err
	}
	if err := l.enter(ctx); err != nil {
		return Growth{}, err
	}
	defer l.leave()
	return l.compare(ctx, l.keys, older, signed)
}

// Compare proves the same for a ledger at rest, up to its newest checkpoint.
func (r *Reader) Compare(ctx context.Context, older []byte) (Growth, error) {
	if err := r.enter(ctx); err != nil {
		return Growth{}, err
	}
	defer r.leave()
	signed, err := r.newestCheckpoint(ctx)
	if err != nil {
		return Growth{}, explain("read checkpoint", r.path, err)
	}
	return r.compare(ctx, r.keys, older, signed)
}

// compare makes and checks the proof. Own turn assumed.
func (s *store) compare(ctx context.Context, keys keyring, older, newer []byte) (Growth, error) {
	var g Growth
	var err error
	if g.Newer, err = s.checkNewest(newer, keys); err != nil {
		return Growth{}, err
	}
	if g.Older, err = s.checkNewest(older, keys); err != nil {
		return Growth{}, &Finding{-1, "the older checkpoint is not one of this ledger"}
	}
	if g.Older.Size > g.Newer.Size {
		return g, altered(g.Newer.Size, fmt.Sprintf("is missing: the older checkpoint speaks of %d events", g.Older.Size))
	}
	if g.Path, err = tlog.ProveTree(g.Newer.Size, g.Older.Size, s.hashes(ctx)); err != nil {
		return g, fmt.Errorf("prove growth: %w", err)
	}
	if err := g.Check(); err != nil {
		return g, err
	}
	return g, nil
}

// Check checks the proof by itself.
func (g Growth) Check() error {
	if g.Older.Origin != g.Newer.Origin {
		return &Finding{-1, "the two checkpoints are of different ledgers"}
	}
	if err := tlog.CheckTree(g.Path, g.Newer.Size, g.Newer.Root, g.Older.Size, g.Older.Root); err != nil {
		return &Finding{-1, fmt.Sprintf("the first %d events are not those of the older checkpoint: history was rewritten", g.Older.Size)}
	}
	return nil
}
