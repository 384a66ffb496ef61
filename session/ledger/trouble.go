package ledger

import (
	"context"
	"errors"
	"fmt"
	"os"
	"syscall"

	"modernc.org/sqlite"
	lib "modernc.org/sqlite/lib"
	"tenthmark/session"
)

// ErrAltered is in the chain of every error that says the record does not fit its
// hashes or signatures.
var ErrAltered = errors.New("the record does not fit its hashes")

// explain turns a failure of file or database into words for the operator.
func explain(op, path string, err error) error {
	if err == nil {
		return nil
	}
	if f := (*session.Fault)(nil); errors.As(err, &f) || errors.Is(err, context.Canceled) || errors.Is(err, context.DeadlineExceeded) {
		return err
	}
	f := &session.Fault{Err: fmt.Errorf("%s %s: %w", op, path, err)}
	switch {
	case errors.Is(err, os.ErrPermission):
		f.Code, f.Message = "no-permission", "The ledger "+path+" may not be opened by this user."
		f.Hint = "Run the daemon as the user who owns the file, or correct the owner of the folder."
	case errors.Is(err, syscall.ENOSPC):
		f.Code, f.Message, f.Hint = "disk-full", msgFull, hintFull
	default:
		f.Code, f.Message, f.Hint = wordsFor(path, err)
	}
	return f
}

const (
	msgFull  = "The disk of the ledger is full."
	hintFull = "Free some space, then go on: nothing that was shown as taken is lost."
)

// wordsFor reads the cause from SQLite's primary result code.
func wordsFor(path string, err error) (code, message, hint string) {
	switch sqliteCode(err) {
	case lib.SQLITE_FULL:
		return "disk-full", msgFull, hintFull
	case lib.SQLITE_READONLY:
		return "disk-read-only", "The ledger " + path + " cannot be written: the disk or file is read-only.",
			"Often the system made the disk read-only after a fault: look at the system log, check the disk, then start again."
	case lib.SQLITE_BUSY, lib.SQLITE_LOCKED:
		return "ledger-in-use", "Another program holds the ledger " + path + ".",
			"Close the other program (a database viewer, a copy or backup tool, a second daemon)."
	case lib.SQLITE_CORRUPT, lib.SQLITE_NOTADB:
		return "ledger-damaged", "The ledger " + path + " is damaged.",
			"Do not write to it any more. Keep the file, run: tenthmark ledger verify, and restore the last backup."
	case lib.SQLITE_CANTOPEN:
		return "ledger-not-opened", "The ledger " + path + " could not be opened.",
			"Look whether file and folder exist and belong to the user the daemon runs as."
	case lib.SQLITE_IOERR:
		return "disk-fault", "The disk of the ledger reported a fault.",
			"Look at the system log, check disk and cable, then start again."
	}
	return "ledger-fault", "The ledger " + path + " could not be used.", "The log has the cause; look it up under this code."
}

// sqliteCode gives the primary result code, 0 when err is not SQLite's.
func sqliteCode(err error) int {
	var e *sqlite.Error
	if errors.As(err, &e) {
		return e.Code() & 0xff
	}
	return 0
}

// alteredFault is the refusal to work on a record that does not fit its hashes.
func alteredFault(path string, err error) error {
	if !errors.Is(err, ErrAltered) {
		return err
	}
	return &session.Fault{
		Code: "ledger-altered", Message: "The ledger " + path + " was changed from outside or is damaged.",
		Hint: "Do not write to it any more. Keep the file, run: tenthmark ledger verify, and restore the last backup.", Err: err,
	}
}
