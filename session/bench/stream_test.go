package bench

import (
	"bufio"
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net/http"
	"strconv"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"tenthmark/session"
)

// message is one server-sent event.
type message struct {
	name, id string
	data     []byte
}

// hearing is an open stream.
type hearing struct {
	t    *testing.T
	body io.ReadCloser
	in   *bufio.Reader
}

func (l *laboratory) hear(lastID string) *hearing {
	l.t.Helper()
	ctx, cancel := context.WithCancel(context.Background())
	req, err := http.NewRequestWithContext(ctx, "GET", l.server.URL+"/api/v1/stream", nil)
	if err != nil {
		l.t.Fatal(err)
	}
	if lastID != "" {
		req.Header.Set("Last-Event-ID", lastID)
	}
	resp, err := l.server.Client().Do(req)
	if err != nil {
		l.t.Fatal(err)
	}
	l.t.Cleanup(func() { cancel(); resp.Body.Close() })
	if kind := resp.Header.Get("Content-Type"); kind != "text/event-stream" {
		l.t.Fatalf("stream is %q", kind)
	}
	return &hearing{l.t, resp.Body, bufio.NewReader(resp.Body)}
}

// next gives the next message with a name.
func (h *hearing) next(name string) message {
	h.t.Helper()
	for {
		var m message
		for {
			line, err := h.in.ReadBytes('\n')
			if err != nil {
				h.t.Fatalf("waiting for %q: %v", name, err)
			}
			line = bytes.TrimSuffix(line, []byte("\n"))
			if len(line) == 0 {
				break
			}
			field, value, _ := bytes.Cut(line, []byte(": "))
			switch string(field) {
			case "event":
				m.name = string(value)
			case "id":
				m.id = string(value)
			case "data":
				m.data = value
			}
		}
		if m.name == name {
			return m
		}
	}
}

func TestTheStreamTellsStationsRunsAndEvents(t *testing.T) {
	l, run := opened(t, shortPlan)
	h := l.hear("")
	var s Station
	if err := json.Unmarshal(h.next("station").data, &s); err != nil || s.Name != "bench-1" || s.Live.Text != "45.1234" {
		t.Errorf("station %+v, %v", s, err)
	}
	l.must(200, "POST", run+"/facts", `{"reading":"0.00"}`)
	e := h.next("event")
	lines := l.record.all()
	if !bytes.Equal(e.data, lines[len(lines)-1]) || e.id != strconv.Itoa(len(lines)-1) {
		t.Errorf("event %s with id %q, stored %s", e.data, e.id, lines[len(lines)-1])
	}
	var news runNews
	if err := json.Unmarshal(h.next("run").data, &news); err != nil || news.State != session.Open || news.Prompt != "Put the empty vessel on the pan." || len(news.Awaits) == 0 {
		t.Errorf("run %+v, %v", news, err)
	}
}

func TestTheStreamGoesOnWhereItWasLeft(t *testing.T) {
	l, run := opened(t, shortPlan)
	l.whole(run)
	all := len(l.record.all())
	h := l.hear("4")
	for want := 5; want < all; want++ {
		if e := h.next("event"); e.id != strconv.Itoa(want) || !bytes.Equal(e.data, l.record.all()[want]) {
			t.Fatalf("event %q where %d was to come", e.id, want)
		}
	}
	l.must(200, "POST", run+"/suspend", `{"reason":"pause"}`)
	if e := h.next("event"); e.id != strconv.Itoa(all) {
		t.Errorf("the next event is %q, want %d", e.id, all)
	}
	if e := l.hear("-1").next("event"); e.id != "0" {
		t.Errorf("from the beginning: %q", e.id)
	}
	fresh := l.hear(strconv.Itoa(1_000_000)) // from a ledger that was longer: nothing is repeated
	l.must(200, "POST", run+"/resume", `{"reason":"on"}`)
	if e := fresh.next("event"); e.id != strconv.Itoa(all+1) {
		t.Errorf("after an id that is not there yet: %q, want %d", e.id, all+1)
	}
}

// A backlog longer than the desk keeps for a listener is read from the ledger: nothing is
// missing and nothing comes twice.
func TestTheStreamMissesNothingInAFlood(t *testing.T) {
	l, run := opened(t, shortPlan)
	h := l.hear("")
	h.next("station")
	first := len(l.record.all())
	const flood = 600
	_, err := l.desk.Do(t.Context(), session.Station("bench-1"), func(*session.Book) ([]session.Draft, error) {
		drafts := make([]session.Draft, flood)
		for i := range drafts {
			drafts[i] = session.Draft{Kind: session.LogSample, Subject: "bench-1", Body: map[string]int{"i": i}}
		}
		return drafts, nil
	})
	if err != nil {
		t.Fatal(err)
	}
	for i := range flood {
		if e := h.next("event"); e.id != strconv.Itoa(first+i) {
			t.Fatalf("event %q where %d was to come", e.id, first+i)
		}
	}
	l.must(200, "POST", run+"/facts", `{"reading":"0.00"}`)
	if e := h.next("event"); e.id != strconv.Itoa(first+flood) {
		t.Errorf("after the flood: %q", e.id)
	}
}

func TestOpenStreamsDoNotHoldUpAShutdown(t *testing.T) {
	l := open(t, nil)
	h := l.hear("")
	h.next("station")
	ctx, cancel := context.WithTimeout(t.Context(), 20*time.Second)
	defer cancel()
	if err := l.server.Config.Shutdown(ctx); err != nil {
		t.Errorf("shutdown with an open stream: %v", err)
	}
	if _, err := io.ReadAll(h.in); err != nil {
		t.Errorf("the stream did not end in order: %v", err)
	}
}

// When the ledger takes nothing, the page hears of it at once.
func TestTroubleIsTold(t *testing.T) {
	l, run := opened(t, shortPlan)
	h := l.hear("")
	h.next("station")
	l.record.mu.Lock()
	l.record.fail = &session.Fault{Code: "disk-full", Message: "The disk is full.", Hint: "Make room.", Err: errors.New("no space")}
	l.record.mu.Unlock()
	if a := l.call("POST", run+"/facts", `{"reading":"0.00"}`); a.status != 503 || a.code() != "disk-full" {
		t.Errorf("an entry that cannot be recorded: %d %s", a.status, a.text)
	}
	if m := h.next("trouble"); !bytes.Contains(m.data, []byte("Make room.")) {
		t.Errorf("told %s", m.data)
	}
}

// stuck is a connection whose other side takes nothing: a write ends with its deadline.
type stuck struct {
	header   http.Header
	deadline time.Time
	free     int // messages that are taken before it sticks
}

func (s *stuck) Header() http.Header                 { return s.header }
func (s *stuck) WriteHeader(int)                     {}
func (s *stuck) FlushError() error                   { return nil }
func (s *stuck) SetReadDeadline(time.Time) error     { return nil }
func (s *stuck) SetWriteDeadline(at time.Time) error { s.deadline = at; return nil }
func (s *stuck) Write(p []byte) (int, error) {
	if s.free--; s.free >= 0 {
		return len(p), nil
	}
	if s.deadline.IsZero() {
		return 0, errors.New("a stream wrote without a deadline: it would hang for ever")
	}
	time.Sleep(time.Until(s.deadline))
	return 0, fmt.Errorf("write: %w", errTimedOut)
}

var errTimedOut = errors.New("deadline passed")

// In a bubble of its own time, a client that takes nothing is dropped after slowAfter, and
// the line is cut rather than ended as if all had been said.
func TestASlowClientIsDropped(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		l := quietBench(t)
		w := &stuck{header: http.Header{}, free: 5}
		began := time.Now()
		var cut any
		func() {
			defer func() { cut = recover() }()
			r, err := http.NewRequestWithContext(t.Context(), "GET", "/api/v1/stream", nil)
			if err != nil {
				t.Fatal(err)
			}
			_ = l.stream(&call{r, w, person{}})
		}()
		if cut != http.ErrAbortHandler {
			t.Errorf("the stream ended with %v, want the line cut", cut)
		}
		if took := time.Since(began); took < slowAfter || took > slowAfter+10*stationBeat {
			t.Errorf("dropped after %v", took)
		}
	})
}

// A station that changes with every frame is told at most once in stationEvery.
func TestStationsAreToldAtABoundedPace(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		b := quietBench(t)
		busy, is := b.Stations.(*restless)
		if !is {
			t.Fatal("not the restless stations")
		}
		ctx, cancel := context.WithTimeout(t.Context(), 3*time.Second)
		defer cancel()
		r, err := http.NewRequestWithContext(ctx, "GET", "/api/v1/stream", nil)
		if err != nil {
			t.Fatal(err)
		}
		w := &kept{header: http.Header{}}
		if err := b.stream(&call{r, w, person{}}); err != nil {
			t.Fatal(err)
		}
		told := strings.Count(w.String(), "event: station")
		if most := int(3*time.Second/stationEvery) + 1; told > most || told < most-2 || busy.asked < told {
			t.Errorf("told %d times in 3 s, want about %d", told, most)
		}
	})
}

// kept is a connection that keeps what was written.
type kept struct {
	strings.Builder
	header http.Header
}

func (k *kept) Header() http.Header              { return k.header }
func (k *kept) WriteHeader(int)                  {}
func (k *kept) FlushError() error                { return nil }
func (k *kept) SetReadDeadline(time.Time) error  { return nil }
func (k *kept) SetWriteDeadline(time.Time) error { return nil }

// restless is a station whose value changes whenever somebody looks.
type restless struct{ asked int }

func (r *restless) List() []Station {
	r.asked++
	return []Station{{Name: "bench-1", State: Online, Live: &Live{Text: strconv.Itoa(r.asked), Unit: "g"}}}
}
