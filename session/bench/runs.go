package bench

import (
	"fmt"
	"maps"
	"net/http"
	"slices"

	"tenthmark/calc/decimal"
	"tenthmark/session"
	"tenthmark/session/desk"
)

// runAnswer is a run as it stands, what the call recorded, and which documents were
// published.
type runAnswer struct {
	session.Document
	Recorded  []session.Event `json:"recorded,omitempty"`
	Documents []string        `json:"documents,omitempty"`
}

// openRequest is the body of the call that opens a run.
type openRequest struct {
	Burette    string               `json:"burette"`
	Station    string               `json:"station"`
	Plan       session.Plan         `json:"plan"`
	Ambient    *session.AmbientBody `json:"ambient"`
	Condition  string               `json:"condition"`
	Supersedes string               `json:"supersedes"`
}

func (b *Bench) openRun(c *call) error {
	q, err := read[openRequest](c, maxBody)
	if err != nil {
		return err
	}
	station, err := b.station(q.Station)
	if err != nil {
		return err
	}
	request := session.Request{Burette: q.Burette, Station: q.Station, Plan: q.Plan, Supersedes: q.Supersedes, Condition: q.Condition, Ambient: q.Ambient}
	events, err := b.do(c, func(book *session.Book) ([]session.Draft, error) {
		drafts, err := book.OpenRun(request, b.Setting(q.Station), station.Identity, b.local())
		if err == nil {
			err = station.mustBeOnline()
		}
		return drafts, err
	})
	if err != nil {
		return err
	}
	id := events[len(events)-1].Subject
	c.w.Header().Set("Location", api+"/runs/"+id)
	return b.replyRun(c, http.StatusCreated, id, events)
}

// replyRun answers with the run as it stands now.
func (b *Bench) replyRun(c *call, status int, id string, recorded []session.Event) error {
	answer := runAnswer{Recorded: recorded}
	err := b.Desk.ViewRun(c.Context(), id, func(r *session.Run) error {
		answer.Document = r.Document()
		if r.Publishing != nil {
			answer.Documents = slices.Sorted(maps.Keys(r.Publishing.Files))
		}
		return nil
	})
	if err != nil {
		return err
	}
	return c.reply(status, answer)
}

func (b *Bench) run(c *call) error { return b.replyRun(c, http.StatusOK, c.PathValue("run"), nil) }

// order carries out a decision on the run that the path names and answers with it.
func (b *Bench) order(c *call, decide desk.RunDecision, then ...desk.RunDecision) error {
	id := c.PathValue("run")
	events, err := b.Desk.DoRun(c.Context(), c.who.actor(), id, decide, then...)
	if err != nil {
		return err
	}
	return b.replyRun(c, http.StatusOK, id, events)
}

// factsRequest is what was entered at the bench. Delivery and Role, if given, say what
// the person had before their eyes: when the plan has moved on meanwhile, nothing is
// recorded, so that an entry sent twice cannot land in the next step.
type factsRequest struct {
	Reading    decimal.Number       `json:"reading"`
	WaterTempC decimal.Number       `json:"water_temp_C"`
	Ambient    *session.AmbientBody `json:"ambient"`
	Delivery   int                  `json:"delivery"`
	Role       session.Role         `json:"role"`
}

func (b *Bench) enterFacts(c *call) error {
	q, err := read[factsRequest](c, maxBody)
	if err != nil {
		return err
	}
	return b.order(c, func(r *session.Run) ([]session.Draft, error) {
		drafts, err := r.Enter(session.Facts{ReadingML: q.Reading, WaterTempC: q.WaterTempC, Ambient: q.Ambient})
		if err == nil {
			err = q.meant(drafts)
		}
		return drafts, err
	})
}

// meant: the entry goes where the person meant it to go.
func (q factsRequest) meant(drafts []session.Draft) error {
	for _, d := range drafts {
		delivery, role := q.Delivery, q.Role
		switch body := d.Body.(type) {
		case session.ReadingBody:
			delivery, role = body.Delivery, body.Role
		case session.WaterTempBody:
			delivery = body.Delivery
		}
		if q.Delivery != 0 && delivery != q.Delivery || q.Role != "" && role != q.Role {
			return session.Refuse("not-awaited", fmt.Sprintf("The entry was meant for delivery %d, which does not wait for it any more.", q.Delivery), "Look at the run again: it may have been entered already.")
		}
	}
	return nil
}

type takeRequest struct {
	Seen   int64        `json:"seen"`
	Role   session.Role `json:"role"`
	Reason string       `json:"reason"`
}

func (b *Bench) takeWeight(c *call) error {
	q, err := read[takeRequest](c, maxBody)
	if err != nil {
		return err
	}
	return b.order(c, func(r *session.Run) ([]session.Draft, error) { return r.Take(q.Seen, q.Role, q.Reason) })
}

type amendRequest struct {
	Fact   int64          `json:"fact"`
	Field  string         `json:"field"`
	Value  decimal.Number `json:"value"`
	Reason string         `json:"reason"`
}

func (b *Bench) amendFact(c *call) error {
	q, err := read[amendRequest](c, maxBody)
	if err != nil {
		return err
	}
	amend := func(r *session.Run) ([]session.Draft, error) { return r.Amend(q.Fact, q.Field, q.Value, q.Reason) }
	return b.order(c, amend, func(r *session.Run) ([]session.Draft, error) { return r.TakeAfterAmend(), nil })
}

type deliveryRequest struct {
	Delivery int    `json:"delivery"`
	Reason   string `json:"reason"`
}

func (b *Bench) voidDelivery(c *call) error {
	q, err := read[deliveryRequest](c, maxBody)
	if err != nil {
		return err
	}
	return b.order(c, func(r *session.Run) ([]session.Draft, error) { return r.Void(q.Delivery, q.Reason) })
}

func (b *Bench) answerDoubt(c *call) error {
	q, err := read[deliveryRequest](c, maxBody)
	if err != nil {
		return err
	}
	return b.order(c, func(r *session.Run) ([]session.Draft, error) { return r.Answer(q.Delivery, q.Reason) })
}

type reasonRequest struct {
	Reason string `json:"reason"`
}

// step gives the handler of a step in the run's life. A run that comes back needs its
// station free.
func step(kind session.Kind) func(*Bench, *call) error {
	return func(b *Bench, c *call) error {
		q, err := read[reasonRequest](c, maxBody)
		if err != nil {
			return err
		}
		id := c.PathValue("run")
		events, err := b.do(c, func(book *session.Book) ([]session.Draft, error) {
			r, err := book.Run(id)
			if err != nil {
				return nil, err
			}
			drafts, err := r.Step(kind, q.Reason)
			if err != nil {
				return nil, err
			}
			return drafts, stationFree(book, r, kind)
		})
		if err != nil {
			return err
		}
		return b.replyRun(c, http.StatusOK, id, events)
	}
}

func stationFree(book *session.Book, r *session.Run, kind session.Kind) error {
	if kind != session.RunResumed && kind != session.RunReopened {
		return nil
	}
	if busy := book.OpenRunAt(r.Opening.Station); busy != nil {
		return session.Refuse("station-busy", fmt.Sprintf("Run %s is open on station %s.", busy.ID, busy.Opening.Station), "Finish, suspend or abandon it first.")
	}
	return nil
}

// runs lists the runs, newest first.
func (b *Bench) runs(c *call) error {
	limit, err := c.number("limit", 50, 1, 1000)
	if err != nil {
		return err
	}
	q := c.URL.Query()
	list := []session.Summary{}
	more := false
	err = b.view(c.Context(), func(book *session.Book) error {
		from := len(book.Order)
		if after := q.Get("after"); after != "" {
			if from = slices.Index(book.Order, after); from < 0 {
				return session.Refuse("bad-query", fmt.Sprintf("There is no run %q to go on after.", after), "Take the name of the last run of the page before.")
			}
		}
		for i := from - 1; i >= 0; i-- {
			s := book.Summaries[book.Order[i]]
			if !chosen(q.Get("burette"), s.Burette) || !chosen(q.Get("state"), string(s.State)) || !chosen(q.Get("station"), s.Station) {
				continue
			}
			if more = int64(len(list)) == limit; more {
				return nil
			}
			list = append(list, *s)
		}
		return nil
	})
	if err != nil {
		return err
	}
	return c.reply(http.StatusOK, map[string]any{"runs": list, "more": more})
}

func chosen(want, is string) bool { return want == "" || want == is }
