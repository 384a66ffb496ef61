package main

import (
	"bytes"
	"context"
	"encoding/json"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"tenthmark/session"
	"tenthmark/session/ledger"
)

// daemonAt starts a daemon of its own process on a fresh ledger, with more lines of
// configuration.
func daemonAt(t *testing.T, more string) (p *process, c *config, api *client) {
	t.Helper()
	address := freeAddress(t)
	file := writeConfig(t, "[bench]\nlisten = \""+address+"\"\n"+more)
	c, err := loadConfig(file)
	if err != nil {
		t.Fatal(err)
	}
	if err := createLedger(t.Context(), c, time.Now()); err != nil {
		t.Fatal(err)
	}
	p = &process{t: t, config: file}
	p.start()
	t.Cleanup(func() {
		if p.cmd.ProcessState == nil {
			p.kill()
		}
	})
	return p, c, newClient("http://"+address, "m.berg")
}

// stop asks the daemon to end, as a service manager does.
func (p *process) stop() {
	p.t.Helper()
	if err := p.cmd.Process.Signal(os.Interrupt); err != nil {
		p.t.Fatal(err)
	}
	if err := p.cmd.Wait(); err != nil {
		p.t.Fatalf("the daemon ended with %v\n%s", err, p.errors)
	}
}

func TestStartAndStopAreEvents(t *testing.T) {
	p, c, _ := daemonAt(t, "")
	p.stop()
	p.start()
	p.kill()
	p.start()
	p.stop()
	r, err := ledger.OpenReader(t.Context(), c.Ledger.Path)
	if err != nil {
		t.Fatal(err)
	}
	defer r.Close()
	entries, err := r.Events(t.Context(), ledger.Filter{After: 0})
	if err != nil {
		t.Fatal(err)
	}
	var got []string
	for _, entry := range entries {
		e, err := session.DecodeEvent(entry.Body)
		if err != nil {
			t.Fatal(err)
		}
		var b startedBody
		if err := json.Unmarshal(e.Body, &b); err != nil {
			t.Fatal(err)
		}
		text := string(e.Kind)
		if b.Unclean {
			text += " after an unclean stop"
		}
		if e.Kind == session.DaemonStarted && (len(b.ConfigSHA256) != 64 || b.Software == "") {
			t.Errorf("event %d does not name software and configuration: %s", e.Seq, e.Body)
		}
		got = append(got, text)
	}
	want := "daemon.started, daemon.stopped, daemon.started, daemon.started after an unclean stop, daemon.stopped"
	if strings.Join(got, ", ") != want {
		t.Errorf("events %s\nwant   %s", strings.Join(got, ", "), want)
	}
}

// Wrong calls and missing things: each a clear message with a hint, and the daemon
// stays up.
func TestWhatIsMissingIsSaidAndTheDaemonStaysUp(t *testing.T) {
	blocked := filepath.Join(t.TempDir(), "not-a-folder")
	if err := os.WriteFile(blocked, nil, 0o600); err != nil {
		t.Fatal(err)
	}
	_, _, api := daemonAt(t, "[publish]\nfolder = \""+filepath.Join(blocked, "drop")+"\"\n[[station]]\nname = \"bench-1\"\nport = \"/dev/tenthmark-no-such-port\"\n")
	burette := map[string]any{"burette": "B-07", "capacity_mL": 50, "subdivision_mL": "0.1", "class": "AS"}
	if err := api.call(t.Context(), "POST", "/api/v1/burettes", burette, nil); err != nil {
		t.Fatal(err)
	}
	for _, tt := range []struct {
		name, path string
		body       any
		code       string
	}{
		{"a balance that is not there", "/api/v1/runs", map[string]any{"burette": "B-07", "station": "bench-1"}, "station-offline"},
		{"an unknown burette", "/api/v1/runs", map[string]any{"burette": "B-99", "station": "bench-1"}, "unknown-burette"},
		{"an unknown station", "/api/v1/runs", map[string]any{"burette": "B-07", "station": "bench-9"}, "unknown-station"},
		{"the same burette again", "/api/v1/burettes", burette, "burette-exists"},
	} {
		err := api.call(t.Context(), "POST", tt.path, tt.body, nil)
		p, ok := err.(*problem)
		if !ok || p.Code != tt.code || p.Hint == "" || p.Detail == "" {
			t.Errorf("%s: got %v, want %s with a hint", tt.name, err, tt.code)
		}
	}
	var health struct {
		Status   string
		Stations []struct{ State, Reason, Hint string }
	}
	if err := api.call(t.Context(), "GET", "/api/v1/health", nil, &health); err != nil || len(health.Stations) != 1 || health.Stations[0].State != "offline" {
		t.Errorf("health %+v, %v", health, err)
	}
}

// A drop that cannot be written delays the publication and loses nothing.
func TestADropThatReturnsGetsItsRunOnce(t *testing.T) {
	if testing.Short() {
		t.Skip("runs a whole calibration")
	}
	var folder string
	doc := calibrateInTest(t, 8, func(_ *process, s *stage) {
		if folder != "" {
			return
		}
		folder = s.config.Publish.Folder
		if err := os.WriteFile(folder, []byte("in the way"), 0o600); err != nil {
			t.Fatal(err)
		}
		ctx, cancel := context.WithCancel(context.Background())
		t.Cleanup(cancel)
		go s.clearWhenWaiting(ctx, folder)
	})
	if doc.Run.State != session.Published {
		t.Errorf("state %s", doc.Run.State)
	}
	folders, err := filepath.Glob(filepath.Join(folder, "B-07-*"))
	if err != nil || len(folders) != 1 {
		t.Errorf("published %v, %v; want once", folders, err)
	}
}

// clearWhenWaiting takes away what is in the drop's place as soon as the ledger says
// that the run is prepared.
func (s *stage) clearWhenWaiting(ctx context.Context, folder string) {
	tick := time.NewTicker(100 * time.Millisecond)
	defer tick.Stop()
	for {
		select {
		case <-tick.C:
		case <-ctx.Done():
			return
		}
		text, err := os.ReadFile(s.config.Ledger.Path + "-wal")
		if err == nil && bytes.Contains(text, []byte(`"kind":"run.prepared"`)) {
			_ = os.Remove(folder)
			return
		}
	}
}
