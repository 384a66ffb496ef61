package ledger

import (
	"context"
	"database/sql"
	"errors"
	"fmt"

	"tenthmark/session"
)

// applicationID marks the file as a tenthmark ledger ("tmkL" as a big-endian
// number, written into bytes 68 to 71 of the SQLite header); schemaVersion is raised
// when the tables change.
const (
	applicationID = 0x746d6b4c
	schemaVersion = 1
)

// object is one entry of the database's own catalogue, compared word by word when a
// ledger is opened: a trigger that is gone is as bad as a changed row.
type object struct{ kind, name, sql string }

// objects are the ledger's tables and guards in the order in which they are made.
//
// event holds the record; everything else can be rebuilt from it or checked with it.
// nodes are the 32-byte hashes that the event completes: its leaf, then subtrees.
// mention is the index, snapshot a cache; both may be thrown away.
var objects = []object{
	{"table", "event", `CREATE TABLE event (
  seq INTEGER PRIMARY KEY CHECK (seq >= 0),
  body BLOB NOT NULL CHECK (length(body) BETWEEN 2 AND 65535),
  nodes BLOB NOT NULL CHECK (length(nodes) >= 32 AND length(nodes) % 32 = 0)
) STRICT`},
	{"table", "checkpoint", `CREATE TABLE checkpoint (
  size INTEGER PRIMARY KEY CHECK (size > 0),
  note BLOB NOT NULL
) STRICT`},
	{"table", "snapshot", `CREATE TABLE snapshot (
  size INTEGER PRIMARY KEY CHECK (size > 0),
  note BLOB NOT NULL,
  state BLOB NOT NULL
) STRICT`},
	{"table", "mention", `CREATE TABLE mention (
  word TEXT NOT NULL,
  block INTEGER NOT NULL CHECK (block >= 0),
  seqs BLOB NOT NULL,
  PRIMARY KEY (word, block)
) STRICT, WITHOUT ROWID`},
	{"trigger", "event_in_order", `CREATE TRIGGER event_in_order BEFORE INSERT ON event
WHEN NEW.seq <> (SELECT coalesce(max(seq) + 1, 0) FROM event)
BEGIN SELECT RAISE(ABORT, 'events are numbered without gap'); END`},
	{"trigger", "event_not_changed", `CREATE TRIGGER event_not_changed BEFORE UPDATE ON event
BEGIN SELECT RAISE(ABORT, 'events are append-only'); END`},
	{"trigger", "event_not_deleted", `CREATE TRIGGER event_not_deleted BEFORE DELETE ON event
BEGIN SELECT RAISE(ABORT, 'events are append-only'); END`},
	{"trigger", "checkpoint_in_order", `CREATE TRIGGER checkpoint_in_order BEFORE INSERT ON checkpoint
WHEN NEW.size <= (SELECT coalesce(max(size), 0) FROM checkpoint)
BEGIN SELECT RAISE(ABORT, 'checkpoints only grow'); END`},
	{"trigger", "checkpoint_not_changed", `CREATE TRIGGER checkpoint_not_changed BEFORE UPDATE ON checkpoint
BEGIN SELECT RAISE(ABORT, 'checkpoints are append-only'); END`},
	{"trigger", "checkpoint_not_deleted", `CREATE TRIGGER checkpoint_not_deleted BEFORE DELETE ON checkpoint
BEGIN SELECT RAISE(ABORT, 'checkpoints are append-only'); END`},
}

// makeSchema writes the tables into an empty database.
func makeSchema(ctx context.Context, tx *sql.Tx) error {
	for _, o := range objects {
		if _, err := tx.ExecContext(ctx, o.sql); err != nil {
			return fmt.Errorf("create %s %s: %w", o.kind, o.name, err)
		}
	}
	return nil
}

// checkIdentity refuses a database that is not a ledger of this version.
func (s *store) checkIdentity(ctx context.Context) error {
	id, err := s.pragmaInt(ctx, "application_id")
	if err != nil {
		return explain("read", s.path, err)
	}
	if id != applicationID {
		return session.Refuse("ledger-foreign", s.path+" is a database of another program.",
			"Check the path of the ledger in the configuration.")
	}
	version, err := s.pragmaInt(ctx, "user_version")
	if err != nil {
		return explain("read", s.path, err)
	}
	if version > schemaVersion {
		return session.Refuse("ledger-newer", fmt.Sprintf("The ledger %s was written by a newer version (form %d, this program knows %d).", s.path, version, schemaVersion),
			"Install the newer version again. The ledger was not touched.")
	}
	if version < 1 {
		return session.Refuse("ledger-altered", fmt.Sprintf("The ledger %s has the unknown form %d.", s.path, version),
			"Run: tenthmark ledger verify, and restore the last backup.")
	}
	return s.checkSchema(ctx)
}

// checkSchema compares the catalogue with what Create wrote.
func (s *store) checkSchema(ctx context.Context) error {
	rows, err := s.db.QueryContext(ctx, `SELECT type, name, tbl_name, coalesce(sql, '') FROM sqlite_schema ORDER BY rowid`)
	if err != nil {
		return explain("read", s.path, err)
	}
	defer rows.Close()
	want := objects
	for rows.Next() {
		var got object
		var table string
		if err := rows.Scan(&got.kind, &got.name, &table, &got.sql); err != nil {
			return explain("read", s.path, err)
		}
		if len(want) == 0 || got != want[0] || table != tableOf(got) {
			return schemaAltered(s.path, fmt.Errorf("unexpected %s %q", got.kind, got.name))
		}
		want = want[1:]
	}
	if err := rows.Err(); err != nil {
		return explain("read", s.path, err)
	}
	if len(want) > 0 {
		return schemaAltered(s.path, fmt.Errorf("%s %q is missing", want[0].kind, want[0].name))
	}
	return nil
}

// tableOf names the table an object belongs to, by its first word.
func tableOf(o object) string {
	for i := range len(o.name) {
		if o.name[i] == '_' {
			return o.name[:i]
		}
	}
	return o.name
}

func schemaAltered(path string, err error) error {
	return &session.Fault{
		Code: "ledger-altered", Message: "The tables or guards of the ledger " + path + " were changed from outside.",
		Hint: "Keep this file as it is for investigation and restore the last backup.", Err: errors.Join(ErrAltered, err),
	}
}
