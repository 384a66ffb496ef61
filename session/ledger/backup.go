package ledger

import (
	"context"
	"errors"
	"fmt"
	"os"
	"time"

	"tenthmark/session"
)

// BackupReport says what a backup holds; it is given only after the copy was verified.
type BackupReport struct {
	File    string        `json:"file"`
	Events  int64         `json:"events"`
	Root    string        `json:"root"` // base64, recomputed from the copy's rows
	Bytes   int64         `json:"bytes"`
	SHA256  string        `json:"sha256"` // of the file, hexadecimal
	Elapsed time.Duration `json:"elapsed_ns"`
}

// Backup writes a copy of the ledger to file, which must not exist, and verifies it: the
// rows are counted, every hash recomputed from their bytes and the root compared. The
// name appears only when that succeeded. Appends wait while SQLite copies (some 6 ms
// for each megabyte), so it belongs between two runs; they go on while the copy is
// verified. The copy holds no signing key.
func (l *Ledger) Backup(ctx context.Context, file string) (BackupReport, error) {
	began := time.Now()
	if _, err := os.Lstat(file); err == nil {
		return BackupReport{}, session.Refuse("backup-exists", file+" exists already and is not overwritten.", "Give another name, for example with the date.")
	}
	if _, err := l.Checkpoint(ctx); err != nil {
		return BackupReport{}, err
	}
	part := file + ".part"
	want, err := l.copyTo(ctx, part)
	if err != nil {
		return BackupReport{}, errors.Join(backupTrouble(file, err), removeIfThere(part))
	}
	report, err := checkCopy(ctx, part, want)
	if err == nil {
		err = publishCopy(part, file)
	}
	if err != nil {
		return BackupReport{}, errors.Join(backupTrouble(file, err), removeIfThere(part))
	}
	report.File, report.Elapsed = file, time.Since(began)
	return report, nil
}

// copyTo writes the copy in one turn and gives the head that it must have. VACUUM INTO
// reads one consistent state and syncs the copy; the stepwise backup interface starts
// over with every write and may never end.
func (l *Ledger) copyTo(ctx context.Context, part string) (Head, error) {
	if err := l.enter(ctx); err != nil {
		return Head{}, err
	}
	defer l.leave()
	if err := l.sound(); err != nil {
		return Head{}, err
	}
	if err := removeIfThere(part); err != nil {
		return Head{}, err
	}
	if _, err := l.db.ExecContext(ctx, `VACUUM INTO ?`, part); err != nil {
		return Head{}, err
	}
	return Head{l.origin, l.edge.size, l.edge.root()}, nil
}

// checkCopy verifies the copy as a file of its own. Only the copy is opened here, never
// the ledger's file: that would drop its locks.
func checkCopy(ctx context.Context, part string, want Head) (BackupReport, error) {
	r, err := Verify(ctx, part, VerifyOptions{})
	if err := errors.Join(err, removeIfThere(part+".lock")); err != nil {
		return BackupReport{}, err
	}
	switch {
	case !r.OK():
		return BackupReport{}, r.First()
	case r.Events != want.Size || r.Root != want.Root.String():
		return BackupReport{}, fmt.Errorf("the copy has %d events and root %s, the ledger %d and %s", r.Events, r.Root, want.Size, want.Root)
	}
	sum, err := fileSum(part)
	if err != nil {
		return BackupReport{}, err
	}
	info, err := os.Stat(part)
	if err != nil {
		return BackupReport{}, err
	}
	return BackupReport{Events: r.Events, Root: r.Root, Bytes: info.Size(), SHA256: sum}, nil
}

// publishCopy gives the copy its name without replacing anything. A hard link refuses an
// existing name; where links are unknown the name was looked at before.
func publishCopy(part, file string) error {
	f, err := os.OpenFile(part, os.O_RDWR, 0)
	if err != nil {
		return err
	}
	if err := errors.Join(f.Sync(), f.Close()); err != nil {
		return err
	}
	switch err := os.Link(part, file); {
	case errors.Is(err, os.ErrExist):
		return err
	case err == nil:
		err = os.Remove(part)
		return errors.Join(err, syncFolder(file))
	}
	if err := os.Rename(part, file); err != nil {
		return err
	}
	return syncFolder(file)
}

func backupTrouble(file string, err error) error {
	if f := (*session.Fault)(nil); errors.As(err, &f) && f.Code != "ledger-altered" {
		return err
	}
	return &session.Fault{
		Code: "backup-failed", Message: "The backup " + file + " was not made.",
		Hint: "Check that its folder exists and has space. The ledger itself is not affected.", Err: err,
	}
}

func removeIfThere(path string) error {
	if err := os.Remove(path); !errors.Is(err, os.ErrNotExist) {
		return err
	}
	return nil
}
