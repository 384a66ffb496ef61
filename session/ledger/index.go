package ledger

import (
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"maps"
	"slices"
)

// The index: for each block of blockEvents events and each word that occurs in their
// headers, the numbers of the events. A block is indexed once it is complete, so an
// append costs nothing for it and its rows never change.
const blockEvents = 1024

// indexedBlocks gives the number of blocks that are in the index. Every event has an
// actor, so a block without a row is not there. It is counted once and remembered.
func (s *store) indexedBlocks(ctx context.Context) (int64, error) {
	if s.indexed != nil {
		return *s.indexed, nil
	}
	var n int64
	if err := s.db.QueryRowContext(ctx, `SELECT count(DISTINCT block) FROM mention`).Scan(&n); err != nil {
		return 0, err
	}
	s.indexed = &n
	return n, nil
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

// blockWords collects the words of one block.
type blockWords struct{ subjects, kinds, actors wordList }

// wordList gives for each word the numbers of the events that have it.
type wordList map[string]*[]int64

func (l wordList) add(word []byte, seq int64) {
	seqs := l[string(word)]
	if seqs == nil {
		seqs = new([]int64)
		l[string(word)] = seqs
	}
	*seqs = append(*seqs, seq)
}

func newBlockWords() *blockWords { return &blockWords{wordList{}, wordList{}, wordList{}} }

func (w *blockWords) add(h rawHeader) {
	w.subjects.add(h.subject, h.seq)
	w.kinds.add(h.kind, h.seq)
	w.actors.add(h.actor, h.seq)
}

// mention is one row of the index.
type mention struct {
	word  string
	block int64
	seqs  []byte
}

// rows gives the block's rows of the index, in the order of their words.
func (w *blockWords) rows(block int64) []mention {
	var out []mention
	for _, part := range []struct {
		field string
		words wordList
	}{{"actor:", w.actors}, {"kind:", w.kinds}, {"subject:", w.subjects}} {
		for _, word := range slices.Sorted(maps.Keys(part.words)) {
			out = append(out, mention{part.field + word, block, packSeqs(*part.words[word])})
		}
	}
	return out
}

// catchUp indexes what can be indexed now. A failure is no news for anybody: an index that
// lags behind makes queries slower and nothing else, and if the disk is at fault the
// next event says so.
func (l *Ledger) catchUp(ctx context.Context) { _ = l.indexBlocks(ctx, l.edge.size) }

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
	words := newBlockWords()
	for _, r := range rows {
		h, err := parseRaw(r.body)
		if err != nil || h.seq != r.seq {
			return altered(r.seq, "has no readable header")
		}
		words.add(h)
	}
	tx, err := s.db.BeginTx(ctx, nil)
	if err != nil {
		return err
	}
	for _, m := range words.rows(block) {
		if _, err := tx.ExecContext(ctx, `INSERT INTO mention (word, block, seqs) VALUES (?, ?, ?)`, m.word, m.block, m.seqs); err != nil {
			return errors.Join(fmt.Errorf("index block %d: %w", block, err), tx.Rollback())
		}
	}
	s.indexed = nil // counted again, whatever the commit says
	if err := tx.Commit(); err != nil {
		return err
	}
	next := block + 1
	s.indexed = &next
	return nil
}
