package main

import (
	"bufio"
	"context"
	"encoding/csv"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strconv"
	"time"

	"tenthmark/session"
	"tenthmark/session/ledger"
)

// logFolder holds the logs' CSV files in the drop, one for each day.
const logFolder = "logs"

// logColumns is the header of a log file. event is the sample's number in the ledger:
// the file is a copy, and goes on after the last number that stands in it.
var logColumns = []string{"event", "at", "station", "label", "mass_g", "stable", "missing", "nominal_g", "deviation_g", "within"}

// writeLogs brings the log files of the drop in step with the ledger: each sample
// once, in order. A drop that is away is tried again at the next call.
func (d *daemon) writeLogs(ctx context.Context) error {
	folder := filepath.Join(d.config.Publish.Folder, logFolder)
	if d.logged == 0 {
		last, err := lastLogged(folder)
		if err != nil {
			return err
		}
		d.logged = last
	}
	for {
		entries, err := d.ledger.Events(ctx, ledger.Filter{Kind: string(session.LogSample), After: d.logged, Limit: 1000})
		if err != nil || len(entries) == 0 {
			return err
		}
		if err := d.appendLogs(folder, entries); err != nil {
			return err
		}
	}
}

func (d *daemon) appendLogs(folder string, entries []ledger.Entry) error {
	zone, err := d.config.zone()
	if err != nil {
		return err
	}
	for len(entries) > 0 {
		day, n := "", 0
		var rows [][]string
		for _, entry := range entries {
			e, err := session.DecodeEvent(entry.Body)
			if err != nil {
				return err
			}
			if on := e.At.In(zone).Format(time.DateOnly); day == "" {
				day = on
			} else if on != day {
				break
			}
			row, err := logRow(e)
			if err != nil {
				return err
			}
			rows, n = append(rows, row), n+1
		}
		if err := appendCSV(filepath.Join(folder, "log-"+day+".csv"), rows); err != nil {
			return err
		}
		d.logged, entries = entries[n-1].Seq, entries[n:]
	}
	return nil
}

func logRow(e session.Event) ([]string, error) {
	var b session.LogSampleBody
	if err := json.Unmarshal(e.Body, &b); err != nil {
		return nil, fmt.Errorf("event %d: %w", e.Seq, err)
	}
	within := ""
	if b.Within != nil {
		within = strconv.FormatBool(*b.Within)
	}
	return []string{
		strconv.FormatInt(e.Seq, 10), b.Came.Format(session.TimeForm), e.Subject, b.Label, b.MassG.String(),
		strconv.FormatBool(b.Stable), strconv.Itoa(b.Missing), b.NominalG.String(), b.DeviationG.String(), within,
	}, nil
}

// appendCSV adds rows to a file, with a header when it is new, and syncs it.
func appendCSV(path string, rows [][]string) error {
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		return fmt.Errorf("log file: %w", err)
	}
	f, err := os.OpenFile(path, os.O_CREATE|os.O_APPEND|os.O_WRONLY, 0o644)
	if err != nil {
		return fmt.Errorf("log file: %w", err)
	}
	w := csv.NewWriter(f)
	w.UseCRLF = true
	if info, statErr := f.Stat(); statErr == nil && info.Size() == 0 {
		rows = append([][]string{logColumns}, rows...)
	}
	err = w.WriteAll(rows)
	return errors.Join(err, f.Sync(), f.Close())
}

// lastLogged finds the number of the newest sample in the log files, -1 for none.
func lastLogged(folder string) (int64, error) {
	names, err := filepath.Glob(filepath.Join(folder, "log-*.csv"))
	if err != nil || len(names) == 0 {
		return -1, err
	}
	f, err := os.Open(names[len(names)-1]) // Glob sorts, and the names begin with the year
	if errors.Is(err, fs.ErrNotExist) {
		return -1, nil
	} else if err != nil {
		return 0, fmt.Errorf("log file: %w", err)
	}
	defer f.Close()
	last := int64(-1)
	for lines := bufio.NewScanner(f); lines.Scan(); {
		var seq int64
		if _, err := fmt.Sscanf(lines.Text(), "%d,", &seq); err == nil {
			last = max(last, seq)
		}
	}
	return last, nil
}
