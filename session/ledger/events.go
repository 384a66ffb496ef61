package ledger

import (
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"slices"
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

func (h Header) words() [3]string {
	return [3]string{"subject:" + h.Subject, "kind:" + h.Kind, "actor:" + h.Actor}
}

func (h Header) matches(f Filter) bool {
	return (f.Subject == "" || f.Subject == h.Subject) && (f.Kind == "" || f.Kind == h.Kind) && (f.Actor == "" || f.Actor == h.Actor)
}

// Events gives the events that the filter chooses, in order.
func (s *store) Events(ctx context.Context, f Filter) ([]Entry, error) {
	if f.Limit <= 0 || f.Limit > MaxLimit {
		f.Limit = MaxLimit
	}
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

// The index: for each block of blockEvents events and each word that occurs in their
// headers, the numbers of the events. A block is indexed once it is complete, so an
// append costs nothing for it and its rows never change.
const blockEvents = 1024

// indexedBlocks gives the number of blocks that are in the index. Every event has an
// actor, a kind and a subject, so a block without a row is not there.
func (s *store) indexedBlocks(ctx context.Context) (int64, error) {
	var n int64
	err := s.db.QueryRowContext(ctx, `SELECT count(DISTINCT block) FROM mention`).Scan(&n)
	return n, err
}

// lookUp gives the numbers of at most f.Limit events after f.After in the indexed blocks.
func (s *store) lookUp(ctx context.Context, f Filter, blocks int64) ([]int64, error) {
	var common map[int64][]int64
	for _, word := range f.words() {
		found, err := s.mentions(ctx, word, (f.After+1)/blockEvents)
		if err != nil {
			return nil, err
		}
		common = intersect(common, found)
	}
	var out []int64
	for block := (f.After + 1) / blockEvents; block < blocks && len(out) < f.Limit; block++ {
		for _, seq := range common[block] {
			if seq > f.After && len(out) < f.Limit {
				out = append(out, seq)
			}
		}
	}
	return out, nil
}

func (s *store) mentions(ctx context.Context, word string, from int64) (map[int64][]int64, error) {
	rs, err := s.db.QueryContext(ctx, `SELECT block, seqs FROM mention WHERE word = ? AND block >= ?`, word, from)
	if err != nil {
		return nil, err
	}
	defer rs.Close()
	found := map[int64][]int64{}
	for rs.Next() {
		var block int64
		var packed []byte
		if err := rs.Scan(&block, &packed); err != nil {
			return nil, err
		}
		if found[block], err = unpackSeqs(block, packed); err != nil {
			return nil, err
		}
	}
	return found, rs.Err()
}

// intersect keeps in each block the numbers that are in both; a nil map means all.
func intersect(a, b map[int64][]int64) map[int64][]int64 {
	if a == nil {
		return b
	}
	for block, seqs := range a {
		a[block] = slices.DeleteFunc(seqs, func(seq int64) bool {
			_, found := slices.BinarySearch(b[block], seq)
			return !found
		})
	}
	return a
}

// packSeqs stores each number as its 16-bit place in the block.
func packSeqs(seqs []int64) []byte {
	packed := make([]byte, 0, 2*len(seqs))
	for _, seq := range seqs {
		packed = binary.BigEndian.AppendUint16(packed, uint16(seq%blockEvents))
	}
	return packed
}

var errIndex = errors.New("the index is damaged")

func unpackSeqs(block int64, packed []byte) ([]int64, error) {
	if len(packed)%2 != 0 {
		return nil, errIndex
	}
	seqs := make([]int64, 0, len(packed)/2)
	for i := 0; i < len(packed); i += 2 {
		place := int64(binary.BigEndian.Uint16(packed[i:]))
		if place >= blockEvents {
			return nil, errIndex
		}
		seqs = append(seqs, block*blockEvents+place)
	}
	return seqs, nil
}

// indexBlocks brings the index up to the last complete block, one transaction each.
// Own turn assumed.
func (s *store) indexBlocks(ctx context.Context, size int64) error {
	done, err := s.indexedBlocks(ctx)
	if err != nil {
		return explain("index", s.path, err)
	}
	for block := done; block < size/blockEvents; block++ {
		if err := s.indexBlock(ctx, block); err != nil {
			return explain("index", s.path, err)
		}
	}
	return nil
}

func (s *store) indexBlock(ctx context.Context, block int64) error {
	rows, err := s.rows(ctx, block*blockEvents, blockEvents)
	if err != nil {
		return err
	}
	words := map[string][]int64{}
	for _, r := range rows {
		h, err := ParseHeader(r.body)
		if err != nil {
			return altered(r.seq, "has no readable header")
		}
		for _, w := range h.words() {
			words[w] = append(words[w], r.seq)
		}
	}
	tx, err := s.db.BeginTx(ctx, nil)
	if err != nil {
		return err
	}
	for w, seqs := range words {
		if _, err := tx.ExecContext(ctx, `INSERT INTO mention (word, block, seqs) VALUES (?, ?, ?)`, w, block, packSeqs(seqs)); err != nil {
			return errors.Join(fmt.Errorf("index block %d: %w", block, err), tx.Rollback())
		}
	}
	return tx.Commit()
}

// keyChanges gives the events that change the key. Own turn assumed.
func (s *store) keyChanges(ctx context.Context) ([]Entry, error) {
	return s.find(ctx, Filter{After: -1, Kind: KindKeyChanged, Limit: MaxLimit})
}
