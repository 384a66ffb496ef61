package ledger

import (
	"errors"
	"flag"
	"fmt"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// TestEventsFilter compares the index with looking at every event.
func TestEventsFilter(t *testing.T) {
	l := open(t, found(t, t.TempDir()))
	mustAppend(t, l, plains(2600)...)
	if _, err := l.Checkpoint(t.Context()); err != nil { // indexes two blocks
		t.Fatal(err)
	}
	mustAppend(t, l, plains(300)...)
	var all []Entry
	if err := l.Replay(t.Context(), 0, func(e Entry) error { all = append(all, e); return nil }); err != nil {
		t.Fatal(err)
	}
	rapid.Check(t, func(t *rapid.T) {
		f := Filter{
			After:   rapid.Int64Range(-1, 3000).Draw(t, "after"),
			Limit:   rapid.IntRange(0, 400).Draw(t, "limit"),
			Subject: rapid.SampledFrom([]string{"", "", "B-03-20261201-1", "B-16-20261201-1", "nobody"}).Draw(t, "subject"),
			Kind:    rapid.SampledFrom([]string{"", "", "weighing", "reading", KindCreated}).Draw(t, "kind"),
			Actor:   rapid.SampledFrom([]string{"", "", "operator:anna", "daemon"}).Draw(t, "actor"),
		}
		got, err := l.Events(t.Context(), f)
		if err != nil {
			t.Fatal(err)
		}
		if !slices.Equal(seqsOf(got), seqsOf(byLooking(all, f))) {
			t.Fatalf("got %v, want %v", seqsOf(got), seqsOf(byLooking(all, f)))
		}
	})
}

func byLooking(all []Entry, f Filter) []Entry {
	var out []Entry
	for _, e := range all {
		h, err := ParseHeader(e.Body)
		if err == nil && e.Seq > f.After && h.matches(f) && (f.Limit == 0 || len(out) < f.Limit) {
			out = append(out, e)
		}
	}
	return out
}

func seqsOf(entries []Entry) []int64 {
	out := make([]int64, len(entries))
	for i := range entries {
		out[i] = entries[i].Seq
	}
	return out
}

func TestReplayStopsAtTheCallersError(t *testing.T) {
	l := open(t, found(t, t.TempDir()))
	mustAppend(t, l, plains(10)...)
	enough := errors.New("enough")
	var seen []int64
	err := l.Replay(t.Context(), 3, func(e Entry) error {
		if seen = append(seen, e.Seq); e.Seq == 6 {
			return enough
		}
		return nil
	})
	if !errors.Is(err, enough) || !slices.Equal(seen, []int64{3, 4, 5, 6}) {
		t.Errorf("saw %v, error %v", seen, err)
	}
}

// TestReplayMayAppend shows that a callback may use the ledger.
func TestReplayMayAppend(t *testing.T) {
	l := open(t, found(t, t.TempDir()))
	mustAppend(t, l, plains(3)...)
	if err := l.Replay(t.Context(), 0, func(Entry) error { mustAppend(t, l, plain); return nil }); err != nil {
		t.Fatal(err)
	}
	if l.Size() != 8 {
		t.Errorf("size %d, want 8", l.Size())
	}
}

func TestSnapshots(t *testing.T) {
	opt := found(t, t.TempDir())
	l := open(t, opt)
	if _, ok, err := l.LoadSnapshot(t.Context()); ok || err != nil {
		t.Fatalf("a new ledger has a snapshot (%v)", err)
	}
	mustAppend(t, l, plains(10)...)
	for _, size := range []int64{4, 9} {
		if err := l.SaveSnapshot(t.Context(), Snapshot{size, fmt.Appendf(nil, "state of %d", size)}); err != nil {
			t.Fatal(err)
		}
	}
	for _, size := range []int64{0, 12} {
		if l.SaveSnapshot(t.Context(), Snapshot{size, nil}) == nil {
			t.Errorf("snapshot of %d events accepted", size)
		}
	}
	mustClose(t, l)
	l = open(t, opt)
	snap, ok, err := l.LoadSnapshot(t.Context())
	if err != nil || !ok || snap.Size != 9 || string(snap.State) != "state of 9" {
		t.Fatalf("snapshot %+v (%v)", snap, err)
	}
	mustClose(t, l)
	crime(t, opt.Path, `UPDATE snapshot SET state = CAST('state of a liar' AS BLOB)`)
	l = open(t, opt)
	if _, ok, err := l.LoadSnapshot(t.Context()); ok || err != nil {
		t.Errorf("a changed snapshot was taken (%v)", err)
	}
}

// TestAppendReopenModel drives a ledger through random appends, failures, checkpoints and
// reopenings and compares it with a list.
func TestAppendReopenModel(t *testing.T) {
	fewerChecks(t, "25")
	rapid.Check(t, func(rt *rapid.T) {
		opt := found(t, t.TempDir())
		disk := &failAt{}
		opt.fault = disk.strike
		l, err := Open(t.Context(), opt)
		if err != nil {
			rt.Fatal(err)
		}
		defer func() { mustClose(t, l) }()
		model := []string{}
		note := func(entries []Entry) {
			for _, e := range entries {
				if e.Seq != int64(len(model))+1 {
					rt.Fatalf("number %d after %d events", e.Seq, len(model)+1)
				}
				model = append(model, string(e.Body))
			}
		}
		rt.Repeat(map[string]func(*rapid.T){
			"append": func(rt *rapid.T) {
				entries, err := l.Append(t.Context(), plains(rapid.IntRange(1, 4).Draw(rt, "n"))...)
				if err != nil {
					rt.Fatal(err)
				}
				note(entries)
			},
			"append on a bad disk": func(rt *rapid.T) {
				steps := []step{beforeBegin, afterBegin, beforeInsert, afterInsert, beforeCommit, afterCommit}
				*disk = failAt{rapid.SampledFrom(steps).Draw(rt, "step"), 1}
				entries, err := l.Append(t.Context(), plain)
				if (err == nil) != (disk.at == afterCommit) {
					rt.Fatalf("%s: %v", disk.at, err)
				}
				note(entries)
			},
			"checkpoint": func(rt *rapid.T) {
				if _, err := l.Checkpoint(t.Context()); err != nil {
					rt.Fatal(err)
				}
			},
			"reopen": func(rt *rapid.T) {
				mustClose(t, l)
				if l, err = Open(t.Context(), opt); err != nil {
					rt.Fatal(err)
				}
			},
			"": func(rt *rapid.T) {
				got, err := l.Events(t.Context(), Filter{After: 0})
				if err != nil || len(got) != len(model) || l.Size() != int64(len(model))+1 {
					rt.Fatalf("%d events, size %d, want %d (%v)", len(got), l.Size(), len(model), err)
				}
				for i := range got {
					if string(got[i].Body) != model[i] {
						rt.Fatalf("event %d is %s", i+1, got[i].Body)
					}
				}
			},
		})
	})
}

// fewerChecks keeps a slow property test short, unless more checks were asked for.
func fewerChecks(t *testing.T, n string) {
	t.Helper()
	f := flag.Lookup("rapid.checks")
	if f.Value.String() != f.DefValue {
		return
	}
	if err := f.Value.Set(n); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := f.Value.Set(f.DefValue); err != nil {
			t.Fatal(err)
		}
	})
}
