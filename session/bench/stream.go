package bench

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"net/http"
	"strconv"
	"time"

	"tenthmark/session"
	"tenthmark/session/desk"
)

// Pace of a stream.
const (
	stationEvery = 100 * time.Millisecond // a station's state is sent at most that often
	stationBeat  = time.Second            // and at least that often, so that silence means a dead line
	slowAfter    = 5 * time.Second        // a client that does not take a message within this is dropped
	streamBatch  = 500                    // events read from the ledger at a time
)

// runNews is what the stream says about a run after each change.
type runNews struct {
	ID     string            `json:"id"`
	State  session.State     `json:"state"`
	Prompt string            `json:"prompt"`
	Awaits []session.Awaited `json:"awaits"`
	Doubt  *session.Doubt    `json:"doubt,omitempty"`
	Event  int64             `json:"event"` // number of the run's latest event
}

// stream sends server-sent events: station (live state), run (where a run stands),
// event (a line of the ledger as stored, its number as id) and trouble. What the desk
// announces only wakes it: the lines come from the ledger, so none is lost or doubled,
// whatever happens in between.
type stream struct {
	b       *Bench
	out     *http.ResponseController
	w       http.ResponseWriter
	last    int64             // number of the event sent last
	shown   map[string][]byte // station → what was sent of it last, without its age
	shownAt map[string]time.Time
}

func (b *Bench) stream(c *call) error {
	s := &stream{b: b, out: http.NewResponseController(c.w), w: c.w, shown: map[string][]byte{}, shownAt: map[string]time.Time{}}
	if err := s.begin(c); err != nil {
		return err
	}
	err := s.run(c.Context())
	if err != nil && c.Context().Err() == nil {
		b.Log.Info().Err(err).Msg("stream dropped")
		panic(http.ErrAbortHandler) // the answer has begun: cutting the line is all that is left
	}
	return nil
}

// begin finds where to go on from and opens the answer.
func (s *stream) begin(c *call) error {
	if err := s.resume(c); err != nil {
		return err
	}
	h := s.w.Header()
	h.Set("Content-Type", "text/event-stream")
	h.Set("X-Accel-Buffering", "no")
	// The server's own limits are for calls that end.
	if err := errors.Join(s.out.SetReadDeadline(time.Time{}), s.out.SetWriteDeadline(time.Time{})); err != nil && !errors.Is(err, http.ErrNotSupported) {
		return fmt.Errorf("begin stream: %w", err)
	}
	s.w.WriteHeader(http.StatusOK)
	return nil
}

func (s *stream) resume(c *call) error {
	text := c.Header.Get("Last-Event-ID")
	if text == "" {
		text = c.URL.Query().Get("last_event_id") // a page that reconnects by itself cannot set headers
	}
	size, err := s.b.Records.Size(c.Context())
	if err != nil {
		return err
	}
	s.last = size - 1
	if text == "" {
		return nil
	}
	last, err := strconv.ParseInt(text, 10, 64)
	if err != nil || last < -1 {
		return session.Refuse("bad-query", fmt.Sprintf("Last-Event-ID %q is no event's number.", text), "Send the id of the last event that arrived, or leave it out.")
	}
	s.last = min(last, s.last)
	return nil
}

// run sends until the client goes, is too slow, or the daemon stops.
func (s *stream) run(ctx context.Context) error {
	notices, stop := s.b.Desk.Listen()
	defer func() { stop() }()
	tick := time.NewTicker(stationEvery)
	defer tick.Stop()
	err := errors.Join(s.message("retry: 1000\n\n"), s.stations(), s.catchUp(ctx))
	for err == nil {
		select {
		case <-ctx.Done():
			return nil
		case <-s.b.closing:
			return nil
		case n, more := <-notices:
			if !more {
				// Behind, or the desk has stopped: then this one is closed at once.
				stop()
				if notices, stop = s.b.Desk.Listen(); !alive(notices) {
					return nil
				}
			}
			err = errors.Join(s.trouble(n), s.catchUp(ctx))
		case <-tick.C:
			err = s.stations()
		}
	}
	return err
}

// alive says whether a listener's channel is open.
func alive(notices <-chan desk.Notice) bool {
	select {
	case _, more := <-notices:
		return more
	default:
		return true
	}
}

// catchUp sends every event after the last one sent, and then where their runs stand.
func (s *stream) catchUp(ctx context.Context) error {
	touched := map[string]bool{}
	for {
		lines, err := s.b.Records.Events(ctx, Query{After: s.last, Limit: streamBatch})
		if err != nil {
			return err
		}
		for _, l := range lines {
			if err := s.send("event", strconv.FormatInt(l.Seq, 10), l.Line); err != nil {
				return err
			}
			s.last = l.Seq
			if e, err := session.DecodeEvent(l.Line); err == nil {
				touched[e.Subject] = true
			}
		}
		if len(lines) < streamBatch {
			return s.runs(ctx, touched)
		}
	}
}

// runs sends the news of those subjects that are runs at work.
func (s *stream) runs(ctx context.Context, touched map[string]bool) error {
	var news []runNews
	err := s.b.view(ctx, func(book *session.Book) error {
		for id := range touched {
			if r := book.Runs[id]; r != nil {
				news = append(news, newsOf(r))
			}
		}
		return nil
	})
	for _, n := range news {
		err = errors.Join(err, s.sendJSON("run", n))
	}
	return err
}

func newsOf(r *session.Run) runNews {
	n := runNews{ID: r.ID, State: r.State, Prompt: r.Prompt(), Awaits: r.Awaits(), Event: r.Last}
	for _, a := range n.Awaits {
		if a.Fact == "answer" {
			n.Doubt = r.DoubtAbout(r.Delivery(a.Delivery))
		}
	}
	return n
}

func (s *stream) trouble(n desk.Notice) error {
	if n.Trouble == nil {
		return nil
	}
	p := describe(n.Trouble)
	return s.sendJSON("trouble", map[string]string{"code": p.Code, "detail": p.Detail, "hint": p.Hint})
}

// stations sends the state of each station that changed, and of each from time to time.
func (s *stream) stations() error {
	now := time.Now()
	for _, st := range s.b.Stations.List() {
		full, err := json.Marshal(st)
		if err != nil {
			return fmt.Errorf("encode station: %w", err)
		}
		if st.Live != nil {
			still := *st.Live
			still.AgeMS = 0
			st.Live = &still
		}
		ageless, err := json.Marshal(st)
		if err != nil {
			return fmt.Errorf("encode station: %w", err)
		}
		if bytes.Equal(ageless, s.shown[st.Name]) && now.Sub(s.shownAt[st.Name]) < stationBeat {
			continue
		}
		s.shown[st.Name], s.shownAt[st.Name] = ageless, now
		if err := s.send("station", "", full); err != nil {
			return err
		}
	}
	return nil
}

func (s *stream) sendJSON(name string, v any) error {
	data, err := json.Marshal(v)
	if err != nil {
		return fmt.Errorf("encode %s: %w", name, err)
	}
	return s.send(name, "", data)
}

// send writes one event. data is one line.
func (s *stream) send(name, id string, data []byte) error {
	text := "event: " + name + "\n"
	if id != "" {
		text += "id: " + id + "\n"
	}
	return s.message(text + "data: " + string(data) + "\n\n")
}

func (s *stream) message(text string) error {
	if err := s.out.SetWriteDeadline(time.Now().Add(slowAfter)); err != nil && !errors.Is(err, http.ErrNotSupported) {
		return err
	}
	if _, err := s.w.Write([]byte(text)); err != nil {
		return fmt.Errorf("stream: %w", err)
	}
	return s.out.Flush()
}
