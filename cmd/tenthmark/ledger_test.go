package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	"tenthmark/session"
	"tenthmark/session/ledger"
)

// smallLedger makes a ledger at rest with a burette in its register and gives the paths of
// ledger and key.
func smallLedger(t *testing.T) (path, key string) {
	t.Helper()
	dir := t.TempDir()
	path = filepath.Join(dir, "ledger.db")
	key = path + ".key"
	encode := func(seq int64, kind session.Kind, subject string, content any) ([]byte, error) {
		body, err := json.Marshal(content)
		if err != nil {
			return nil, err
		}
		at := session.At(time.Date(2026, 12, 1, 8, 0, int(seq), 0, time.UTC))
		return session.Event{Seq: seq, At: at, OffsetMin: 60, Actor: session.Operator("anna"), Kind: kind, Subject: subject, Body: body}.Encode()
	}
	founding := ledger.Founding{Path: path, Origin: "waterworks.example", KeyFile: key}
	if err := ledger.Create(t.Context(), founding, func(seq int64, public string) ([]byte, error) {
		return encode(seq, ledger.KindCreated, "", ledger.Created{Origin: founding.Origin, PublicKey: public, Software: "test"})
	}); err != nil {
		t.Fatal(err)
	}
	l, err := ledger.Open(t.Context(), ledger.Options{Path: path, KeyFile: key})
	if err != nil {
		t.Fatal(err)
	}
	for _, kind := range []session.Kind{session.DaemonStarted, session.SignedIn, session.DaemonStopped} {
		if _, err := l.Append(t.Context(), func(seq int64) ([]byte, error) {
			return encode(seq, kind, "anna", map[string]string{"note": fmt.Sprint("number ", seq)})
		}); err != nil {
			t.Fatal(err)
		}
	}
	if _, err := l.Checkpoint(t.Context()); err != nil {
		t.Fatal(err)
	}
	if err := l.Close(); err != nil {
		t.Fatal(err)
	}
	return path, key
}

// say runs `tenthmark ledger …` and gives exit code and both outputs.
func say(t *testing.T, args ...string) (code int, out, complaints string) {
	t.Helper()
	var o, e bytes.Buffer
	code = runLedger(t.Context(), args, &o, &e)
	return code, o.String(), e.String()
}

func TestLedgerCommands(t *testing.T) {
	path, key := smallLedger(t)
	dir := t.TempDir()
	code, checkpoint, complaints := say(t, "key", "--ledger", path, "--checkpoint")
	if code != exitDone || !strings.HasPrefix(checkpoint, "waterworks.example\n4\n") {
		t.Fatalf("checkpoint: %d %s%s", code, checkpoint, complaints)
	}
	old := filepath.Join(dir, "old.txt")
	if err := os.WriteFile(old, []byte(checkpoint), 0o600); err != nil {
		t.Fatal(err)
	}
	backup, export := filepath.Join(dir, "backup.db"), filepath.Join(dir, "export")
	for _, tt := range []struct {
		name string
		args []string
		code int
		want string // in either output
	}{
		{"verify", []string{"verify", "--ledger", path, "--key", key + ".pub", "--checkpoint", old}, exitDone, "1 checkpoints from outside fit"},
		{"verify as JSON", []string{"verify", "--ledger", path, "--json"}, exitDone, `"trusted": false`},
		{"show", []string{"show", "--ledger", path}, exitDone, "2026-12-01 09:00:01.000 +01:00  operator:anna      daemon.started"},
		{"show one kind", []string{"show", "--ledger", path, "--kind", "sign-in", "--json"}, exitDone, `{"seq":2,`},
		{"key", []string{"key", "--ledger", path}, exitDone, "waterworks.example+"},
		{"compare", []string{"compare", "--ledger", path, old}, exitDone, "OK"},
		{"backup", []string{"backup", "--ledger", path, backup}, exitDone, "4 events"},
		{"backup over a backup", []string{"backup", "--ledger", path, backup}, exitFailed, "not overwritten"},
		{"restore-check", []string{"restore-check", "--key", key + ".pub", "--checkpoint", old, backup}, exitDone, "OK"},
		{"export", []string{"export", "--ledger", path, export}, exitDone, "4 events of waterworks.example"},
		{"export to standard output", []string{"export", "--ledger", path}, exitDone, `"kind":"ledger.created"`},
		{"verify without a ledger", []string{"verify", "--ledger", path + "x"}, exitFailed, "There is no ledger"},
		{"drop without a key", []string{"verify", "--drop", dir}, exitUsage, "needs --key"},
		{"key change by nobody", []string{"key", "--ledger", path, "--change", filepath.Join(dir, "n.key")}, exitFailed, "somebody"},
		{"key change", []string{"key", "--ledger", path, "--change", filepath.Join(dir, "n.key"), "--reason", "yearly", "--operator", "anna"}, exitDone, "signs with"},
		{"verify after the change", []string{"verify", "--ledger", path, "--key", key + ".pub", "--checkpoint", old}, exitDone, "OK"},
		{"no such command", []string{"mend"}, exitUsage, "no sub-command"},
		{"no command", nil, exitUsage, "restore-check"},
		{"help", []string{"help"}, exitDone, "restore-check"},
		{"too much", []string{"show", "--ledger", path, "x"}, exitUsage, "no further arguments"},
	} {
		t.Run(tt.name, func(t *testing.T) {
			code, out, complaints := say(t, tt.args...)
			if code != tt.code || !strings.Contains(out+complaints, tt.want) {
				t.Errorf("exit code %d, want %d and %q in:\n%s%s", code, tt.code, tt.want, out, complaints)
			}
		})
	}
	public, err := ledger.ReadPublicKey(filepath.Join(export, "public.key"))
	if named, err2 := ledger.ReadPublicKey(key + ".pub"); err != nil || err2 != nil || public != named {
		t.Errorf("the export's key is %q (%v, %v)", public, err, err2)
	}
}

func TestLedgerVerifyNamesTheFirstBadEvent(t *testing.T) {
	path, _ := smallLedger(t)
	whole, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	at := bytes.Index(whole, []byte("number 2"))
	whole[at+len("number ")] = '7'
	if err := os.WriteFile(path, whole, 0o600); err != nil {
		t.Fatal(err)
	}
	code, out, _ := say(t, "verify", "--ledger", path)
	if code != exitFailed || !strings.Contains(out, "FIRST: event 2 does not fit its stored hashes") {
		t.Errorf("exit code %d:\n%s", code, out)
	}
}

// fakeDaemon serves a ledger's events and checkpoint, with lie in every answer's lines.
func fakeDaemon(t *testing.T, path string, lie func([]byte) []byte) string {
	t.Helper()
	r, err := ledger.OpenReader(t.Context(), path)
	if err != nil {
		t.Fatal(err)
	}
	mux := http.NewServeMux()
	mux.HandleFunc("GET /api/v1/ledger/checkpoint", func(w http.ResponseWriter, _ *http.Request) {
		signed, err := r.NewestCheckpoint(context.Background())
		if err != nil {
			t.Error(err)
		}
		_, _ = w.Write(signed)
	})
	mux.HandleFunc("GET /api/v1/ledger/events", func(w http.ResponseWriter, q *http.Request) {
		after, _ := strconv.ParseInt(q.URL.Query().Get("after"), 10, 64)
		limit, _ := strconv.Atoi(q.URL.Query().Get("limit"))
		entries, err := r.Events(context.Background(), ledger.Filter{After: after, Limit: limit, Kind: q.URL.Query().Get("kind")})
		if err != nil {
			t.Error(err)
		}
		for _, e := range entries {
			fmt.Fprintf(w, "%s\n", lie(e.Body))
		}
	})
	server := httptest.NewServer(mux)
	t.Cleanup(func() {
		server.Close()
		if err := r.Close(); err != nil {
			t.Error(err)
		}
	})
	return server.URL
}

// TestLedgerOfADaemon checks what a daemon hands out, without believing it.
func TestLedgerOfADaemon(t *testing.T) {
	path, key := smallLedger(t)
	honest := fakeDaemon(t, path, func(b []byte) []byte { return b })
	liar := fakeDaemon(t, path, func(b []byte) []byte { return bytes.Replace(b, []byte("number 2"), []byte("number 9"), 1) })
	for _, tt := range []struct {
		name string
		args []string
		code int
		want string
	}{
		{"verify", []string{"verify", "--url", honest, "--key", key + ".pub"}, exitDone, "4 events"},
		{"verify a liar", []string{"verify", "--url", liar, "--key", key + ".pub"}, exitFailed, "do not fit the signed checkpoint"},
		{"show", []string{"show", "--url", honest, "--kind", "sign-in"}, exitDone, "number 2"},
		{"checkpoint", []string{"key", "--url", honest, "--checkpoint"}, exitDone, "waterworks.example\n4\n"},
		{"export", []string{"export", "--url", honest}, exitDone, "number 3"},
		{"nobody there", []string{"show", "--url", "http://127.0.0.1:1"}, exitFailed, "refused"},
	} {
		t.Run(tt.name, func(t *testing.T) {
			code, out, complaints := say(t, tt.args...)
			if code != tt.code || !strings.Contains(out+complaints, tt.want) {
				t.Errorf("exit code %d, want %d and %q in:\n%s%s", code, tt.code, tt.want, out, complaints)
			}
		})
	}
}
