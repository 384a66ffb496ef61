package main

import (
	"context"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/rs/zerolog"

	"tenthmark/calc/decimal"
	"tenthmark/session"
)

// The log files are copies of what the ledger has: each sample once, and again when a
// file was lost.
func TestLogFilesFollowTheLedger(t *testing.T) {
	c, err := loadConfig(writeConfig(t, "[bench]\nlisten = \"127.0.0.1:0\"\nzone = \"UTC\"\n"))
	if err != nil {
		t.Fatal(err)
	}
	if err := createLedger(t.Context(), c, time.Now()); err != nil {
		t.Fatal(err)
	}
	d, err := newDaemon(t.Context(), c, zerolog.Nop())
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(t.Context())
	stopped := make(chan error, 1)
	go func() { stopped <- d.Run(ctx) }()
	defer func() {
		cancel()
		if err := <-stopped; err != nil {
			t.Error(err)
		}
	}()
	sample := func(mass string) {
		d.stations.record(ctx, "bench-1", session.Draft{Kind: session.LogSample, Subject: "bench-1", Body: session.LogSampleBody{Label: "night", MassG: decimal.MustParse(mass), Stable: true, Came: session.At(time.Now())}})
	}
	rows := func() []string {
		if err := d.writeLogs(ctx); err != nil {
			t.Fatal(err)
		}
		names, err := filepath.Glob(filepath.Join(c.Publish.Folder, logFolder, "log-*.csv"))
		if err != nil || len(names) == 0 {
			t.Fatalf("no log file: %v", err)
		}
		var all []string
		for _, name := range names {
			text, err := os.ReadFile(name)
			if err != nil {
				t.Fatal(err)
			}
			lines := strings.Split(strings.TrimSpace(string(text)), "\r\n")
			all = append(all, lines[1:]...)
		}
		return all
	}
	sample("99.9998")
	sample("100.0001")
	if got := rows(); len(got) != 2 || !strings.Contains(got[1], "100.0001") {
		t.Fatalf("rows %q, want both samples", got)
	}
	sample("100.0002")
	if got := rows(); len(got) != 3 {
		t.Errorf("rows %q, want each sample once", got)
	}
	if err := os.RemoveAll(filepath.Join(c.Publish.Folder, logFolder)); err != nil {
		t.Fatal(err)
	}
	d.logged = 0
	if got := rows(); len(got) != 3 {
		t.Errorf("after the files were lost: rows %q, want all samples", got)
	}
}
