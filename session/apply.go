package session

import (
	"fmt"
)

// apply changes the run by one event. Events come from the ledger and were decided
// by this package, so an event that does not fit is a damaged ledger, not a slip of
// the operator.
func (r *Run) apply(e Event, line []byte) error {
	if err := r.applyKind(e); err != nil {
		return fmt.Errorf("apply event %d %s to run %s: %w", e.Seq, e.Kind, e.Subject, err)
	}
	r.Last = e.Seq
	switch e.Kind {
	case RunPrepared, RunPublished, PublicationFailed: // what happens to the documents is not part of the record
	default:
		r.extendHash(line)
	}
	r.results = nil
	return nil
}

func (r *Run) applyKind(e Event) error {
	switch e.Kind {
	case WeightTaken:
		return r.applyWeighing(e)
	case WeightSeen:
		return with(e, func(b SeenBody) error {
			r.Seen = append(r.Seen, &Seen{Fact: e.Seq, SeenBody: b, At: e.At})
			return nil
		})
	case ReadingMade:
		return r.applyReading(e)
	case WaterTempMade:
		return with(e, func(b WaterTempBody) error {
			return r.onDelivery(b.Delivery, func(d *Delivery) {
				d.Water = &WaterTemp{Fact: e.Seq, WaterTempC: b.WaterTempC, At: e.At, By: e.Actor}
			})
		})
	case AmbientMade:
		return with(e, func(b AmbientBody) error {
			r.Ambients = append(r.Ambients, &Ambient{Fact: e.Seq, AmbientBody: b, At: e.At, By: e.Actor})
			return nil
		})
	case FactAmended:
		return r.applyAmended(e)
	case DeliveryVoid:
		return r.applyVoided(e)
	case DoubtAnswered:
		return with(e, func(b AnsweredBody) error {
			change := r.note(e, Change{Delivery: b.Delivery, Reason: b.Reason})
			return r.onDelivery(b.Delivery, func(d *Delivery) { d.Answered = &change })
		})
	}
	return r.applyLife(e)
}

// applyLife handles the steps of the run as a whole.
func (r *Run) applyLife(e Event) error {
	switch e.Kind {
	case RunSuspended:
		return r.applyStep(e, Suspended)
	case RunResumed:
		return r.applyStep(e, Open)
	case RunAbandoned:
		return r.applyStep(e, Abandoned)
	case RunReopened:
		r.Performed, r.Trail = nil, nil
		return r.applyStep(e, Open)
	case RunFinished:
		r.State, r.FinishedAt = Finished, e.At
		return r.applySigned(e, &r.Performed)
	case RunReviewed:
		if r.State == Finished {
			r.State = Reviewed
		}
		return r.applySigned(e, &r.Review)
	case TrailReviewed:
		return r.applySigned(e, &r.Trail)
	case RunPrepared:
		return with(e, func(b PublishedBody) error {
			r.Prepared = &Publication{Event: e.Seq, PublishedBody: b, At: e.At}
			return nil
		})
	case RunPublished:
		return with(e, func(b PublishedBody) error {
			r.State, r.Publishing = Published, &Publication{Event: e.Seq, PublishedBody: b, At: e.At}
			return nil
		})
	case RunSuperseded:
		return with(e, func(b SupersededBody) error {
			r.SupersededBy = b.By
			r.note(e, Change{Reason: b.Reason})
			return nil
		})
	case PublicationFailed:
		return nil // the run itself is unchanged; the outbox tries again
	}
	return fmt.Errorf("unknown kind of event")
}

// with reads the event's body and hands it on.
func with[T any](e Event, do func(T) error) error {
	b, err := body[T](e)
	if err != nil {
		return err
	}
	return do(b)
}

func (r *Run) onDelivery(number int, do func(*Delivery)) error {
	d := r.Delivery(number)
	if d == nil {
		return fmt.Errorf("there is no delivery %d", number)
	}
	do(d)
	return nil
}

// note adds a line to the run's list of changes.
func (r *Run) note(e Event, c Change) Change {
	c.Event, c.Kind, c.By, c.At = e.Seq, e.Kind, e.Actor.Name(), e.At
	r.Changes = append(r.Changes, c)
	return c
}

func (r *Run) applyStep(e Event, to State) error {
	return with(e, func(b ReasonBody) error {
		r.State = to
		r.note(e, Change{Reason: b.Reason})
		return nil
	})
}

func (r *Run) applySigned(e Event, where **Signature) error {
	return with(e, func(b SignedBody) error {
		*where = &Signature{Event: e.Seq, SignedBody: b, By: e.Actor, At: e.At}
		return nil
	})
}

func (r *Run) applyWeighing(e Event) error {
	return with(e, func(b WeighingBody) error {
		w := &Weighing{Fact: e.Seq, WeighingBody: b, At: e.At, By: e.Actor}
		if r.Identity == (Identity{}) {
			r.Identity = b.Identity
		}
		for _, s := range r.Seen {
			if b.Seen != 0 && s.Fact == b.Seen {
				s.Taken = e.Seq
			}
		}
		return r.onDelivery(b.Delivery, func(d *Delivery) {
			slot := &d.After
			if b.Role == Before {
				slot = &d.Before
			}
			if old := *slot; old != nil {
				w.Replaced = append(old.Replaced, old)
			}
			*slot = w
		})
	})
}

func (r *Run) applyReading(e Event) error {
	return with(e, func(b ReadingBody) error {
		reading := &Reading{Fact: e.Seq, ReadingML: b.ReadingML, At: e.At, By: e.Actor}
		return r.onDelivery(b.Delivery, func(d *Delivery) {
			if b.Role == Start {
				d.Start = reading
			} else {
				d.End = reading
			}
		})
	})
}

func (r *Run) applyAmended(e Event) error {
	return with(e, func(b AmendedBody) error {
		change := r.note(e, Change{Fact: b.Fact, Field: b.Field, Was: b.Was, Value: b.Value, Reason: b.Reason})
		target := r.fact(b.Fact)
		if target == nil {
			return fmt.Errorf("there is no fact %d", b.Fact)
		}
		return target.amend(change)
	})
}

func (r *Run) applyVoided(e Event) error {
	return with(e, func(b VoidedBody) error {
		change := r.note(e, Change{Delivery: b.Delivery, Reason: b.Reason})
		d := r.Delivery(b.Delivery)
		if d == nil || b.Replacement != len(r.Deliveries)+1 {
			return fmt.Errorf("voids delivery %d for %d of %d", b.Delivery, b.Replacement, len(r.Deliveries))
		}
		d.Void = &change
		r.Deliveries = append(r.Deliveries, &Delivery{
			Number: b.Replacement, Replicate: d.Replicate, FromML: d.FromML, PointML: d.PointML, Replaces: d.Number,
		})
		return nil
	})
}
