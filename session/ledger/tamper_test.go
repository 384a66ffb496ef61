package ledger

import (
	"bytes"
	"context"
	"database/sql"
	"errors"
	"flag"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// crime is one way to change a ledger behind the daemon's back, with every guard off.
func crime(t testing.TB, path string, queries ...string) {
	t.Helper()
	db, err := sql.Open("sqlite", "file:"+path+"?mode=rw")
	if err != nil {
		t.Fatal(err)
	}
	defer mustClose(t, db)
	db.SetMaxOpenConns(1)
	for _, o := range objects {
		if o.kind == "trigger" {
			queries = append([]string{"DROP TRIGGER " + o.name}, queries...)
		}
	}
	for _, q := range append(append([]string{"PRAGMA ignore_check_constraints=1"}, queries...), guards()...) {
		if _, err := db.ExecContext(t.Context(), q); err != nil {
			t.Fatalf("%s: %v", q, err)
		}
	}
}

func guards() []string {
	var out []string
	for _, o := range objects {
		if o.kind == "trigger" {
			out = append(out, o.sql)
		}
	}
	return out
}

func copyFile(t testing.TB, from, to string) {
	t.Helper()
	src, err := os.Open(from)
	if err != nil {
		t.Fatal(err)
	}
	defer mustClose(t, src)
	dst, err := os.Create(to)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := io.Copy(dst, src); err != nil {
		t.Fatal(err)
	}
	mustClose(t, dst)
}

// sample is a closed ledger of n further events with three checkpoints and a snapshot,
// its last checkpoint and key.
type sample struct {
	path, key  string
	checkpoint []byte
	older      []byte
}

func makeSample(t testing.TB, n int) sample {
	t.Helper()
	opt := found(t, t.TempDir())
	l := open(t, opt)
	mustAppend(t, l, plains(n/2)...)
	older, err := l.Checkpoint(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	if err := l.SaveSnapshot(t.Context(), Snapshot{Size: l.Size(), State: []byte("the state of half the events")}); err != nil {
		t.Fatal(err)
	}
	for range n - n/2 {
		mustAppend(t, l, plain)
	}
	signed, err := l.Checkpoint(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	s := sample{opt.Path, l.PublicKey(), signed, older}
	mustClose(t, l)
	return s
}

func (s sample) copy(t testing.TB) sample {
	s2 := s
	s2.path = filepath.Join(t.TempDir(), "copy.db")
	copyFile(t, s.path, s2.path)
	return s2
}

// verify checks with the key and the last checkpoint, as someone outside does.
func (s sample) verify(t testing.TB) Report {
	t.Helper()
	r, err := Verify(context.Background(), s.path, VerifyOptions{PublicKey: s.key, Checkpoints: [][]byte{s.checkpoint}})
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func TestVerifyGoodLedger(t *testing.T) {
	s := makeSample(t, 2500)
	seen := int64(0)
	r, err := Verify(t.Context(), s.path, VerifyOptions{
		PublicKey: s.key, Checkpoints: [][]byte{s.older, s.checkpoint},
		Event: func(e Entry) error {
			if e.Seq != seen {
				t.Fatalf("event %d came as number %d", e.Seq, seen)
			}
			seen++
			return nil
		},
		Snapshot: func(snap Snapshot) error {
			if seen != snap.Size || string(snap.State) != "the state of half the events" {
				t.Errorf("snapshot of %d events after %d", snap.Size, seen)
			}
			return nil
		},
	})
	if err != nil {
		t.Fatal(err)
	}
	if !r.OK() || r.Events != 2501 || seen != 2501 || r.Checkpoints != 3 || r.Outside != 2 || !r.Trusted || r.Covered != 2501 {
		t.Errorf("report %+v, first finding %v", r, r.First())
	}
}

// TestEveryCrimeIsFound changes a ledger in every way that needs no signing key.
func TestEveryCrimeIsFound(t *testing.T) {
	s := makeSample(t, 1100)
	for _, tt := range []struct {
		name string
		sql  []string
		seq  int64 // the event that must be named, -1 for none
	}{
		{"a digit changed", []string{`UPDATE event SET body = CAST(replace(CAST(body AS TEXT), '"n":77', '"n":78') AS BLOB) WHERE seq = 77`}, 77},
		{"a row removed", []string{`DELETE FROM event WHERE seq = 50`}, 50},
		{"the first row removed", []string{`DELETE FROM event WHERE seq = 0`}, 0},
		{"all rows removed", []string{`DELETE FROM event`}, 0},
		{"two rows swapped", []string{`UPDATE event SET seq = -1 WHERE seq = 9`, `UPDATE event SET seq = 9 WHERE seq = 10`, `UPDATE event SET seq = 10 WHERE seq = -1`}, 9},
		{"two bodies swapped", []string{
			`CREATE TEMP TABLE b AS SELECT seq, body FROM event WHERE seq IN (9, 10)`,
			`UPDATE event SET body = (SELECT body FROM b WHERE b.seq = 19 - event.seq) WHERE seq IN (9, 10)`,
		}, 9},
		{"a row inserted", []string{`UPDATE event SET seq = -seq - 1 WHERE seq >= 20`, `UPDATE event SET seq = -seq WHERE seq < 0`, `INSERT INTO event SELECT 20, body, nodes FROM event WHERE seq = 19`}, 20},
		{"a row appended", []string{`INSERT INTO event SELECT 1101, body, nodes FROM event WHERE seq = 19`}, 1101},
		{"a row far away", []string{`INSERT INTO event SELECT 4611686018427387904, body, nodes FROM event WHERE seq = 19`}, 1101},
		{"a row before the first", []string{`INSERT INTO event SELECT -3, body, nodes FROM event WHERE seq = 19`}, -1},
		{"the tail cut", []string{`DELETE FROM event WHERE seq > 1090`, `DELETE FROM checkpoint WHERE size > 1090`}, 1091},
		{"the tail cut with its checkpoint kept", []string{`DELETE FROM event WHERE seq > 1090`}, 1091},
		{"all checkpoints removed", []string{`DELETE FROM checkpoint`}, -1},
		{"a checkpoint refiled", []string{`UPDATE checkpoint SET size = 3 WHERE size = 1`}, -1},
		{"a node changed", []string{`UPDATE event SET nodes = CAST(zeroblob(length(nodes)) AS BLOB) WHERE seq = 33`}, 33},
		{"a node too many", []string{`UPDATE event SET nodes = CAST(nodes || zeroblob(32) AS BLOB) WHERE seq = 33`}, 33},
		{"the index changed", []string{`UPDATE mention SET seqs = zeroblob(2) WHERE word = 'kind:reading'`}, -1},
		{"a word of the index removed", []string{`DELETE FROM mention WHERE word = 'actor:operator:anna'`}, -1},
		{"a block of the index invented", []string{`INSERT INTO mention VALUES ('kind:x', 1, x'0000')`}, -1},
		{"the snapshot changed", []string{`UPDATE snapshot SET state = CAST('a better state' AS BLOB)`}, -1},
		{"the snapshot moved", []string{`UPDATE snapshot SET size = size + 1`}, -1},
		{"the form raised", []string{`PRAGMA user_version = 0`}, -1},
		{"a table added", []string{`CREATE TABLE note (x INTEGER) STRICT`}, -1},
	} {
		t.Run(tt.name, func(t *testing.T) {
			c := s.copy(t)
			crime(t, c.path, tt.sql...)
			r := c.verify(t)
			if r.OK() {
				t.Fatal("not found")
			}
			if f := r.First(); tt.seq >= 0 && f.Seq != tt.seq {
				t.Errorf("first bad event %d (%v), want %d", f.Seq, f, tt.seq)
			}
		})
	}
}

// TestGuardsAreMissed removes each trigger, which changes no row.
func TestGuardsAreMissed(t *testing.T) {
	s := makeSample(t, 5)
	for _, o := range objects {
		if o.kind != "trigger" {
			continue
		}
		t.Run(o.name, func(t *testing.T) {
			c := s.copy(t)
			db, err := sql.Open("sqlite", "file:"+c.path)
			if err != nil {
				t.Fatal(err)
			}
			if _, err := db.Exec("DROP TRIGGER " + o.name); err != nil {
				t.Fatal(err)
			}
			mustClose(t, db)
			if c.verify(t).OK() {
				t.Error("not found")
			}
		})
	}
}

// TestEveryBitOfEveryRow flips each bit of each stored value of a small ledger, in every
// table, and demands that verification finds it.
func TestEveryBitOfEveryRow(t *testing.T) {
	t.Parallel()
	s := makeSample(t, 2)
	c := s.copy(t)
	db, err := sql.Open("sqlite", "file:"+c.path+"?_pragma=synchronous(0)&_pragma=journal_mode(MEMORY)&_pragma=ignore_check_constraints(1)")
	if err != nil {
		t.Fatal(err)
	}
	defer mustClose(t, db)
	db.SetMaxOpenConns(1)
	for _, o := range objects {
		if o.kind == "trigger" {
			flip(t, db, "DROP TRIGGER "+o.name)
		}
	}
	flips := 0
	for _, table := range []struct {
		name, key string
		blobs     []string
	}{
		{"event", "seq", []string{"body", "nodes"}},
		{"checkpoint", "size", []string{"note"}},
		{"snapshot", "size", []string{"note", "state"}},
	} {
		for _, column := range table.blobs {
			flips += flipColumn(t, db, c, table.name, table.key, column)
		}
	}
	t.Logf("%d single-bit changes, all found", flips)
}

type value struct {
	key  int64
	blob []byte
}

func flipColumn(t *testing.T, db *sql.DB, c sample, table, key, column string) (flips int) {
	t.Helper()
	checker := func() Report {
		r := &Reader{store: newStore(c.path)}
		r.db = db
		check := newChecker(r.store, VerifyOptions{PublicKey: c.key, Checkpoints: [][]byte{c.checkpoint}})
		for _, part := range []func(context.Context) error{check.small, check.events, check.finish} {
			if err := part(t.Context()); err != nil {
				t.Fatal(err)
			}
		}
		return check.report
	}
	set := fmt.Sprintf("UPDATE %s SET %s = ? WHERE %s = ?", table, column, key)
	for _, v := range values(t, db, fmt.Sprintf("SELECT %s, %s FROM %s", key, column, table)) {
		for bit := range 8 * len(v.blob) {
			bad := bytes.Clone(v.blob)
			bad[bit/8] ^= 1 << (bit % 8)
			flip(t, db, set, bad, v.key)
			if checker().OK() {
				t.Errorf("%s.%s of %d: bit %d flipped, not found", table, column, v.key, bit)
			}
			flips++
		}
		flip(t, db, set, v.blob, v.key)
	}
	if r := checker(); !r.OK() {
		t.Fatalf("not restored: %v", r.First())
	}
	return flips
}

func values(t *testing.T, db *sql.DB, query string) []value {
	t.Helper()
	rs, err := db.Query(query)
	if err != nil {
		t.Fatal(err)
	}
	defer rs.Close()
	var out []value
	for rs.Next() {
		var v value
		if err := rs.Scan(&v.key, &v.blob); err != nil {
			t.Fatal(err)
		}
		out = append(out, v)
	}
	return out
}

func flip(t *testing.T, db *sql.DB, set string, args ...any) {
	t.Helper()
	if _, err := db.Exec(set, args...); err != nil {
		t.Fatal(err)
	}
}

// TestEveryBitOfTheIndex does the same with the index of a block of events.
func TestEveryBitOfTheIndex(t *testing.T) {
	t.Parallel()
	s := makeSample(t, 1100)
	db, err := sql.Open("sqlite", "file:"+s.path+"?_pragma=synchronous(0)&_pragma=journal_mode(MEMORY)")
	if err != nil {
		t.Fatal(err)
	}
	defer mustClose(t, db)
	db.SetMaxOpenConns(1)
	r := &Reader{store: newStore(s.path)}
	r.db = db
	check := newChecker(r.store, VerifyOptions{})
	if report, err := check.run(t.Context()); err != nil || !report.OK() {
		t.Fatal(err, report.First())
	}
	stride := 13
	if *longForms {
		stride = 1
	}
	flips := 0
	rows := values(t, db, `SELECT row_number() OVER (ORDER BY word), seqs FROM mention ORDER BY word`)
	for _, v := range rows {
		var word string
		if err := db.QueryRow(`SELECT word FROM mention ORDER BY word LIMIT 1 OFFSET ?`, v.key-1).Scan(&word); err != nil {
			t.Fatal(err)
		}
		for bit := int(v.key); bit < 8*len(v.blob); bit += stride {
			bad := bytes.Clone(v.blob)
			bad[bit/8] ^= 1 << (bit % 8)
			flip(t, db, `UPDATE mention SET seqs = ? WHERE word = ?`, bad, word)
			check.report.Findings = nil
			if err := check.index(t.Context()); err != nil || check.report.OK() {
				t.Fatalf("%s: bit %d flipped, not found (%v)", word, bit, err)
			}
			flips++
		}
		flip(t, db, `UPDATE mention SET seqs = ? WHERE word = ?`, v.blob, word)
	}
	t.Logf("%d single-bit changes, all found", flips)
}

var longForms = flag.Bool("ledger.long", false, "flip every single bit of the file, not a sample")

// TestEveryBitOfTheFile flips bits of the file itself, as a hex editor or a bad disk does.
// A flip must be found, or leave everything that the ledger says as it was: bits of
// unused space and of counters mean nothing.
func TestEveryBitOfTheFile(t *testing.T) {
	s := makeSample(t, 6)
	c := s.copy(t)
	whole, err := os.ReadFile(c.path)
	if err != nil {
		t.Fatal(err)
	}
	want := dump(t, c.path)
	stride := 1009
	if *longForms {
		stride = 1
	}
	f, err := os.OpenFile(c.path, os.O_RDWR, 0)
	if err != nil {
		t.Fatal(err)
	}
	defer mustClose(t, f)
	flips, silent := 0, 0
	for bit := 0; bit < 8*len(whole); bit += stride {
		at := int64(bit / 8)
		if _, err := f.WriteAt([]byte{whole[at] ^ 1<<(bit%8)}, at); err != nil {
			t.Fatal(err)
		}
		r, err := Verify(t.Context(), c.path, VerifyOptions{PublicKey: c.key, Checkpoints: [][]byte{c.checkpoint}})
		if err == nil && r.OK() {
			silent++
			if got := dump(t, c.path); got != want {
				t.Errorf("bit %d flipped, not found, and the ledger says something else", bit)
			}
		}
		flips++
		if _, err := f.WriteAt(whole[at:at+1], at); err != nil {
			t.Fatal(err)
		}
	}
	t.Logf("%d single-bit changes of the file, %d without any meaning", flips, silent)
}

// dump gives all that a ledger says.
func dump(t *testing.T, path string) string {
	t.Helper()
	db, err := sql.Open("sqlite", "file:"+path+"?mode=ro")
	if err != nil {
		t.Fatal(err)
	}
	defer mustClose(t, db)
	var b strings.Builder
	for _, query := range []string{
		`SELECT seq, hex(body) || hex(nodes) FROM event`, `SELECT size, hex(note) FROM checkpoint`,
		`SELECT size, hex(note) || hex(state) FROM snapshot`, `SELECT block, word || hex(seqs) FROM mention`,
		`SELECT 0, type || name || tbl_name || sql FROM sqlite_schema`,
	} {
		rs, err := db.Query(query)
		if err != nil {
			return "unreadable: " + err.Error()
		}
		for rs.Next() {
			var n int64
			var text string
			if err := rs.Scan(&n, &text); err != nil {
				return "unreadable: " + err.Error()
			}
			fmt.Fprintln(&b, n, text)
		}
		if err := errors.Join(rs.Err(), rs.Close()); err != nil {
			return "unreadable: " + err.Error()
		}
	}
	return b.String()
}
