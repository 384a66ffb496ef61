package ledger

import (
	"context"
)

// Filter chooses events; empty fields choose all.
type Filter struct {
	After   int64 // only events with a greater number; -1 from the first one on
	Subject string
	Kind    string
	Actor   string
	Limit   int // at most so many, 1 to MaxLimit; 0 means MaxLimit
}

// MaxLimit is the most events that one call gives.
const MaxLimit = 10_000

// words gives the filter as words of the index.
func (f Filter) words() []string {
	var words []string
	for _, w := range []struct{ field, value string }{{"subject", f.Subject}, {"kind", f.Kind}, {"actor", f.Actor}} {
		if w.value != "" {
			words = append(words, w.field+":"+w.value)
		}
	}
	return words
}

func (h Header) matches(f Filter) bool {
	return (f.Subject == "" || f.Subject == h.Subject) && (f.Kind == "" || f.Kind == h.Kind) && (f.Actor == "" || f.Actor == h.Actor)
}

// pageEvents is how many events are looked up in one turn: a long search does not make a
// weight wait.
const pageEvents = 256

// Events gives the events that the filter chooses, in order.
func (s *store) Events(ctx context.Context, f Filter) ([]Entry, error) {
	left := f.Limit
	if left <= 0 || left > MaxLimit {
		left = MaxLimit
	}
	var out []Entry
	for {
		f.Limit = min(left, pageEvents)
		page, err := s.page(ctx, f)
		if err != nil {
			return nil, err
		}
		out, left = append(out, page...), left-len(page)
		if left == 0 || len(page) < f.Limit {
			return out, nil
		}
		f.After = page[len(page)-1].Seq
	}
}

// page takes one turn.
func (s *store) page(ctx context.Context, f Filter) ([]Entry, error) {
	if err := s.enter(ctx); err != nil {
		return nil, err
	}
	defer s.leave()
	entries, err := s.find(ctx, f)
	return entries, explain("read", s.path, err)
}

// find uses the index for whole blocks and looks through the events behind them.
func (s *store) find(ctx context.Context, f Filter) ([]Entry, error) {
	if len(f.words()) == 0 {
		return s.entries(ctx, f.After+1, f.Limit, nil)
	}
	indexed, err := s.indexedBlocks(ctx)
	if err != nil {
		return nil, err
	}
	seqs, err := s.lookUp(ctx, f, indexed)
	if err != nil {
		return nil, err
	}
	var out []Entry
	for _, seq := range seqs {
		rows, err := s.rows(ctx, seq, 1)
		if err != nil {
			return nil, err
		}
		if len(rows) != 1 || rows[0].seq != seq {
			return nil, altered(seq, "is missing")
		}
		out = append(out, Entry{seq, rows[0].body})
	}
	if len(out) == f.Limit {
		return out, nil
	}
	tail, err := s.entries(ctx, max(f.After+1, indexed*blockEvents), f.Limit-len(out), func(h Header) bool { return h.matches(f) })
	return append(out, tail...), err
}

// entries reads up to limit events from the given number on that keep chooses.
func (s *store) entries(ctx context.Context, from int64, limit int, keep func(Header) bool) ([]Entry, error) {
	var out []Entry
	for {
		batch, err := s.rows(ctx, from, min(limit, batchRows))
		if err != nil || len(batch) == 0 {
			return out, err
		}
		for _, r := range batch {
			if keep != nil {
				h, err := ParseHeader(r.body)
				if err != nil {
					return nil, altered(r.seq, "has no readable header")
				}
				if !keep(h) {
					continue
				}
			}
			if out = append(out, Entry{r.seq, r.body}); len(out) == limit {
				return out, nil
			}
		}
		from = batch[len(batch)-1].seq + 1
	}
}

// Replay hands every event from the given number on to fn, in order and without a gap,
// up to the size at the time of the call.
func (s *store) Replay(ctx context.Context, from int64, fn func(Entry) error) error {
	size, err := s.countNow(ctx)
	if err != nil {
		return err
	}
	err = s.eachRow(ctx, from, size, func(r row) error { return fn(Entry{r.seq, r.body}) })
	return alteredFault(s.path, err)
}

func (s *store) countNow(ctx context.Context) (int64, error) {
	if err := s.enter(ctx); err != nil {
		return 0, err
	}
	defer s.leave()
	n, err := countEvents(ctx, s.db)
	return n, explain("read", s.path, err)
}

// keyChanges gives the events that change the key. Own turn assumed.
func (s *store) keyChanges(ctx context.Context) ([]Entry, error) {
	return s.find(ctx, Filter{After: -1, Kind: KindKeyChanged, Limit: MaxLimit})
}
