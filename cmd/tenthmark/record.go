package main

import (
	"context"

	"tenthmark/session/bench"
	"tenthmark/session/ledger"
)

// record is the ledger as the desk and the bench see it.
type record struct{ *ledger.Ledger }

// Append makes the drafts durable and gives their lines.
func (r record) Append(ctx context.Context, drafts ...func(seq int64) ([]byte, error)) ([][]byte, error) {
	typed := make([]ledger.Draft, len(drafts))
	for i, d := range drafts {
		typed[i] = d
	}
	entries, err := r.Ledger.Append(ctx, typed...)
	if err != nil {
		return nil, err
	}
	return lines(entries), nil
}

// Recover brings the ledger back after a fault.
func (r record) Recover(ctx context.Context) ([][]byte, error) {
	entries, err := r.Ledger.Recover(ctx)
	return lines(entries), err
}

// RunLines gives the lines of one run.
func (r record) RunLines(ctx context.Context, id string) ([][]byte, error) {
	var all [][]byte
	for after := int64(-1); ; {
		entries, err := r.Events(ctx, ledger.Filter{Subject: id, After: after})
		if err != nil {
			return nil, err
		}
		all = append(all, lines(entries)...)
		if len(entries) < ledger.MaxLimit {
			return all, nil
		}
		after = entries[len(entries)-1].Seq
	}
}

// LoadSnapshot gives the newest state that fits the ledger.
func (r record) LoadSnapshot(ctx context.Context) (state []byte, next int64, found bool, err error) {
	s, found, err := r.Ledger.LoadSnapshot(ctx)
	return s.State, s.Size, found, err
}

// SaveSnapshot keeps a state.
func (r record) SaveSnapshot(ctx context.Context, state []byte, next int64) error {
	return r.Ledger.SaveSnapshot(ctx, ledger.Snapshot{Size: next, State: state})
}

// Replay hands over the stored lines.
func (r record) Replay(ctx context.Context, from int64, each func(line []byte) error) error {
	return r.Ledger.Replay(ctx, from, func(e ledger.Entry) error { return each(e.Body) })
}

func lines(entries []ledger.Entry) [][]byte {
	out := make([][]byte, len(entries))
	for i, e := range entries {
		out[i] = e.Body
	}
	return out
}

// records is the ledger as the bench lets others read it.
type records struct{ *ledger.Ledger }

// Events gives lines as stored.
func (r records) Events(ctx context.Context, q bench.Query) ([]bench.Line, error) {
	entries, err := r.Ledger.Events(ctx, ledger.Filter{After: q.After, Limit: q.Limit, Subject: q.Run, Kind: q.Kind, Actor: q.Actor})
	if err != nil {
		return nil, err
	}
	out := make([]bench.Line, len(entries))
	for i, e := range entries {
		out[i] = bench.Line{Seq: e.Seq, Line: e.Body}
	}
	return out, nil
}

// Size gives the number of events.
func (r records) Size(context.Context) (int64, error) { return r.Ledger.Size(), nil }

// Checkpoint gives the newest signed checkpoint.
func (r records) Checkpoint(ctx context.Context) (string, error) {
	signed, err := r.NewestCheckpoint(ctx)
	return string(signed), err
}
