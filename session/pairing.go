package session

import (
	"fmt"

	"tenthmark/calc/decimal"
)

// This file decides what a fact belongs to. A settled weight comes without a name:
// whether it is the one that the plan waits for, and which, follows from the mass
// alone. A weight that fits nothing is recorded as seen and not taken.

// place is where a fact belongs.
type place struct {
	delivery *Delivery
	role     Role
}

// placeWeight finds the awaited step that a settled weight belongs to. When there
// is none, why says so in the operator's words.
func (r *Run) placeWeight(massG decimal.Number) (p place, why string) {
	if r.State != Open {
		return place{}, fmt.Sprintf("the run is %s", r.State)
	}
	d := r.current()
	if d == nil {
		return place{}, "all deliveries of the plan are done"
	}
	if doubt := r.DoubtAbout(d); doubt != nil {
		return place{}, fmt.Sprintf("delivery %d waits for an answer first", d.Number)
	}
	for _, p := range r.openWeighings(d) {
		if r.window(p).holds(massG.Float()) {
			return p, ""
		}
	}
	return place{}, r.whyNot(massG, d)
}

// openWeighings lists the weighings that may come now, the wanted one first. A
// tared vessel may be tared again as long as nothing was delivered into it. The
// vessel may be prepared for the next delivery while a reading or a temperature of
// this one is still to be entered.
func (r *Run) openWeighings(d *Delivery) []place {
	switch {
	case r.BeforeOf(d) == nil:
		return []place{{d, Before}}
	case d.After == nil && r.Opening.Plan.WeighingPattern == Tared:
		return []place{{d, After}, {d, Before}}
	case d.After == nil:
		return []place{{d, After}}
	}
	if next := r.firstUndone(d.Number); next != nil && r.BeforeOf(next) == nil {
		return []place{{next, Before}}
	}
	return nil
}

// whyNot explains in one clause why a weight fits no awaited step.
func (r *Run) whyNot(massG decimal.Number, d *Delivery) string {
	open := r.openWeighings(d)
	if len(open) == 0 {
		return fmt.Sprintf("delivery %d has both its weights and waits for what is to be entered", d.Number)
	}
	p := open[0]
	w := r.window(p)
	why := fmt.Sprintf("delivery %d waits for a weight %s it, %.1f to %.1f g", p.delivery.Number, p.role, w.lowG, w.highG)
	before := r.BeforeOf(p.delivery)
	if p.role != After || p.delivery.End == nil || before == nil {
		return why
	}
	start := r.StartOf(p.delivery)
	if implied := start.ReadingML.Float() + (massG.Float()-before.MassG.Float())/waterGPerML; implied > start.ReadingML.Float() && implied <= r.Opening.Burette.CapacityML.Float() {
		why += fmt.Sprintf("; this one would fit a reading near %.1f mL instead of %s mL", implied, p.delivery.End.ReadingML)
	}
	return why
}

// placeReading finds the reading that a value entered now belongs to.
func (r *Run) placeReading() (place, error) {
	d, err := r.openDelivery("reading")
	if err != nil {
		return place{}, err
	}
	switch {
	case r.StartOf(d) == nil && !r.sharesStart(d):
		return place{d, Start}, nil
	case d.End == nil:
		return place{d, End}, nil
	}
	next := r.firstUndone(d.Number)
	if next != nil && next.Start == nil && !r.sharesStart(next) && r.BeforeOf(d) != nil {
		return place{next, Start}, nil
	}
	return place{}, Refuse("reading-present", fmt.Sprintf("Delivery %d has both its readings, %s and %s mL.", d.Number, r.StartOf(d).ReadingML, d.End.ReadingML),
		"To change one, amend it. Otherwise enter what is still missing: "+r.Prompt())
}

// placeWaterTemp finds the delivery that a water temperature entered now belongs to.
func (r *Run) placeWaterTemp() (*Delivery, error) {
	d, err := r.openDelivery("water temperature")
	if err != nil {
		return nil, err
	}
	if d.Water != nil {
		return nil, Refuse("water-temp-present", fmt.Sprintf("Delivery %d has its water temperature, %s °C.", d.Number, d.Water.WaterTempC),
			"To change it, amend it. Otherwise enter what is still missing: "+r.Prompt())
	}
	return d, nil
}

// openDelivery gives the delivery that takes entries now, or says why none does.
func (r *Run) openDelivery(what string) (*Delivery, error) {
	if err := r.mustBeOpen(); err != nil {
		return nil, err
	}
	d := r.current()
	if d == nil {
		return nil, Refuse("run-complete", fmt.Sprintf("Run %s has all its deliveries; there is none for this %s.", r.ID, what), "Amend a value, void a delivery, or finish the run.")
	}
	if doubt := r.DoubtAbout(d); doubt != nil {
		return nil, Refuse("answer-first", fmt.Sprintf("Delivery %d is in doubt: %s", d.Number, doubt.Text), doubt.Hint())
	}
	return d, nil
}

func (r *Run) mustBeOpen() error {
	switch r.State {
	case Open:
		return nil
	case Suspended:
		return Refuse("run-suspended", fmt.Sprintf("Run %s is suspended.", r.ID), "Resume it first.")
	}
	return Refuse("run-closed", fmt.Sprintf("Run %s is %s and takes no more entries.", r.ID, r.State), "Open a new run, or reopen this one if it is not reviewed yet.")
}
