package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"

	"tenthmark/calc/decimal"
	"tenthmark/protocol"
	"tenthmark/session"
	"tenthmark/session/ledger"
)

// runRecompute builds a run again from the raw bytes in the ledger, through decoder,
// pairing and calculation.
func runRecompute(ctx context.Context, args []string, io stdio) int {
	f := newLedgerFlags("recompute", "Builds a run again from the raw bytes in the ledger and says whether it comes out the same.", io.err)
	f.Init("tenthmark recompute", 0)
	if code, done := parse(f.FlagSet, args); done {
		return code
	}
	if err := only(f.FlagSet, "RUN"); err != nil {
		return misuse(io.err, err)
	}
	id := f.Arg(0)
	events, closeEvents, err := f.events(ctx)
	if err != nil {
		return complain(io.err, err)
	}
	defer closeEvents()
	var lines [][]byte
	err = eachEvent(ctx, events, ledger.Filter{Subject: id, After: -1}, func(e ledger.Entry) error {
		lines = append(lines, e.Body)
		return nil
	})
	if err != nil {
		return complain(io.err, err)
	}
	if len(lines) == 0 {
		return complain(io.err, session.Refuse("unknown-run", fmt.Sprintf("The ledger has no run %q.", id), "Check the name: `tenthmark ledger show` lists the events."))
	}
	run, found, err := session.Recompute(lines, decodeRaw)
	if err != nil {
		return complain(io.err, err)
	}
	published, err := f.compareWithDrop(run)
	if err != nil {
		return complain(io.err, err)
	}
	return tellDifferences(io, id, append(found, published...), len(lines))
}

// decodeRaw reads the weight in a line's raw bytes.
func decodeRaw(raw session.Raw) (decimal.Number, error) {
	var mass decimal.Number
	d := protocol.NewDecoder(protocol.Options{})
	take := func(f *protocol.Frame) {
		if f.Kind == protocol.Weight {
			mass = f.MassG()
		}
	}
	d.Feed(raw, take)
	d.Gap(take)
	if !mass.IsSet() {
		return decimal.Number{}, fmt.Errorf("there is no weight in %q", raw)
	}
	return mass, nil
}

// compareWithDrop holds the recomputed numbers against the published run.json, if the
// configuration names a drop and the run lies in it.
func (f ledgerFlags) compareWithDrop(run *session.Run) ([]session.Difference, error) {
	c, err := f.config()
	if err != nil || c.Publish.Folder == "" || run.Publishing == nil {
		return nil, nil
	}
	text, err := os.ReadFile(filepath.Join(c.Publish.Folder, run.Publishing.Folder, "run.json"))
	if err != nil {
		return nil, fmt.Errorf("read the published run: %w", err)
	}
	var was session.Document
	if err := json.Unmarshal(text, &was); err != nil {
		return nil, fmt.Errorf("read the published run: %w", err)
	}
	now := run.Document()
	var found []session.Difference
	for _, part := range []struct {
		what     string
		was, now any
	}{{"deliveries", was.Deliveries, now.Deliveries}, {"curve", was.Curve, now.Curve}, {"conformity", was.Conformity, now.Conformity}} {
		a, errA := json.Marshal(part.was)
		b, errB := json.Marshal(part.now)
		if errA != nil || errB != nil || !bytes.Equal(a, b) {
			found = append(found, session.Difference{Event: run.Publishing.Event, What: "the published " + part.what, Recorded: string(a), Again: string(b)})
		}
	}
	return found, nil
}

func tellDifferences(io stdio, id string, found []session.Difference, events int) int {
	for _, d := range found {
		fmt.Fprintln(io.out, d)
	}
	if len(found) > 0 {
		fmt.Fprintf(io.out, "%s: %d difference(s) in %d events\n", id, len(found), events)
		return exitFailed
	}
	fmt.Fprintf(io.out, "%s: identical (%d events)\n", id, events)
	return exitDone
}
