package ledger

import (
	"context"
	"database/sql"
	"errors"
	"fmt"

	"golang.org/x/mod/sumdb/tlog"
)

// store is the one connection to the file and the reading of it. A turn, not a
// mutex, guards it, so that whoever waits can give up with its context.
type store struct {
	path string
	turn chan struct{}

	// These belong to the turn.
	db      *sql.DB // nil when closed or broken
	closed  bool
	indexed *int64 // blocks in the index, nil when not counted yet
}

func newStore(path string) *store {
	s := &store{path: path, turn: make(chan struct{}, 1)}
	s.turn <- struct{}{}
	return s
}

// enter waits for the connection.
func (s *store) enter(ctx context.Context) error {
	select {
	case <-s.turn:
		if s.db == nil {
			defer s.leave()
			return s.away()
		}
		return nil
	case <-ctx.Done():
		return ctx.Err()
	}
}

// away says why there is no connection.
func (s *store) away() error {
	if s.closed {
		return fmt.Errorf("use %s: %w", s.path, errClosed)
	}
	return refuseBroken(nil)
}

func (s *store) leave() { s.turn <- struct{}{} }

func (s *store) connect(ctx context.Context, dsn string) error {
	db, err := connectSQLite(ctx, dsn)
	if err != nil {
		return explain("open", s.path, err)
	}
	s.db, s.indexed = db, nil
	return nil
}

func (s *store) disconnect() error {
	if s.db == nil {
		return nil
	}
	err := s.db.Close()
	s.db = nil
	return err
}

// querier is what a connection and an open transaction have in common.
type querier interface {
	QueryContext(ctx context.Context, query string, args ...any) (*sql.Rows, error)
	QueryRowContext(ctx context.Context, query string, args ...any) *sql.Row
}

// countEvents gives the number of the last event plus one. That no number is
// missing is checked where the rows are read.
func countEvents(ctx context.Context, q querier) (int64, error) {
	var n int64
	err := q.QueryRowContext(ctx, `SELECT coalesce(max(seq) + 1, 0) FROM event`).Scan(&n)
	return n, err
}

// row is an event with the hashes stored beside it.
type row struct {
	seq         int64
	body, nodes []byte
}

// batchRows is how many events are read at a time: the connection is free between
// two batches, so a long reading never makes a weight wait for more than some
// milliseconds.
const batchRows = 2048

// usualRow is what a row usually takes, bytes; only a guess for the buffer.
const usualRow = 384

// rows reads up to limit events from the given number on, in order, as they stand:
// gaps and all. The bodies of one call share memory but not capacity.
func (s *store) rows(ctx context.Context, from int64, limit int) ([]row, error) {
	rs, err := s.db.QueryContext(ctx, `SELECT seq, body, nodes FROM event WHERE seq >= ? ORDER BY seq LIMIT ?`, from, limit)
	if err != nil {
		return nil, err
	}
	defer rs.Close()
	out := make([]row, 0, min(limit, batchRows))
	held := make([]byte, 0, min(limit, batchRows)*usualRow)
	var seq int64
	var body, nodes sql.RawBytes
	for rs.Next() {
		if err := rs.Scan(&seq, &body, &nodes); err != nil {
			return nil, err
		}
		start, middle := len(held), len(held)+len(body)
		held = append(append(held, body...), nodes...)
		out = append(out, row{seq, held[start:middle:middle], held[middle:len(held):len(held)]})
	}
	return out, rs.Err()
}

// eachRow hands every event in [from, to) to fn, which runs without the turn. A gap
// is an error.
func (s *store) eachRow(ctx context.Context, from, to int64, fn func(row) error) error {
	for from < to {
		batch, err := s.batch(ctx, from, min(batchRows, int(to-from)))
		if err != nil {
			return err
		}
		for _, r := range batch {
			if r.seq != from {
				break
			}
			if err := fn(r); err != nil {
				return err
			}
			from++
		}
		if len(batch) == 0 || batch[len(batch)-1].seq != from-1 {
			return altered(from, "is missing")
		}
	}
	return nil
}

// batch takes a turn for one reading.
func (s *store) batch(ctx context.Context, from int64, limit int) ([]row, error) {
	if err := s.enter(ctx); err != nil {
		return nil, err
	}
	defer s.leave()
	batch, err := s.rows(ctx, from, limit)
	return batch, explain("read", s.path, err)
}

// node reads the hash at (level, n) from the row that keeps it. Own turn assumed.
func (s *store) node(ctx context.Context, level int, n int64) (tlog.Hash, error) {
	var h tlog.Hash
	var part []byte
	err := s.db.QueryRowContext(ctx, `SELECT substr(nodes, ?, 32) FROM event WHERE seq = ?`,
		level*tlog.HashSize+1, keeper(level, n)).Scan(&part)
	if errors.Is(err, sql.ErrNoRows) || err == nil && len(part) != tlog.HashSize {
		return h, altered(keeper(level, n), fmt.Sprintf("has no tree node of level %d", level))
	}
	if err != nil {
		return h, explain("read", s.path, err)
	}
	copy(h[:], part)
	return h, nil
}

// hashes reads tree nodes for the tlog algorithms and remembers them, as the paths of
// one run's events share most of their nodes.
type hashes struct {
	ctx  context.Context
	s    *store
	seen map[int64]tlog.Hash
}

func (s *store) hashes(ctx context.Context) *hashes {
	return &hashes{ctx: ctx, s: s, seen: map[int64]tlog.Hash{}}
}

// ReadHashes gives the hashes in the order asked for.
func (r *hashes) ReadHashes(indexes []int64) ([]tlog.Hash, error) {
	out := make([]tlog.Hash, len(indexes))
	for i, index := range indexes {
		h, known := r.seen[index]
		if !known {
			level, n := tlog.SplitStoredHashIndex(index)
			var err error
			if h, err = r.s.node(r.ctx, level, n); err != nil {
				return nil, err
			}
			r.seen[index] = h
		}
		out[i] = h
	}
	return out, nil
}

// frontierAt rebuilds the right edge of the tree of the given size from stored nodes.
// Own turn assumed.
func (s *store) frontierAt(ctx context.Context, size int64) (frontier, error) {
	f := frontier{size: size}
	for level, done := 62, int64(0); level >= 0; level-- {
		if size>>uint(level)&1 == 0 {
			continue
		}
		h, err := s.node(ctx, level, done>>uint(level))
		if err != nil {
			return frontier{}, err
		}
		f.hashes = append(f.hashes, h)
		done += 1 << uint(level)
	}
	return f, nil
}

// altered is the finding that an event does not stand as it was written.
func altered(seq int64, what string) error { return &Finding{Seq: seq, What: what} }
