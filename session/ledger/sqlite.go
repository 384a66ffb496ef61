package ledger

import (
	"context"
	"database/sql"
	"errors"
	"fmt"
	"net/url"
	"path/filepath"
	"runtime"
	"strings"

	"modernc.org/sqlite" // the one package of the house that knows the driver
	"tenthmark/session"
)

// The writer's settings. Every one is read back after opening, because SQLite and
// the driver accept a misspelt key in silence.
//
// EXCLUSIVE together with OFD locks: POSIX locks of a file vanish when any descriptor
// of it is closed anywhere in the process, after which another process can write and a
// committed row of ours is lost. EXCLUSIVE must be set before WAL so that no -shm file,
// whose locks would stay POSIX, is made. FULL syncs the log at each commit.
var writerPragmas = []struct{ name, set, want string }{
	{"locking_mode", "EXCLUSIVE", "exclusive"},
	{"trusted_schema", "0", "0"},
	{"cell_size_check", "1", "1"},
	{"fullfsync", "1", "1"},
	{"checkpoint_fullfsync", "1", "1"},
	{"journal_mode", "", "wal"},
	{"synchronous", "", "2"},
	{"foreign_keys", "", "1"},
}

// writerDSN gives the data source name for the one writing connection. mode=rw never
// creates a file.
func writerDSN(path string) string {
	var q []string
	for _, p := range writerPragmas {
		if p.set != "" {
			q = append(q, "_pragma="+p.name+"("+p.set+")")
		}
	}
	q = append(q, "_journal_mode=WAL", "_synchronous=FULL", "_txlock=immediate", "_busy_timeout=2000",
		"_foreign_keys=1", "_dqs=0", "_defensive=1", "_error_rc=1")
	return fileURI(path, "rw") + "&" + strings.Join(q, "&")
}

// readerDSN gives the name for looking only.
func readerDSN(path, mode string) string {
	return fileURI(path, mode) + "&_pragma=query_only(1)&_pragma=trusted_schema(0)&_pragma=cell_size_check(1)" +
		"&_busy_timeout=2000&_dqs=0&_defensive=1&_error_rc=1"
}

// fileURI always names the file as a URI: with a plain name the driver ignores mode.
func fileURI(path, mode string) string {
	return "file:" + (&url.URL{Path: filepath.ToSlash(path)}).EscapedPath() + "?mode=" + mode
}

// connectSQLite opens one connection. The switches are process-wide and must stand
// before the first database file is opened; setting them again is harmless.
func connectSQLite(ctx context.Context, dsn string) (*sql.DB, error) {
	sqlite.StrictPragmas(true)
	if _, err := sqlite.OFDLocking(true); err != nil && runtime.GOOS == "linux" {
		return nil, &session.Fault{
			Code: "ledger-locks", Message: "This system cannot lock the ledger's file safely.",
			Hint: "Linux 3.15 or newer and a local disk are needed.", Err: err,
		}
	}
	db, err := sql.Open("sqlite", dsn)
	if err != nil {
		return nil, err
	}
	db.SetMaxOpenConns(1)
	db.SetMaxIdleConns(1)
	db.SetConnMaxLifetime(0)
	if err := db.PingContext(ctx); err != nil {
		return nil, errors.Join(err, db.Close())
	}
	return db, nil
}

// checkWriter reads the settings back and looks whether the file is ours.
func (s *store) checkWriter(ctx context.Context) error {
	if err := s.checkIdentity(ctx); err != nil {
		return err
	}
	for _, p := range writerPragmas {
		got, err := s.pragma(ctx, p.name)
		if err != nil {
			return explain("read settings of", s.path, err)
		}
		if got != p.want {
			return session.Refuse("ledger-settings", fmt.Sprintf("The database setting %s is %q and not %q, so events would not be safe.", p.name, got, p.want),
				"Put the ledger on a local disk. Nothing was written.")
		}
	}
	return nil
}

func (s *store) pragma(ctx context.Context, name string) (string, error) {
	var v string
	err := s.db.QueryRowContext(ctx, "PRAGMA "+name).Scan(&v)
	return v, err
}

func (s *store) pragmaInt(ctx context.Context, name string) (int64, error) {
	var v int64
	err := s.db.QueryRowContext(ctx, "PRAGMA "+name).Scan(&v)
	return v, err
}
