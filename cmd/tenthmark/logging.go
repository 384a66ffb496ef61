package main

import (
	"context"

	"tenthmark/acquire"
	"tenthmark/session"
)

// loggers gives the loggers of each station. A logger is shown everything in its
// station's one goroutine.
func loggers(configs []acquire.LogConfig) (map[string][]*acquire.Logger, error) {
	all := map[string][]*acquire.Logger{}
	for _, c := range configs {
		l, err := acquire.NewLogger(c)
		if err != nil {
			return nil, err
		}
		all[c.Station] = append(all[c.Station], l)
	}
	return all, nil
}

// logLive records what the logs at an interval take of a line.
func (k *sink) logLive(station string, live acquire.Live) {
	for _, l := range k.to.logs[station] {
		if entry, due := l.Live(station, live); due {
			k.tell(station, session.LogSample, sampleBody(entry))
		}
	}
}

// logSettled records what the logs of settled weights take. It waits for the ledger,
// as weights do.
func (k *sink) logSettled(ctx context.Context, w acquire.Settled) {
	for _, l := range k.to.logs[w.Station] {
		if entry, due := l.Settled(w); due {
			k.to.record(ctx, w.Station, session.Draft{Kind: session.LogSample, Subject: w.Station, Body: sampleBody(entry)})
		}
	}
}

func sampleBody(e acquire.LogEntry) session.LogSampleBody {
	b := session.LogSampleBody{Label: e.Label, MassG: e.MassG, Stable: e.Stable, Raw: e.Raw, Missing: e.Missing, DeviationG: e.DeviationG, Came: session.At(e.At)}
	if e.Verdict != "" {
		within := e.Verdict == acquire.Passed
		b.Within, b.NominalG = &within, e.MassG.Sub(e.DeviationG)
	}
	return b
}
