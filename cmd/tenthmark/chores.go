package main

import (
	"context"
	"fmt"
	"path/filepath"
	"time"

	"tenthmark/session"
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

func (d *daemon) dayEnd(ctx context.Context) error {
	_, err := d.ledger.Checkpoint(ctx)
	return err
}

// backupBody is the body of a BackupMade event.
type backupBody struct {
	File   string `json:"file"`
	Events int64  `json:"events"`
}

func (d *daemon) backup(ctx context.Context, now time.Time) error {
	file := filepath.Join(d.config.Ledger.BackupFolder, fmt.Sprintf("ledger-%s.db", now.UTC().Format("20060102T150405Z")))
	made, err := d.ledger.Backup(ctx, file)
	if err != nil {
		return err
	}
	_, err = d.desk.Do(ctx, session.Daemon, func(*session.Book) ([]session.Draft, error) {
		return []session.Draft{{Kind: session.BackupMade, Body: backupBody{File: filepath.Base(file), Events: made.Events}}}, nil
	})
	return err
}
