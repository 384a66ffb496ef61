package main

import (
	"context"
	"fmt"
	"path/filepath"
	"time"

	"tenthmark/session"
	"tenthmark/session/ledger"
)

// chores does what is due by the clock: a signed checkpoint at the day's end, the
// scheduled backup, and a sign of life for the service manager.
func (d *daemon) chores(ctx context.Context) error {
	tick := time.NewTicker(10 * time.Second)
	defer tick.Stop()
	zone, err := d.config.zone()
	if err != nil {
		return err
	}
	day, backedUp := time.Now().In(zone).YearDay(), time.Now()
	for {
		select {
		case <-ctx.Done():
			return ctx.Err()
		case <-tick.C:
		}
		d.signOfLife(ctx)
		if len(d.config.Logs) > 0 {
			d.report("log files", d.writeLogs(ctx))
		}
		now := time.Now().In(zone)
		if now.YearDay() != day {
			day = now.YearDay()
			d.report("checkpoint", d.dayEnd(ctx))
		}
		if hours := d.config.Ledger.BackupHours; d.config.Ledger.BackupFolder != "" && hours > 0 && now.Sub(backedUp) >= time.Duration(hours)*time.Hour {
			backedUp = now
			d.report("backup", d.backup(ctx, now))
		}
	}
}

// signOfLife feeds the watchdog only while desk and ledger answer; a ledger that failed
// is tried again.
func (d *daemon) signOfLife(ctx context.Context) {
	if d.desk.Heal(ctx) == nil && d.desk.Trouble(ctx) == nil {
		notify("WATCHDOG=1")
	}
}

// dayEnd signs a checkpoint and, where a folder for them is configured, writes the
// day's events with it beside the earlier ones.
func (d *daemon) dayEnd(ctx context.Context) error {
	folder := d.config.Ledger.SegmentFolder
	if folder == "" {
		_, err := d.ledger.Checkpoint(ctx)
		return err
	}
	next, err := nextSegment(folder)
	if err != nil {
		return err
	}
	_, err = d.ledger.ExportSegment(ctx, folder, next)
	return err
}

// nextSegment gives the number of the first event that no segment in the folder has.
func nextSegment(folder string) (int64, error) {
	names, err := filepath.Glob(filepath.Join(folder, "events-*.jsonl"))
	if err != nil {
		return 0, fmt.Errorf("segments: %w", err)
	}
	next := int64(0)
	for _, name := range names {
		var first, last int64
		if _, err := fmt.Sscanf(filepath.Base(name), "events-%d-%d.jsonl", &first, &last); err == nil {
			next = max(next, last+1)
		}
	}
	return next, nil
}

// backupBody is the body of a BackupMade event.
type backupBody struct {
	File   string `json:"file"`
	Events int64  `json:"events"`
}

func (d *daemon) backup(ctx context.Context, now time.Time) error {
	_, err := d.backupTo(ctx, filepath.Join(d.config.Ledger.BackupFolder, fmt.Sprintf("ledger-%s.db", now.UTC().Format("20060102T150405Z"))))
	return err
}

// backupTo makes a verified copy and records that.
func (d *daemon) backupTo(ctx context.Context, file string) (ledger.BackupReport, error) {
	made, err := d.ledger.Backup(ctx, file)
	if err != nil {
		return made, err
	}
	_, err = d.desk.Do(ctx, session.Daemon, func(*session.Book) ([]session.Draft, error) {
		return []session.Draft{{Kind: session.BackupMade, Body: backupBody{File: filepath.Base(file), Events: made.Events}}}, nil
	})
	return made, err
}
