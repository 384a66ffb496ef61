package bench

import (
	"fmt"
	"net/http"
	"time"

	"tenthmark/calc"
	"tenthmark/session"
)

// entry is a burette in the register with what its runs say about it.
type entry struct {
	session.Entry
	MPEML     float64      `json:"mpe_mL,omitempty"`     // limit of its class; left out where no table has one
	LastRun   string       `json:"last_run,omitempty"`   // the run whose curve is in force
	LastOn    session.Time `json:"last_on"`              // when that was signed; null: never calibrated
	DueOn     session.Time `json:"due_on"`               // null: no interval agreed, or never calibrated
	Overdue   bool         `json:"overdue"`              //
	OpenRun   string       `json:"open_run,omitempty"`   // the newest run that is not closed yet
	OpenState string       `json:"open_state,omitempty"` //
}

func describeEntry(book *session.Book, e *session.Entry, now time.Time) entry {
	out := entry{Entry: *e}
	if mpe, err := calc.Limit(e.Standard, e.Class, e.CapacityML.Float(), e.SubdivisionML.Float()); err == nil {
		out.MPEML = mpe.LimitML
	}
	if s, err := book.CurveInForce(e.Name, now); err == nil {
		out.LastRun, out.LastOn = s.ID, s.FinishedAt
		if e.IntervalMonths > 0 {
			out.DueOn = session.At(s.FinishedAt.AddDate(0, e.IntervalMonths, 0))
			out.Overdue = now.After(out.DueOn.Time)
		}
	}
	for _, r := range book.Runs {
		if r.Opening.Burette.Name == e.Name && (r.State == session.Open || r.State == session.Suspended || r.State == session.Finished) && r.ID > out.OpenRun {
			out.OpenRun, out.OpenState = r.ID, string(r.State)
		}
	}
	return out
}

func (b *Bench) burettes(c *call) error {
	list := []entry{}
	err := b.view(c.Context(), func(book *session.Book) error {
		for _, e := range book.BuretteList() {
			list = append(list, describeEntry(book, e, b.Now()))
		}
		return nil
	})
	if err != nil {
		return err
	}
	return c.reply(http.StatusOK, map[string]any{"burettes": list})
}

func (b *Bench) burette(c *call) error {
	return b.replyBurette(c, http.StatusOK, c.PathValue("burette"))
}

func (b *Bench) replyBurette(c *call, status int, name string) error {
	var out entry
	err := b.view(c.Context(), func(book *session.Book) error {
		e := book.Burettes[name]
		if e == nil {
			return session.Refuse("unknown-burette", fmt.Sprintf("There is no burette %q in the register.", name), "Register it first, or check the name.")
		}
		out = describeEntry(book, e, b.Now())
		return nil
	})
	if err != nil {
		return err
	}
	return c.reply(status, out)
}

func (b *Bench) registerBurette(c *call) error {
	q, err := read[session.Burette](c, maxBody)
	if err != nil {
		return err
	}
	if _, err := b.do(c, func(book *session.Book) ([]session.Draft, error) { return book.Register(q) }); err != nil {
		return err
	}
	c.w.Header().Set("Location", api+"/burettes/"+q.Name)
	return b.replyBurette(c, http.StatusCreated, q.Name)
}

// changeRequest is the whole new entry and why.
type changeRequest struct {
	session.Burette
	Reason string `json:"reason"`
}

func (b *Bench) changeBurette(c *call) error {
	q, err := read[changeRequest](c, maxBody)
	if err != nil {
		return err
	}
	name := c.PathValue("burette")
	if q.Name != "" && q.Name != name {
		return session.Refuse("bad-burette", fmt.Sprintf("The entry names burette %s, the path burette %s.", q.Name, name), "A burette keeps its name for ever.")
	}
	q.Name = name
	if _, err := b.do(c, func(book *session.Book) ([]session.Draft, error) { return book.Change(q.Burette, q.Reason) }); err != nil {
		return err
	}
	return b.replyBurette(c, http.StatusOK, name)
}
