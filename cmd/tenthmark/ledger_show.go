package main

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"strings"
	"time"
	"unicode"

	"tenthmark/session"
	"tenthmark/session/ledger"
)

func runLedgerShow(ctx context.Context, args []string, out, complaints io.Writer) int {
	f := newLedgerFlags("show", "Lists events: number, time with the bench's zone, who, what, about what, content.", complaints)
	run := f.String("run", "", "only events of this `run` (or burette, operator, station)")
	actor := f.String("actor", "", "only what this `actor` did, such as operator:anna, station:bench-1, daemon")
	kind := f.String("kind", "", "only this `kind` of event, such as reading or amended")
	after := f.Int64("after", -1, "only events with a greater `number`")
	limit := f.Int("limit", 0, "at most so many; 0 for all")
	asJSON := f.Bool("json", false, "print the events' exact lines")
	if code, done := parse(f.FlagSet, args); done {
		return code
	}
	if err := only(f.FlagSet); err != nil {
		return misuse(complaints, err)
	}
	events, done, err := f.events(ctx)
	if err != nil {
		return complain(complaints, err)
	}
	w := bufio.NewWriter(out)
	err = eachEvent(ctx, events, ledger.Filter{After: *after, Subject: *run, Kind: *kind, Actor: *actor, Limit: *limit}, func(e ledger.Entry) error {
		return showEvent(w, e, *asJSON)
	})
	if err := errors.Join(err, w.Flush(), done()); err != nil {
		return complain(complaints, err)
	}
	return exitDone
}

// eventSource gives one page of events.
type eventSource func(context.Context, ledger.Filter) ([]ledger.Entry, error)

// events gives the source that the flags name, and what to call at the end.
func (f ledgerFlags) events(ctx context.Context) (eventSource, func() error, error) {
	if daemon := f.remote(); daemon != nil {
		return daemonEvents(daemon), func() error { return nil }, nil
	}
	r, err := f.reader(ctx)
	if err != nil {
		return nil, nil, err
	}
	return r.Events, r.Close, nil
}

// pageEvents is how many events are asked for at a time.
const pageEvents = 1000

// eachEvent walks through all pages; filter.Limit 0 means all.
func eachEvent(ctx context.Context, events eventSource, filter ledger.Filter, do func(ledger.Entry) error) error {
	left := filter.Limit
	for {
		filter.Limit = pageEvents
		if left > 0 {
			filter.Limit = min(left, pageEvents)
		}
		page, err := events(ctx, filter)
		if err != nil {
			return err
		}
		for _, e := range page {
			if err := do(e); err != nil {
				return err
			}
			filter.After = e.Seq
		}
		left -= len(page)
		if len(page) < filter.Limit || left == 0 {
			return nil
		}
	}
}

// showEvent prints one event on one line.
func showEvent(w io.Writer, e ledger.Entry, exact bool) error {
	if exact {
		_, err := fmt.Fprintf(w, "%s\n", e.Body)
		return err
	}
	h, err := ledger.ParseHeader(e.Body)
	if err != nil {
		return fmt.Errorf("event %d: %w", e.Seq, err)
	}
	content, err := ledger.Fill(e.Body)
	if err != nil {
		return fmt.Errorf("event %d: %w", e.Seq, err)
	}
	_, err = fmt.Fprintf(w, "%7d  %s  %-18s %-18s %-20s %s\n", h.Seq, localTime(h), printable(h.Actor), printable(h.Kind), printable(h.Subject), printable(string(content)))
	return err
}

// printable keeps what could steer a terminal out of it.
func printable(text string) string {
	return strings.Map(func(r rune) rune {
		if !unicode.IsPrint(r) {
			return '\uFFFD'
		}
		return r
	}, text)
}

// localTime shows the time as the bench's clock on the wall did, with its offset.
func localTime(h ledger.Header) string {
	at, err := time.Parse(session.TimeForm, h.At)
	if err != nil {
		return h.At
	}
	zone := time.FixedZone("", int(h.OffsetMin)*60)
	return at.In(zone).Format("2006-01-02 15:04:05.000 -07:00")
}
