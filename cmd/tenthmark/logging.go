package main

import (
	"context"
	"fmt"
	"strings"
	"sync"
	"time"

	"tenthmark/acquire"
	"tenthmark/calc/decimal"
	"tenthmark/session"
)

// staleAfter is how old a shown value may be and still count as what the balance
// shows now.
const staleAfter = 3 * time.Second

// runLogs samples the stations that are logged at an interval, until ctx is cancelled.
// Those that are logged on every settling are served by the sink.
func (s *stations) runLogs(ctx context.Context) {
	var running sync.WaitGroup
	for _, l := range s.logs {
		if l.EveryS > 0 {
			running.Go(func() { s.sample(ctx, l) })
		}
	}
	running.Wait()
}

func (s *stations) sample(ctx context.Context, l logConfig) {
	tick := time.NewTicker(time.Duration(l.EveryS) * time.Second)
	defer tick.Stop()
	for {
		select {
		case <-tick.C:
		case <-ctx.Done():
			return
		}
		snap := s.station(l.Station).Snapshot()
		body := sampleOf(snap, time.Now())
		body.Label = l.Label
		s.record(ctx, l.Station, session.Draft{Kind: session.LogSample, Subject: l.Station, Body: body.CheckAgainst(l.NominalG, l.ToleranceG)})
	}
}

// sampleOf is what a station shows at a moment. A value that is old is none.
func sampleOf(snap acquire.Snapshot, now time.Time) session.LogSampleBody {
	live := snap.Live
	switch {
	case snap.State != acquire.Online:
		return session.LogSampleBody{Status: "offline"}
	case live == nil:
		return session.LogSampleBody{Status: "no value yet"}
	case now.Sub(live.At) > staleAfter:
		return session.LogSampleBody{Status: fmt.Sprintf("no value for %.0f s", now.Sub(live.At).Seconds())}
	}
	body := session.LogSampleBody{Text: live.Text, Unit: live.Unit, Stable: live.Stable, Status: live.Status}
	if mass, err := decimal.Parse(strings.TrimSpace(live.Text)); err == nil && (live.Unit == "g" || live.Unit == "") {
		body.MassG = mass
	}
	return body
}

// settled records a weight for the logs of its station that take every settling. A
// weight that is nowhere near the nominal mass is something else on the pan.
func (s *stations) settled(ctx context.Context, w acquire.Settled) {
	for _, l := range s.logs {
		if l.Station != w.Station || l.EveryS > 0 || !isMeant(l, w.MassG) {
			continue
		}
		body := session.LogSampleBody{Label: l.Label, Text: w.MassG.String(), Unit: "g", Stable: true, MassG: w.MassG}
		s.record(ctx, w.Station, session.Draft{Kind: session.LogSample, Subject: w.Station, Body: body.CheckAgainst(l.NominalG, l.ToleranceG)})
	}
}

// isMeant: within a hundredth of the nominal mass, or no nominal mass at all.
func isMeant(l logConfig, massG decimal.Number) bool {
	if !l.NominalG.IsSet() {
		return true
	}
	nominal := l.NominalG.Float()
	return massG.Float() > 0.99*nominal && massG.Float() < 1.01*nominal
}
