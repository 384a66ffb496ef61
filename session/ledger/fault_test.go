package ledger

import (
	"errors"
	"os"
	"testing"

	"tenthmark/session"
)

// errDisk stands for a failing disk.
var errDisk = errors.New("input/output error")

// failAt gives a fault that strikes the given number of times at a step.
type failAt struct {
	at    step
	times int
}

func (f *failAt) strike(s step) error {
	if s == f.at && f.times > 0 {
		f.times--
		return errDisk
	}
	return nil
}

// TestWriteFaults makes every step of a write fail, in both kinds: "before" failed and
// did not happen, "after" failed but did happen. In each case the ledger has to find out
// which, say so, and go on.
func TestWriteFaults(t *testing.T) {
	for _, tt := range []struct {
		at    step
		saved bool // an append that reports success although a step reported a fault
	}{
		{beforeBegin, false},
		{afterBegin, false},
		{beforeInsert, false},
		{afterInsert, false},
		{beforeCommit, false},
		{afterCommit, true},
	} {
		t.Run(string(tt.at), func(t *testing.T) {
			opt := found(t, t.TempDir())
			f := &failAt{}
			opt.fault = f.strike
			l := open(t, opt)
			mustAppend(t, l, plains(5)...)
			*f = failAt{tt.at, 1}
			entries, err := l.Append(t.Context(), plain, plain)
			want := int64(6)
			if tt.saved {
				want = 8
			}
			if (err == nil) != tt.saved || tt.saved && len(entries) != 2 {
				t.Fatalf("append gave %d events, error %v", len(entries), err)
			}
			if err != nil && !errors.Is(err, errDisk) {
				t.Errorf("the cause is lost: %v", err)
			}
			if l.Size() != want {
				t.Errorf("size %d, want %d", l.Size(), want)
			}
			if got := mustAppend(t, l, plain); got[0].Seq != want {
				t.Errorf("next event has number %d, want %d", got[0].Seq, want)
			}
			mustClose(t, l)
			verifyGood(t, opt, want+1)
		})
	}
}

// TestUnclearThenRecovered lets the disk stay away after the fault, so that the ledger
// cannot find out at once.
func TestUnclearThenRecovered(t *testing.T) {
	for _, tt := range []struct {
		name  string
		at    step
		found int // events that Recover gives
	}{
		{"did not happen", beforeCommit, 0},
		{"did happen", afterCommit, 2},
	} {
		for _, reopen := range []step{beforeReopen, afterReopen} {
			t.Run(tt.name+", "+string(reopen), func(t *testing.T) {
				opt := found(t, t.TempDir())
				write, again := &failAt{}, &failAt{reopen, 3}
				opt.fault = func(s step) error { return errors.Join(write.strike(s), again.strike(s)) }
				l := open(t, opt)
				mustAppend(t, l, plains(5)...)
				*write = failAt{tt.at, 1}
				_, err := l.Append(t.Context(), plain, plain)
				wantCode(t, err, "ledger-unclear")
				if l.Size() != 6 {
					t.Errorf("unclear: size says %d, want the 6 that are known", l.Size())
				}
				_, err = l.Append(t.Context(), plain)
				wantCode(t, err, "ledger-broken")
				_, err = l.Checkpoint(t.Context())
				wantCode(t, err, "ledger-broken")
				for range 2 {
					if _, err := l.Recover(t.Context()); !errors.Is(err, errDisk) {
						t.Fatalf("recover: %v, want the disk's fault", err)
					}
				}
				entries, err := l.Recover(t.Context())
				if err != nil || len(entries) != tt.found {
					t.Fatalf("recovered %d events (%v), want %d", len(entries), err, tt.found)
				}
				want := int64(6 + tt.found)
				if got := mustAppend(t, l, plain); got[0].Seq != want {
					t.Errorf("next event has number %d, want %d", got[0].Seq, want)
				}
				mustClose(t, l)
				verifyGood(t, opt, want+1)
			})
		}
	}
}

// TestCheckpointFaults does the same for the signing of a checkpoint.
func TestCheckpointFaults(t *testing.T) {
	for _, at := range []step{beforeBegin, beforeCommit, afterCommit} {
		t.Run(string(at), func(t *testing.T) {
			opt := found(t, t.TempDir())
			f := &failAt{}
			opt.fault = f.strike
			l := open(t, opt)
			mustAppend(t, l, plains(5)...)
			*f = failAt{at, 1}
			_, err := l.Checkpoint(t.Context())
			if saved := at == afterCommit; (err == nil) != saved {
				t.Fatalf("checkpoint: %v", err)
			}
			signed, err := l.Checkpoint(t.Context())
			if err != nil {
				t.Fatal(err)
			}
			if head, err := ReadCheckpoint(signed, l.PublicKey()); err != nil || head.Size != 6 {
				t.Errorf("checkpoint of %d events (%v), want 6", head.Size, err)
			}
			mustClose(t, l)
			verifyGood(t, opt, 6)
		})
	}
}

func TestClosedLedger(t *testing.T) {
	l := open(t, found(t, t.TempDir()))
	mustClose(t, l)
	if _, err := l.Append(t.Context(), plain); !errors.Is(err, errClosed) {
		t.Errorf("append: %v", err)
	}
	if _, err := l.Recover(t.Context()); !errors.Is(err, errClosed) {
		t.Errorf("recover: %v", err)
	}
	mustClose(t, l)
}

// verifyGood checks a closed ledger against its public key.
func verifyGood(t testing.TB, opt Options, events int64) {
	t.Helper()
	key, err := ReadPublicKey(opt.KeyFile + ".pub")
	if err != nil {
		t.Fatal(err)
	}
	r, err := Verify(t.Context(), opt.Path, VerifyOptions{PublicKey: key})
	if err != nil {
		t.Fatal(err)
	}
	if !r.OK() || r.Events != events || !r.Trusted {
		t.Errorf("verify: %d events, want %d; first finding: %v", r.Events, events, r.First())
	}
}

func TestOpenRefuses(t *testing.T) {
	for _, tt := range []struct {
		name, code string
		spoil      func(t *testing.T, opt *Options)
	}{
		{"a missing file", "ledger-missing", func(_ *testing.T, opt *Options) { opt.Path += "x" }},
		{"a foreign database", "ledger-foreign", func(t *testing.T, opt *Options) { crime(t, opt.Path, `PRAGMA application_id = 7`) }},
		{"a newer form", "ledger-newer", func(t *testing.T, opt *Options) { crime(t, opt.Path, `PRAGMA user_version = 99`) }},
		{"no database", "ledger-damaged", func(t *testing.T, opt *Options) { overwrite(t, opt.Path, 0, "this is not SQLite") }},
		{"a lost guard", "ledger-altered", func(t *testing.T, opt *Options) {
			crime(t, opt.Path, `CREATE TABLE other (x INTEGER) STRICT`)
		}},
		{"a missing key", "ledger-key", func(_ *testing.T, opt *Options) { opt.KeyFile += "x" }},
		{"another ledger's key", "ledger-key", func(t *testing.T, opt *Options) { opt.KeyFile = found(t, t.TempDir()).KeyFile }},
		{"an event changed behind the last checkpoint", "ledger-altered", func(t *testing.T, opt *Options) {
			l, err := Open(t.Context(), *opt)
			if err != nil {
				t.Fatal(err)
			}
			mustAppend(t, l, plains(3)...)
			mustClose(t, l)
			crime(t, opt.Path, `UPDATE event SET body = CAST(replace(CAST(body AS TEXT), '"n":2', '"n":7') AS BLOB)`)
		}},
		{"a forged checkpoint", "ledger-altered", func(t *testing.T, opt *Options) {
			crime(t, opt.Path, `UPDATE checkpoint SET note = CAST(replace(CAST(note AS TEXT), char(10)||'1'||char(10), char(10)||'2'||char(10)) AS BLOB)`)
		}},
		{"a cut tail with its checkpoint kept", "ledger-altered", func(t *testing.T, opt *Options) {
			l, err := Open(t.Context(), *opt)
			if err != nil {
				t.Fatal(err)
			}
			mustAppend(t, l, plains(9)...)
			if _, err := l.Checkpoint(t.Context()); err != nil {
				t.Fatal(err)
			}
			mustClose(t, l)
			crime(t, opt.Path, `DELETE FROM event WHERE seq > 5`)
		}},
	} {
		t.Run(tt.name, func(t *testing.T) {
			opt := found(t, t.TempDir())
			tt.spoil(t, &opt)
			l, err := Open(t.Context(), opt)
			if err == nil {
				mustClose(t, l)
				t.Fatal("opened")
			}
			wantCode(t, err, tt.code)
		})
	}
}

// TestFaultKeepsCause checks that an explanation never hides what happened.
func TestFaultKeepsCause(t *testing.T) {
	err := explain("write", "x.db", errDisk)
	if !errors.Is(err, errDisk) || session.FaultCode(err) != "ledger-fault" {
		t.Errorf("explained as %v", err)
	}
	if explain("write", "x.db", nil) != nil {
		t.Error("no error became one")
	}
}

func overwrite(t testing.TB, path string, at int64, text string) {
	t.Helper()
	f, err := os.OpenFile(path, os.O_RDWR, 0)
	if err != nil {
		t.Fatal(err)
	}
	defer mustClose(t, f)
	if _, err := f.WriteAt([]byte(text), at); err != nil {
		t.Fatal(err)
	}
}
