package session

import (
	"fmt"

	"tenthmark/calc/decimal"
)

// An order asks for something to happen in a run. The methods here decide: they
// give the events that carry it out, or a Fault that says why not, and change
// nothing themselves.

// Facts is what a person enters at the bench. Any part may be left out.
type Facts struct {
	ReadingML  decimal.Number
	WaterTempC decimal.Number
	Ambient    *AmbientBody
}

func (r *Run) draft(kind Kind, body any) Draft { return Draft{Kind: kind, Subject: r.ID, Body: body} }

// Enter decides on entered facts. All of them are recorded or none.
func (r *Run) Enter(f Facts) ([]Draft, error) {
	if err := r.mustBeOpen(); err != nil {
		return nil, err
	}
	var drafts []Draft
	if f.Ambient != nil {
		if err := checkAmbient(*f.Ambient); err != nil {
			return nil, err
		}
		drafts = append(drafts, r.draft(AmbientMade, *f.Ambient))
	}
	if f.ReadingML.IsSet() {
		p, err := r.placeReading()
		if err == nil {
			err = r.checkReadingAt(p, f.ReadingML)
		}
		if err != nil {
			return nil, err
		}
		drafts = append(drafts, r.draft(ReadingMade, ReadingBody{Delivery: p.delivery.Number, Role: p.role, ReadingML: f.ReadingML}))
	}
	if f.WaterTempC.IsSet() {
		d, err := r.placeWaterTemp()
		if err == nil {
			err = checkWaterTemp(f.WaterTempC)
		}
		if err != nil {
			return nil, err
		}
		drafts = append(drafts, r.draft(WaterTempMade, WaterTempBody{Delivery: d.Number, WaterTempC: f.WaterTempC}))
	}
	if len(drafts) == 0 {
		return nil, Refuse("nothing-entered", "There is nothing to record.", "Enter a reading, a water temperature or the ambient conditions.")
	}
	return drafts, nil
}

// SeeWeight decides on a settled weight: taken for the step it belongs to, or
// recorded as seen. It never fails: what settled on the pan is recorded either way.
func (r *Run) SeeWeight(w Weight) []Draft {
	if why := r.wrongBalance(w.Identity); why != "" {
		return []Draft{r.draft(WeightSeen, SeenBody{Weight: w, Why: why})}
	}
	p, why := r.placeWeight(w.MassG)
	if why != "" {
		return []Draft{r.draft(WeightSeen, SeenBody{Weight: w, Why: why})}
	}
	return []Draft{r.draft(WeightTaken, WeighingBody{Delivery: p.delivery.Number, Role: p.role, Weight: w})}
}

// wrongBalance: a run ends on the balance it began with.
func (r *Run) wrongBalance(now Identity) string {
	began := r.Opening.Identity
	if began == (Identity{}) {
		began = r.Identity
	}
	if began.Serial == "" || now.Serial == "" || began.Serial == now.Serial {
		return ""
	}
	return fmt.Sprintf("this is balance %s, the run began on balance %s", now.Serial, began.Serial)
}

// Take decides on taking a seen weight that the plan did not expect.
func (r *Run) Take(seen int64, role Role, reason string) ([]Draft, error) {
	reason, err := CheckReason(reason)
	if err != nil {
		return nil, err
	}
	s := r.seen(seen)
	if s == nil || s.Taken != 0 {
		return nil, Refuse("no-such-weight", fmt.Sprintf("There is no untaken weight %d in run %s.", seen, r.ID), "Take one of the seen weights that the run lists.")
	}
	d, err := r.openDelivery("weight")
	if err != nil {
		return nil, err
	}
	if why := r.wrongBalance(s.Identity); why != "" {
		return nil, Refuse("another-balance", "The weight cannot be taken: "+why+".", "Connect the balance the run began with, or abandon the run.")
	}
	if role == "" {
		role = r.wantedRole(d)
	}
	if err := r.checkTake(d, role, s.MassG); err != nil {
		return nil, err
	}
	return []Draft{r.draft(WeightTaken, WeighingBody{Delivery: d.Number, Role: role, Weight: s.Weight, Seen: seen, Reason: reason})}, nil
}

func (r *Run) seen(number int64) *Seen {
	for _, s := range r.Seen {
		if s.Fact == number {
			return s
		}
	}
	return nil
}

func (r *Run) wantedRole(d *Delivery) Role {
	if r.BeforeOf(d) == nil {
		return Before
	}
	return After
}

func (r *Run) checkTake(d *Delivery, role Role, massG decimal.Number) error {
	switch {
	case role != Before && role != After:
		return Refuse("bad-role", fmt.Sprintf("A weight is taken before or after a delivery, not %q.", role), "Use before or after.")
	case role == Before && d.After != nil, role == After && r.BeforeOf(d) == nil:
		return Refuse("bad-role", fmt.Sprintf("Delivery %d cannot take a weight %s it now.", d.Number, role), r.Prompt())
	case role == After && massG.Cmp(r.BeforeOf(d).MassG) <= 0:
		return Refuse("no-water", fmt.Sprintf("%s g is not more than the vessel before the delivery, %s g.", massG, r.BeforeOf(d).MassG), "Take another weight, or void the delivery.")
	}
	return nil
}

// Amend decides on a corrected value. The old one stays in the record. When the
// weight seen last fits now, it is taken along.
func (r *Run) Amend(fact int64, field string, value decimal.Number, reason string) ([]Draft, error) {
	reason, err := CheckReason(reason)
	if err == nil {
		err = r.mustBeOpen()
	}
	if err != nil {
		return nil, err
	}
	target := r.fact(fact)
	switch {
	case r.isWeight(fact):
		return nil, Refuse("weight-not-amendable", fmt.Sprintf("Fact %d is a weight from the balance and is not typed over.", fact), "Void the delivery and repeat it, or take another seen weight.")
	case target == nil:
		return nil, Refuse("no-such-fact", fmt.Sprintf("Run %s has no entered fact %d.", r.ID, fact), "Use the fact numbers that the run lists.")
	}
	was, err := target.value(field)
	if err != nil {
		return nil, Refuse("bad-field", fmt.Sprintf("Fact %d has no field %q.", fact, field), "For ambient conditions name air_temp_C, pressure_hPa or humidity_pct.")
	}
	if err := target.check(r, field, value); err != nil {
		return nil, err
	}
	return []Draft{r.draft(FactAmended, AmendedBody{Fact: fact, Field: field, Was: was, Value: value, Reason: reason})}, nil
}

// TakeAfterAmend decides, after an amendment was applied, whether the weight seen
// last fits the awaited step now. It gives no drafts when it does not.
func (r *Run) TakeAfterAmend() []Draft {
	if len(r.Seen) == 0 || r.State != Open {
		return nil
	}
	s := r.Seen[len(r.Seen)-1]
	d := r.current()
	if s.Taken != 0 || d == nil || d.After != nil || r.wrongBalance(s.Identity) != "" {
		return nil
	}
	if before := r.BeforeOf(d); before == nil || s.Fact < before.Fact {
		return nil
	}
	p, why := r.placeWeight(s.MassG)
	if why != "" || p.role != After {
		return nil
	}
	return []Draft{r.draft(WeightTaken, WeighingBody{
		Delivery: p.delivery.Number, Role: p.role, Weight: s.Weight, Seen: s.Fact, Reason: "fits after the amendment",
	})}
}

// Void decides on declaring a delivery bad. The plan grows a replacement.
func (r *Run) Void(delivery int, reason string) ([]Draft, error) {
	reason, err := CheckReason(reason)
	if err == nil {
		err = r.mustBeOpen()
	}
	if err != nil {
		return nil, err
	}
	d := r.Delivery(delivery)
	switch {
	case d == nil:
		return nil, Refuse("no-such-delivery", fmt.Sprintf("Run %s has no delivery %d.", r.ID, delivery), "Use the delivery numbers that the run lists.")
	case d.Void != nil:
		return nil, Refuse("already-void", fmt.Sprintf("Delivery %d is void already.", delivery), fmt.Sprintf("Delivery %d replaces it.", r.replacementOf(d)))
	case d.Before == nil && d.After == nil && d.Start == nil && d.End == nil && d.Water == nil:
		return nil, Refuse("nothing-to-void", fmt.Sprintf("Delivery %d has not begun.", delivery), "Only a delivery that has begun can be void.")
	}
	return []Draft{r.draft(DeliveryVoid, VoidedBody{Delivery: delivery, Replacement: len(r.Deliveries) + 1, Reason: reason})}, nil
}

func (r *Run) replacementOf(d *Delivery) int {
	for _, other := range r.Deliveries {
		if other.Replaces == d.Number {
			return other.Number
		}
	}
	return 0
}

// Answer decides on a doubt: the values stand.
func (r *Run) Answer(delivery int, reason string) ([]Draft, error) {
	reason, err := CheckReason(reason)
	if err == nil {
		err = r.mustBeOpen()
	}
	if err != nil {
		return nil, err
	}
	d := r.Delivery(delivery)
	if d == nil || r.DoubtAbout(d) == nil {
		return nil, Refuse("no-doubt", fmt.Sprintf("Nothing is asked about delivery %d.", delivery), r.Prompt())
	}
	return []Draft{r.draft(DoubtAnswered, AnsweredBody{Delivery: delivery, Doubt: r.DoubtAbout(d).Text, Reason: reason})}, nil
}
