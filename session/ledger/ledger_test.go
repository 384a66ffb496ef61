package ledger

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"testing"

	"tenthmark/session"
)

const testOrigin = "waterworks.example/burettes"

// line gives the bytes of an event as the session encodes them.
func line(seq int64, actor, kind, subject string, content any) []byte {
	fill, err := json.Marshal(content)
	if err != nil {
		panic(err)
	}
	return fmt.Appendf(nil, `{"seq":%d,"at":"2026-12-01T%02d:%02d:%02d.%03dZ","offset_min":60,"run_ms":%d,"actor":%q,"kind":%q,"subject":%q,"body":%s}`,
		seq, seq/3600%24, seq/60%60, seq%60, seq%1000, 1000*seq, actor, kind, subject, fill)
}

// weight drafts an ordinary event.
func weight(run string, massG string) Draft {
	return func(seq int64) ([]byte, error) {
		return line(seq, "station:bench-1", "weighing", run, map[string]string{"mass_g": massG, "raw": "N     +  " + massG + " g  \r\n"}), nil
	}
}

// plain drafts an event that is different for every number.
func plain(seq int64) ([]byte, error) {
	actors := []string{"operator:anna", "operator:bert", "station:bench-1", "daemon"}
	kinds := []string{"weighing", "reading", "water_temp"}
	return line(seq, actors[seq%4], kinds[seq%3], fmt.Sprintf("B-%02d-20261201-1", seq/100%17), map[string]any{"n": seq}), nil
}

func plains(n int) []Draft {
	drafts := make([]Draft, n)
	for i := range drafts {
		drafts[i] = plain
	}
	return drafts
}

func founding(dir string) Founding {
	return Founding{Path: filepath.Join(dir, "ledger.db"), Origin: testOrigin, KeyFile: filepath.Join(dir, "ledger.key")}
}

func firstEvent(seq int64, key string) ([]byte, error) {
	return line(seq, "daemon", KindCreated, "", Created{Origin: testOrigin, PublicKey: key, Software: "test"}), nil
}

// found makes a ledger with event 0 in dir.
func found(t testing.TB, dir string) Options {
	t.Helper()
	f := founding(dir)
	if err := Create(t.Context(), f, firstEvent); err != nil {
		t.Fatal(err)
	}
	return Options{Path: f.Path, KeyFile: f.KeyFile}
}

// open opens the ledger and closes it at the end of the test.
func open(t testing.TB, opt Options) *Ledger {
	t.Helper()
	l, err := Open(t.Context(), opt)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := l.Close(); err != nil {
			t.Error(err)
		}
	})
	return l
}

func mustAppend(t testing.TB, l *Ledger, drafts ...Draft) []Entry {
	t.Helper()
	entries, err := l.Append(t.Context(), drafts...)
	if err != nil {
		t.Fatal(err)
	}
	return entries
}

func mustClose(t testing.TB, c interface{ Close() error }) {
	t.Helper()
	if err := c.Close(); err != nil {
		t.Fatal(err)
	}
}

// wantCode fails unless err is a fault with this code and a hint.
func wantCode(t *testing.T, err error, code string) {
	t.Helper()
	var f *session.Fault
	if !errors.As(err, &f) || f.Code != code {
		t.Fatalf("error %v, want a fault with code %q", err, code)
	}
	if f.Hint == "" || f.Message == "" {
		t.Fatalf("fault %q has no hint or message", code)
	}
}

func TestAppendThenReopen(t *testing.T) {
	opt := found(t, t.TempDir())
	l := open(t, opt)
	if got := l.Size(); got != 1 {
		t.Fatalf("new ledger has %d events, want 1", got)
	}
	written := mustAppend(t, l, weight("B-07-20261201-1", "99.8730"), weight("B-07-20261201-1", "109.8420"))
	written = append(written, mustAppend(t, l, plains(40)...)...)
	root := l.edge.root()
	mustClose(t, l)

	l = open(t, opt)
	if l.Size() != 43 || l.edge.root() != root {
		t.Fatalf("reopened: size %d root %v, want 43 and %v", l.Size(), l.edge.root(), root)
	}
	got, err := l.Events(t.Context(), Filter{After: 0})
	if err != nil || len(got) != 42 {
		t.Fatalf("%d events (%v), want 42", len(got), err)
	}
	for i, e := range got {
		if e.Seq != written[i].Seq || string(e.Body) != string(written[i].Body) {
			t.Errorf("event %d came back as %s", written[i].Seq, e.Body)
		}
	}
}

func TestAppendIsAllOrNothing(t *testing.T) {
	l := open(t, found(t, t.TempDir()))
	bad := errors.New("cannot be encoded")
	for _, tt := range []struct {
		name  string
		draft Draft
	}{
		{"an encoder that fails", func(int64) ([]byte, error) { return nil, bad }},
		{"another number", func(seq int64) ([]byte, error) { return plain(seq + 1) }},
		{"a line break", func(seq int64) ([]byte, error) { b, _ := plain(seq); return append(b, '\n'), nil }},
		{"no JSON", func(seq int64) ([]byte, error) { b, _ := plain(seq); return append(b, '}'), nil }},
		{"no UTF-8", func(seq int64) ([]byte, error) {
			return fmt.Appendf(nil, `{"seq":%d,"at":"2026-12-01T00:00:00.000Z","offset_min":0,"run_ms":0,"actor":"daemon","kind":"x","subject":"","body":"`+"\xff"+`"}`, seq), nil
		}},
		{"too long", func(seq int64) ([]byte, error) {
			return line(seq, "daemon", "x", "", string(make([]byte, MaxBody))), nil
		}},
		{"no header", func(int64) ([]byte, error) { return []byte(`{}`), nil }},
	} {
		t.Run(tt.name, func(t *testing.T) {
			if _, err := l.Append(t.Context(), plain, tt.draft); err == nil {
				t.Error("accepted")
			}
			if got := l.Size(); got != 1 {
				t.Errorf("size %d, want 1", got)
			}
		})
	}
	if got := mustAppend(t, l, plain); got[0].Seq != 1 {
		t.Errorf("next event has number %d, want 1", got[0].Seq)
	}
}

func TestCreateRefusesToOverwrite(t *testing.T) {
	for _, name := range []string{"ledger.db", "ledger.db-wal", "ledger.key", "ledger.key.pub"} {
		t.Run(name, func(t *testing.T) {
			dir := t.TempDir()
			path := filepath.Join(dir, name)
			if err := os.WriteFile(path, []byte("precious"), 0o600); err != nil {
				t.Fatal(err)
			}
			wantCode(t, Create(t.Context(), founding(dir), firstEvent), "ledger-exists")
			if got, err := os.ReadFile(path); err != nil || string(got) != "precious" {
				t.Errorf("file now holds %q (%v)", got, err)
			}
		})
	}
}

func TestCreateLeavesNothingBehind(t *testing.T) {
	dir := t.TempDir()
	bad := errors.New("no event")
	err := Create(t.Context(), founding(dir), func(int64, string) ([]byte, error) { return nil, bad })
	if !errors.Is(err, bad) {
		t.Fatalf("error %v, want the encoder's", err)
	}
	for _, name := range []string{"ledger.db", "ledger.key", "ledger.key.pub"} {
		if _, err := os.Stat(filepath.Join(dir, name)); !errors.Is(err, os.ErrNotExist) {
			t.Errorf("%s is left (%v)", name, err)
		}
	}
	if err := os.WriteFile(filepath.Join(dir, "ledger.db.part"), []byte("of an interrupted init"), 0o600); err != nil {
		t.Fatal(err)
	}
	if err := Create(t.Context(), founding(dir), firstEvent); err != nil {
		t.Errorf("second try: %v", err)
	}
	names, err := filepath.Glob(filepath.Join(dir, "*"))
	if err != nil || len(names) != 4 { // ledger, lock, two keys
		t.Errorf("the folder holds %v (%v)", names, err)
	}
}

func TestKeyFileIsPrivate(t *testing.T) {
	opt := found(t, t.TempDir())
	info, err := os.Stat(opt.KeyFile)
	if err != nil || info.Mode().Perm() != 0o600 {
		t.Fatalf("key file mode %v (%v), want 0600", info.Mode(), err)
	}
	if err := os.Chmod(opt.KeyFile, 0o640); err != nil {
		t.Fatal(err)
	}
	_, err = Open(t.Context(), opt)
	wantCode(t, err, "ledger-key-open")
}

func TestAppendIsNotHalfCancelled(t *testing.T) {
	l := open(t, found(t, t.TempDir()))
	ctx, cancel := context.WithCancel(t.Context())
	if _, err := l.Append(ctx, func(seq int64) ([]byte, error) { cancel(); return plain(seq) }); !errors.Is(err, context.Canceled) {
		t.Fatalf("error %v, want that the caller gave up", err)
	}
	if l.Size() != 1 {
		t.Errorf("size %d, want 1: nothing was begun", l.Size())
	}
	mustAppend(t, l, plain)
}

func TestCheckpointsAndReader(t *testing.T) {
	opt := found(t, t.TempDir())
	l := open(t, opt)
	mustAppend(t, l, plains(10)...)
	signed, err := l.Checkpoint(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	again, err := l.Checkpoint(t.Context())
	if err != nil || string(again) != string(signed) {
		t.Fatalf("second checkpoint of one size differs (%v)", err)
	}
	head, err := ReadCheckpoint(signed, l.PublicKey())
	if err != nil || head.Size != 11 || head.Root != l.edge.root() || head.Origin != testOrigin {
		t.Fatalf("checkpoint says %+v (%v)", head, err)
	}
	if _, err := OpenReader(t.Context(), opt.Path); session.FaultCode(err) != "ledger-in-use" {
		t.Fatalf("reader while the daemon runs: %v", err)
	}
	mustClose(t, l)
	r, err := OpenReader(t.Context(), opt.Path)
	if err != nil {
		t.Fatal(err)
	}
	defer mustClose(t, r)
	newest, err := r.NewestCheckpoint(t.Context())
	if err != nil || string(newest) != string(signed) {
		t.Errorf("reader's newest checkpoint differs (%v)", err)
	}
	_, err = Open(t.Context(), opt)
	wantCode(t, err, "ledger-in-use")
}
