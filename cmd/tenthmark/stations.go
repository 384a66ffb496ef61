package main

import (
	"context"
	"fmt"
	"sync"
	"time"

	"github.com/rs/zerolog"

	"tenthmark/acquire"
	"tenthmark/session"
	"tenthmark/session/bench"
	"tenthmark/session/desk"
)

// stations are the balances of the house and the way of what they find out to the desk.
type stations struct {
	desk *desk.Desk
	log  zerolog.Logger
	logs map[string][]*acquire.Logger // of each station; a logger belongs to its station's goroutine
	all  []*acquire.Station
	news chan news // what stations tell that nobody waits for

	mu   sync.Mutex                     // over last alone
	last map[string]*bench.LastWeighing // the latest weight of each station that was recorded
}

// news is an event of a station that may be recorded a moment later.
type news struct {
	station string
	draft   session.Draft
}

// waitingNews is how much stations may tell while the ledger is slow. A station that
// floods loses news, never weights.
const waitingNews = 256

func newStations(c *config, d *desk.Desk, log zerolog.Logger) (*stations, error) {
	s := &stations{desk: d, log: log, news: make(chan news, waitingNews), last: map[string]*bench.LastWeighing{}}
	var err error
	if s.logs, err = loggers(c.Logs); err != nil {
		return nil, err
	}
	for _, cfg := range c.Stations {
		one, err := acquire.NewStation(cfg, acquire.Options{Sink: &sink{s}, Log: log})
		if err != nil {
			return nil, err
		}
		s.all = append(s.all, one)
	}
	return s, nil
}

// Run runs every station until ctx is cancelled. A station that ends leaves the
// others alone.
func (s *stations) Run(ctx context.Context) error {
	var running sync.WaitGroup
	for _, one := range s.all {
		running.Go(func() {
			if err := one.Run(ctx); err != nil && ctx.Err() == nil {
				s.log.Error().Err(err).Str("station", one.Name()).Msg("station stopped")
			}
		})
	}
	running.Go(func() { s.write(ctx) })
	running.Wait()
	return ctx.Err()
}

// write records the stations' news.
func (s *stations) write(ctx context.Context) {
	for {
		select {
		case n := <-s.news:
			s.record(ctx, n.station, n.draft)
		case <-ctx.Done():
			return
		}
	}
}

func (s *stations) record(ctx context.Context, station string, draft session.Draft) {
	_, err := s.desk.Do(ctx, session.Station(station), func(*session.Book) ([]session.Draft, error) {
		return []session.Draft{draft}, nil
	})
	if err != nil && ctx.Err() == nil {
		s.log.Error().Err(err).Str("station", station).Str("kind", string(draft.Kind)).Msg("station's news not recorded")
	}
}

// station gives a station by its name, nil when there is none.
func (s *stations) station(name string) *acquire.Station {
	for _, one := range s.all {
		if one.Name() == name {
			return one
		}
	}
	return nil
}

// List gives the stations as they are now.
func (s *stations) List() []bench.Station {
	s.mu.Lock()
	defer s.mu.Unlock()
	list := make([]bench.Station, len(s.all))
	for i, one := range s.all {
		list[i] = stationNow(one.Snapshot(), time.Now())
		list[i].LastWeighing = s.last[one.Name()]
	}
	return list
}

func stationNow(snap acquire.Snapshot, now time.Time) bench.Station {
	out := bench.Station{Name: snap.Name, State: string(snap.State), Identity: snap.Identity}
	if snap.Reason != nil {
		out.Reason, out.Hint = snap.Reason.Message, snap.Reason.Hint
	} else if snap.Diagnosis != nil {
		out.Reason, out.Hint = snap.Diagnosis.Message, snap.Diagnosis.Hint
	}
	if l := snap.Live; l != nil {
		out.Live = &bench.Live{Text: l.Text, Unit: l.Unit, Stable: l.Stable, AgeMS: now.Sub(l.At).Milliseconds(), Progress: l.Progress, Status: l.Status}
	}
	return out
}

// Tare presses the tare key of a balance.
func (s *stations) Tare(ctx context.Context, name string) error {
	one := s.station(name)
	if one == nil {
		return session.Refuse("unknown-station", fmt.Sprintf("There is no station %q.", name), "Use one of the configuration's stations.")
	}
	return one.Tare(ctx)
}

// sink hands what a station finds out to the desk.
type sink struct{ to *stations }

// Weight records a settled weight: for the run that is open at the station, or as
// seen by the station itself. When the ledger does not take it, it is not taken.
func (k *sink) Weight(ctx context.Context, w acquire.Settled) {
	weight := w.Weight()
	weight.Came = session.At(w.Came)
	events, err := k.to.desk.Do(ctx, session.Station(w.Station), func(b *session.Book) ([]session.Draft, error) {
		if run := b.OpenRunAt(w.Station); run != nil {
			return run.SeeWeight(weight), nil
		}
		return []session.Draft{{Kind: session.WeightSeen, Subject: w.Station, Body: session.SeenBody{Weight: weight, Why: "no run is open at this station"}}}, nil
	})
	if err != nil {
		k.to.log.Error().Err(err).Str("station", w.Station).Str("mass_g", weight.MassG.String()).Msg("weight not taken: it could not be recorded")
		return
	}
	k.logSettled(ctx, w)
	k.to.mu.Lock()
	defer k.to.mu.Unlock()
	last := events[len(events)-1]
	k.to.last[w.Station] = &bench.LastWeighing{MassG: weight.MassG.String(), At: last.At}
}

// Live is fetched from the station by whoever shows it; here only the logs look at it.
func (k *sink) Live(station string, live acquire.Live) { k.logLive(station, live) }

// Online records that the line is open, and who the balance is.
func (k *sink) Online(station string, id session.Identity) {
	k.tell(station, session.StationOnline, id)
}

// faultBody is the body of StationOffline and LineDiagnosed events.
type faultBody struct {
	Code    string `json:"code"`
	Message string `json:"message"`
	Hint    string `json:"hint"`
	Cause   string `json:"cause,omitempty"`
}

// Offline records an outage.
func (k *sink) Offline(station string, reason *session.Fault) {
	b := faultBody{Code: reason.Code, Message: reason.Message, Hint: reason.Hint}
	if reason.Err != nil {
		b.Cause = fmt.Sprint(reason.Err)
	}
	k.tell(station, session.StationOffline, b)
}

// Diagnosis records what the operator should know of the line.
func (k *sink) Diagnosis(station string, d acquire.Diagnosis) {
	k.tell(station, session.LineDiagnosed, faultBody{Code: d.Code, Message: d.Message, Hint: d.Hint})
}

func (k *sink) tell(station string, kind session.Kind, body any) {
	select {
	case k.to.news <- news{station, session.Draft{Kind: kind, Subject: station, Body: body}}:
	default:
		k.to.log.Warn().Str("station", station).Str("kind", string(kind)).Msg("news of a station dropped: too many")
	}
}
