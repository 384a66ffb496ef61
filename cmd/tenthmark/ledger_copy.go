package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"time"

	"tenthmark/session"
	"tenthmark/session/ledger"
)

func runLedgerExport(ctx context.Context, args []string, out, complaints io.Writer) int {
	f := newLedgerFlags("export", "Writes every event's exact line, and beside it what is needed to check them:\nevents.jsonl, checkpoint.txt and public.key in the folder; without a folder only the lines, to standard output.\nUse: tenthmark ledger export [FLAGS] [FOLDER]", complaints)
	if code, done := parse(f.FlagSet, args); done {
		return code
	}
	if f.NArg() > 1 {
		return misuse(complaints, only(f.FlagSet, "[FOLDER]"))
	}
	if err := f.export(ctx, f.Arg(0), out); err != nil {
		return complain(complaints, err)
	}
	return exitDone
}

func (f ledgerFlags) export(ctx context.Context, folder string, out io.Writer) error {
	events, done, err := f.events(ctx)
	if err != nil {
		return err
	}
	if folder == "" {
		return errors.Join(exportLines(ctx, events, out), done())
	}
	return errors.Join(f.exportFolder(ctx, events, folder, out), done())
}

func exportLines(ctx context.Context, events eventSource, w io.Writer) error {
	return eachEvent(ctx, events, ledger.Filter{After: -1}, func(e ledger.Entry) error { return showEvent(w, e, true) })
}

// exportFolder writes the three files into a new folder and checks them as a stranger
// would.
func (f ledgerFlags) exportFolder(ctx context.Context, events eventSource, folder string, out io.Writer) error {
	if err := os.Mkdir(folder, 0o755); err != nil {
		return &session.Fault{Code: "folder-not-made", Message: "The folder " + folder + " cannot be made.", Hint: "Give the name of a folder that is not there yet.", Err: err}
	}
	signed, err := f.checkpoint(ctx)
	if err != nil {
		return err
	}
	lines, err := os.Create(filepath.Join(folder, "events.jsonl"))
	if err != nil {
		return err
	}
	if err := errors.Join(exportLines(ctx, events, lines), lines.Sync(), lines.Close()); err != nil {
		return err
	}
	if err := os.WriteFile(filepath.Join(folder, "checkpoint.txt"), signed, 0o644); err != nil {
		return err
	}
	r, key, err := verifyExportFolder(folder, signed)
	if err != nil {
		return err
	}
	if !r.OK() {
		return r.First()
	}
	fmt.Fprintf(out, "%s: %d events of %s, checkpoint of %d events.\n", folder, r.Events, r.Origin, r.Covered)
	return os.WriteFile(filepath.Join(folder, "public.key"), []byte(key+"\n"), 0o644)
}

// verifyExportFolder checks the exported lines and gives the key that the ledger names.
func verifyExportFolder(folder string, signed []byte) (ledger.Report, string, error) {
	lines, err := os.Open(filepath.Join(folder, "events.jsonl"))
	if err != nil {
		return ledger.Report{}, "", err
	}
	var key string
	r, err := ledger.VerifyExport(lines, signed, ledger.VerifyOptions{Event: func(e ledger.Entry) error {
		named, err := ledger.NamedKey(e)
		if named != "" {
			key = named
		}
		return err
	}})
	return r, key, errors.Join(err, lines.Close())
}

func runLedgerBackup(ctx context.Context, args []string, out, complaints io.Writer) int {
	f := newLedgerFlags("backup", "Writes a copy of the ledger and verifies it. Works while the daemon runs (with --url; the\ndaemon writes the file on its own computer). The signing key is not in it.\nUse: tenthmark ledger backup [FLAGS] FILE", complaints)
	if code, done := parse(f.FlagSet, args); done {
		return code
	}
	if err := only(f.FlagSet, "FILE"); err != nil {
		return misuse(complaints, err)
	}
	file, err := filepath.Abs(f.Arg(0))
	if err != nil {
		return complain(complaints, err)
	}
	report, err := f.backup(ctx, file)
	if err != nil {
		return complain(complaints, err)
	}
	fmt.Fprintf(out, "%s: %d events, root %s, %d bytes, SHA-256 %s, made and verified in %s.\n",
		report.File, report.Events, report.Root, report.Bytes, report.SHA256, report.Elapsed.Round(time.Millisecond))
	return exitDone
}

func (f ledgerFlags) backup(ctx context.Context, file string) (report ledger.BackupReport, err error) {
	if daemon := f.remote(); daemon != nil {
		err = daemon.call(ctx, "POST", "/api/v1/ledger/backup", map[string]string{"file": file}, &report)
		return report, err
	}
	l, err := f.writer(ctx)
	if err != nil {
		return report, err
	}
	report, err = l.Backup(ctx, file)
	return report, errors.Join(err, l.Close())
}

// writer opens the ledger at rest with its key.
func (f ledgerFlags) writer(ctx context.Context) (*ledger.Ledger, error) {
	c, err := f.config()
	if err != nil {
		return nil, err
	}
	l, err := ledger.Open(ctx, ledger.Options{Path: c.Ledger.Path, KeyFile: c.Ledger.Key})
	return l, inUse(c, err)
}

func runLedgerRestoreCheck(ctx context.Context, args []string, out, complaints io.Writer) int {
	f := newFlags("ledger restore-check", "Copies a backup into a temporary folder, opens it as the daemon would, verifies it and replays its\nstate. Neither the backup nor the ledger is touched.\nUse: tenthmark ledger restore-check [FLAGS] BACKUP", complaints)
	key := f.String("key", "", "the public key to trust, a `file`")
	var checkpoints fileList
	f.Var(&checkpoints, "checkpoint", "a checkpoint `file` that was kept elsewhere; may be given several times")
	if code, done := parse(f, args); done {
		return code
	}
	if err := only(f, "BACKUP"); err != nil {
		return misuse(complaints, err)
	}
	report, err := restoreCheck(ctx, f.Arg(0), *key, checkpoints)
	if err != nil {
		return complain(complaints, err)
	}
	return tellReport(out, report, false)
}

func restoreCheck(ctx context.Context, backup, keyFile string, checkpoints fileList) (report ledger.Report, err error) {
	dir, err := os.MkdirTemp("", "tenthmark-restore-")
	if err != nil {
		return report, err
	}
	defer func() { err = errors.Join(err, os.RemoveAll(dir)) }()
	restored := filepath.Join(dir, "ledger.db")
	if err := copyBackup(backup, restored); err != nil {
		return report, &session.Fault{Code: "backup-unreadable", Message: "The backup " + backup + " cannot be read.", Hint: "Check its name and the medium it is on.", Err: err}
	}
	f := newLedgerFlags("restore-check", "", io.Discard)
	*f.path = restored
	v := verification{flags: f}
	report, err = v.run(ctx, keyFile, checkpoints)
	report.Path = backup
	return report, err
}

func copyBackup(from, to string) error {
	src, err := os.Open(from)
	if err != nil {
		return err
	}
	dst, err := os.OpenFile(to, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o600)
	if err != nil {
		return errors.Join(err, src.Close())
	}
	_, err = io.Copy(dst, src)
	return errors.Join(err, dst.Close(), src.Close())
}
