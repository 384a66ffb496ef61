package ledger

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// TestOwnConnectionCannotChange tries to change the record with the daemon's own
// connection, as a fault of the program would.
func TestOwnConnectionCannotChange(t *testing.T) {
	opt := found(t, t.TempDir())
	l := open(t, opt)
	mustAppend(t, l, plains(5)...)
	for _, tt := range []struct{ name, sql, want string }{
		{"update an event", `UPDATE event SET body = x'7b7d' WHERE seq = 2`, "append-only"},
		{"renumber an event", `UPDATE event SET seq = 77 WHERE seq = 5`, "append-only"},
		{"delete an event", `DELETE FROM event WHERE seq = 5`, "append-only"},
		{"delete all events", `DELETE FROM event`, "append-only"},
		{"replace an event", `INSERT OR REPLACE INTO event SELECT 2, body, nodes FROM event WHERE seq = 3`, "without gap"},
		{"leave a gap", `INSERT INTO event SELECT 9, body, nodes FROM event WHERE seq = 3`, "without gap"},
		{"an event before the first", `INSERT INTO event SELECT -1, body, nodes FROM event WHERE seq = 3`, "without gap"},
		{"an event without nodes", `INSERT INTO event VALUES (6, x'7b7d', x'')`, "CHECK"},
		{"an event as text", `INSERT INTO event SELECT 6, CAST(body AS TEXT), nodes FROM event WHERE seq = 3`, "TEXT"},
		{"update a checkpoint", `UPDATE checkpoint SET note = x'00'`, "append-only"},
		{"delete a checkpoint", `DELETE FROM checkpoint`, "append-only"},
		{"an older checkpoint", `INSERT INTO checkpoint VALUES (1, x'00')`, "only grow"},
		{"the catalogue", `UPDATE sqlite_schema SET sql = 'x'`, "may not be modified"},
	} {
		t.Run(tt.name, func(t *testing.T) {
			if err := l.enter(t.Context()); err != nil {
				t.Fatal(err)
			}
			_, err := l.db.ExecContext(t.Context(), tt.sql)
			l.leave()
			if err == nil || !strings.Contains(err.Error(), tt.want) {
				t.Errorf("error %v, want one that says %q", err, tt.want)
			}
		})
	}
	if err := l.enter(t.Context()); err != nil {
		t.Fatal(err)
	}
	_, err := l.db.ExecContext(t.Context(), `PRAGMA writable_schema = 1`)
	if err == nil {
		_, err = l.db.ExecContext(t.Context(), `DELETE FROM sqlite_schema WHERE type = 'trigger'`)
	}
	l.leave()
	if err == nil {
		t.Error("the triggers could be deleted from the catalogue")
	}
	mustClose(t, l)
	verifyGood(t, opt, 6)
}

// TestSettingsAreReadBack opens the file with one setting wrong at a time, as a misspelt key
// would leave it.
func TestSettingsAreReadBack(t *testing.T) {
	opt := found(t, t.TempDir())
	for _, tt := range []struct{ setting, from, to string }{
		{"synchronous", "_synchronous=FULL", "_synchronous=NORMAL"},
		{"journal_mode", "_journal_mode=WAL", "_journal_mode=DELETE"},
		{"locking_mode", "_pragma=locking_mode(EXCLUSIVE)", "_pragma=locking_mode(NORMAL)"},
		{"foreign_keys", "_foreign_keys=1", "_foreign_key=1"},
		{"trusted_schema", "_pragma=trusted_schema(0)", "_pragma=trusted_schema(1)"},
	} {
		t.Run(tt.setting, func(t *testing.T) {
			dsn := writerDSN(opt.Path)
			wrong := strings.Replace(dsn, tt.from, tt.to, 1)
			if wrong == dsn {
				t.Fatal("the test changes nothing")
			}
			s := newStore(opt.Path)
			if err := s.connect(t.Context(), wrong); err != nil {
				t.Fatal(err)
			}
			err := s.checkWriter(t.Context())
			if err := s.disconnect(); err != nil {
				t.Fatal(err)
			}
			wantCode(t, err, "ledger-settings")
			if !strings.Contains(err.Error(), tt.setting) {
				t.Errorf("error %v does not name %s", err, tt.setting)
			}
		})
	}
}

// TestStrangePaths opens ledgers whose names mean something to a URI.
func TestStrangePaths(t *testing.T) {
	for _, name := range []string{"a b", "50%", "what?", "no#1", "é", "a&mode=ro"} {
		t.Run(name, func(t *testing.T) {
			dir := filepath.Join(t.TempDir(), name)
			if err := os.Mkdir(dir, 0o700); err != nil {
				t.Fatal(err)
			}
			opt := found(t, dir)
			l := open(t, opt)
			mustAppend(t, l, plain)
			if _, err := l.Backup(t.Context(), filepath.Join(dir, "copy.db")); err != nil {
				t.Error(err)
			}
			mustClose(t, l)
			verifyGood(t, opt, 2)
		})
	}
}
