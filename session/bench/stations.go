package bench

import (
	"context"
	"fmt"
	"net/http"

	"tenthmark/session"
)

// health says whether the daemon can do its work: it answers 503 when the ledger does
// not take events.
func (b *Bench) health(c *call) error {
	type stationState struct {
		Name  string `json:"name"`
		State string `json:"state"`
	}
	answer := struct {
		Status  string           `json:"status"` // ok or trouble
		Trouble string           `json:"trouble,omitempty"`
		Version string           `json:"version"`
		SignIn  bool             `json:"sign_in"`
		Ledger  map[string]int64 `json:"ledger"`
		States  []stationState   `json:"stations"`
	}{Status: "ok", Version: b.Version, SignIn: b.SignIn, States: []stationState{}}
	for _, s := range b.Stations.List() {
		answer.States = append(answer.States, stationState{s.Name, s.State})
	}
	size, err := b.Records.Size(c.Context())
	if err == nil {
		err = b.Desk.Trouble(c.Context())
	}
	answer.Ledger = map[string]int64{"size": size}
	if err == nil {
		return c.reply(http.StatusOK, answer)
	}
	answer.Status, answer.Trouble = "trouble", describe(err).Detail
	return c.reply(http.StatusServiceUnavailable, answer)
}

func (b *Bench) stations(c *call) error {
	list := b.Stations.List()
	if list == nil {
		list = []Station{}
	}
	return c.reply(http.StatusOK, map[string]any{"stations": list})
}

// station gives a station by its name, or says that there is none.
func (b *Bench) station(name string) (Station, error) {
	for _, s := range b.Stations.List() {
		if s.Name == name {
			return s, nil
		}
	}
	return Station{}, session.Refuse("unknown-station", fmt.Sprintf("There is no station %q.", name), "Use one of the configured stations; GET /api/v1/stations lists them.")
}

func (s Station) mustBeOnline() error {
	if s.State == Online {
		return nil
	}
	reason, hint := s.Reason, s.Hint
	if reason == "" {
		reason = "its balance cannot be reached"
	}
	if hint == "" {
		hint = "Check that the balance is switched on and its cable plugged in."
	}
	return session.Refuse("station-offline", fmt.Sprintf("Station %s is offline: %s", s.Name, reason), hint)
}

// tare tells a balance to tare and records that somebody asked for it.
func (b *Bench) tare(c *call) error {
	s, err := b.station(c.PathValue("station"))
	if err != nil {
		return err
	}
	tarer, can := b.Stations.(Tarer)
	if !can {
		return session.Refuse("cannot-tare", "The balance cannot be tared from here.", "Press its tare key.")
	}
	if err := s.mustBeOnline(); err != nil {
		return err
	}
	if err := tarer.Tare(c.Context(), s.Name); err != nil {
		return err
	}
	// The balance has been told: whoever asked may go, the record is made.
	events, err := b.Desk.Do(context.WithoutCancel(c.Context()), c.who.actor(), func(*session.Book) ([]session.Draft, error) {
		return []session.Draft{{Kind: session.StationTared, Subject: s.Name, Body: struct{}{}}}, nil
	})
	if err != nil {
		return err
	}
	return c.reply(http.StatusOK, map[string]any{"recorded": events})
}
