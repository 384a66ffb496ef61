package ledger

import (
	"context"
	"crypto/sha256"
	"database/sql"
	"flag"
	"fmt"
	"path/filepath"
	"testing"

	"golang.org/x/mod/sumdb/tlog"
)

var benchEvents = flag.Int("ledger.events", 100_000, "events in the benchmarks' ledger")

// BenchmarkAppend is one event made durable. Its budget is at most 1.5 times
// BenchmarkBareCommit, which writes the same bytes without tree, triggers or checks.
func BenchmarkAppend(b *testing.B) {
	for _, events := range []int{1, 4} {
		b.Run(fmt.Sprintf("what=ledger/events=%d", events), func(b *testing.B) {
			l := open(b, found(b, b.TempDir()))
			drafts := plains(events)
			b.ReportAllocs()
			for b.Loop() {
				if _, err := l.Append(b.Context(), drafts...); err != nil {
					b.Fatal(err)
				}
			}
		})
		b.Run(fmt.Sprintf("what=bare/events=%d", events), func(b *testing.B) { bareCommit(b, events) })
	}
}

// bareCommit commits the bodies of n events with the same durability and nothing else.
func bareCommit(b *testing.B, n int) {
	ctx := b.Context()
	path := filepath.Join(b.TempDir(), "bare.db")
	if err := writeNew(path, "", 0o600); err != nil {
		b.Fatal(err)
	}
	db, err := connectSQLite(ctx, writerDSN(path))
	if err != nil {
		b.Fatal(err)
	}
	defer mustClose(b, db)
	if _, err := db.Exec(`CREATE TABLE event (seq INTEGER PRIMARY KEY, body BLOB)`); err != nil {
		b.Fatal(err)
	}
	insert, err := db.PrepareContext(ctx, `INSERT INTO event VALUES (?, ?)`)
	if err != nil {
		b.Fatal(err)
	}
	seq := int64(0)
	for b.Loop() {
		tx, err := db.BeginTx(ctx, nil)
		if err != nil {
			b.Fatal(err)
		}
		for range n {
			body, err := plain(seq)
			if err != nil {
				b.Fatal(err)
			}
			if _, err := tx.Stmt(insert).Exec(seq, body); err != nil {
				b.Fatal(err)
			}
			seq++
		}
		if err := tx.Commit(); err != nil {
			b.Fatal(err)
		}
	}
}

// grown makes a ledger of the given number of events with a snapshot near its end.
func grown(b *testing.B, events int) Options {
	b.Helper()
	opt := found(b, b.TempDir())
	l := open(b, opt)
	for left := events - 1; left > 0; left -= 1000 {
		mustAppend(b, l, plains(min(left, 1000))...)
	}
	if _, err := l.Checkpoint(b.Context()); err != nil {
		b.Fatal(err)
	}
	if err := l.SaveSnapshot(b.Context(), Snapshot{l.Size(), make([]byte, 1<<20)}); err != nil {
		b.Fatal(err)
	}
	mustClose(b, l)
	return opt
}

// BenchmarkVerify checks a whole ledger (budget: at most 2 times reading the rows and
// hashing them once), and opens it (budget: at most 0.25 times replaying it).
func BenchmarkVerify(b *testing.B) {
	opt := grown(b, *benchEvents)
	b.Run(fmt.Sprintf("what=verify/events=%d", *benchEvents), func(b *testing.B) {
		for b.Loop() {
			r, err := Verify(b.Context(), opt.Path, VerifyOptions{})
			if err != nil || !r.OK() {
				b.Fatal(err, r.First())
			}
		}
	})
	b.Run(fmt.Sprintf("what=read-and-hash/events=%d", *benchEvents), func(b *testing.B) {
		for b.Loop() {
			readAndHash(b, opt.Path)
		}
	})
	b.Run(fmt.Sprintf("what=start/events=%d", *benchEvents), func(b *testing.B) {
		for b.Loop() {
			l, err := Open(b.Context(), opt)
			if err != nil {
				b.Fatal(err)
			}
			if _, ok, err := l.LoadSnapshot(b.Context()); !ok || err != nil {
				b.Fatal(ok, err)
			}
			mustClose(b, l)
		}
	})
	for _, f := range []Filter{{Subject: "B-03-20261201-1"}, {Kind: "reading", Actor: "operator:anna"}, {Subject: "nobody"}} {
		b.Run(fmt.Sprintf("what=search/for=%s%s%s/events=%d", f.Subject, f.Kind, f.Actor, *benchEvents), func(b *testing.B) {
			l := open(b, opt)
			f.After, f.Limit = -1, 1000
			for b.Loop() {
				if _, err := l.Events(b.Context(), f); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
	b.Run(fmt.Sprintf("what=replay/events=%d", *benchEvents), func(b *testing.B) {
		for b.Loop() {
			replayAll(b, opt)
		}
	})
}

// readAndHash is the yardstick: every row read once and its event's bytes hashed once.
func readAndHash(b *testing.B, path string) {
	b.Helper()
	db, err := connectSQLite(b.Context(), readerDSN(path, "ro"))
	if err != nil {
		b.Fatal(err)
	}
	defer mustClose(b, db)
	rows, err := db.Query(`SELECT seq, body, nodes FROM event ORDER BY seq`)
	if err != nil {
		b.Fatal(err)
	}
	defer rows.Close()
	n := 0
	var seq int64
	var body, nodes sql.RawBytes
	for rows.Next() {
		if err := rows.Scan(&seq, &body, &nodes); err != nil {
			b.Fatal(err)
		}
		_ = sha256.Sum256(body)
		n++
	}
	if err := rows.Err(); err != nil || n != *benchEvents {
		b.Fatal(err, n)
	}
}

func replayAll(b *testing.B, opt Options) {
	b.Helper()
	l, err := Open(b.Context(), opt)
	if err != nil {
		b.Fatal(err)
	}
	defer mustClose(b, l)
	if err := l.Replay(context.Background(), 0, func(e Entry) error {
		_, err := ParseHeader(e.Body)
		return err
	}); err != nil {
		b.Fatal(err)
	}
}

// BenchmarkProof makes the two files of a run of 100 events.
func BenchmarkProof(b *testing.B) {
	l := open(b, grown(b, 10_000))
	seqs := make([]int64, 100)
	for i := range seqs {
		seqs[i] = int64(9000 + i)
	}
	for b.Loop() {
		if _, _, err := l.RunProof(b.Context(), seqs); err != nil {
			b.Fatal(err)
		}
	}
}

// BenchmarkPush is the tree alone.
func BenchmarkPush(b *testing.B) {
	var f frontier
	var held []tlog.Hash
	body := line(1, "station:bench-1", "weighing", "B-07-20261201-1", map[string]string{"mass_g": "99.8730"})
	b.ReportAllocs()
	for b.Loop() {
		held = f.push(tlog.RecordHash(body), held[:0])
	}
}
