package session

import "fmt"

// Awaited is one thing that may come next.
type Awaited struct {
	Fact      string    `json:"fact"` // weighing, reading, water_temp, ambient or answer
	Delivery  int       `json:"delivery,omitempty"`
	Role      Role      `json:"role,omitempty"`
	ExpectedG []float64 `json:"expected_g,omitempty"` // lightest and heaviest weight that is taken
}

// Awaits lists what may come next, in the order in which it is wanted. It is empty
// when the run waits for nothing but a signature, or takes nothing at all.
func (r *Run) Awaits() []Awaited {
	list := []Awaited{}
	if r.State != Open {
		return list
	}
	if len(r.Ambients) == 0 {
		list = append(list, Awaited{Fact: "ambient"})
	}
	d := r.current()
	if d == nil {
		return list
	}
	if r.DoubtAbout(d) != nil {
		return append(list, Awaited{Fact: "answer", Delivery: d.Number})
	}
	if r.StartOf(d) == nil {
		list = append(list, Awaited{Fact: "reading", Delivery: d.Number, Role: Start})
	}
	for _, p := range r.openWeighings(d) {
		w := r.window(p)
		list = append(list, Awaited{Fact: "weighing", Delivery: p.delivery.Number, Role: p.role, ExpectedG: []float64{w.lowG, w.highG}})
	}
	if d.End == nil {
		list = append(list, Awaited{Fact: "reading", Delivery: d.Number, Role: End})
	}
	if d.Water == nil {
		list = append(list, Awaited{Fact: "water_temp", Delivery: d.Number})
	}
	return list
}

// Prompt says in one sentence what the person at the bench does now.
func (r *Run) Prompt() string {
	switch r.State {
	case Suspended:
		return "The run is suspended: resume it to go on."
	case Finished:
		return "Signed as performed: another person reviews it now."
	case Reviewed:
		return "Reviewed: the run is being published."
	case Published:
		return "Published."
	case Abandoned:
		return "The run was abandoned."
	}
	d := r.current()
	switch {
	case d == nil:
		return "All deliveries are done: look through them and sign the run."
	case r.DoubtAbout(d) != nil:
		return r.DoubtAbout(d).Text
	}
	return r.nextStep(d)
}

// nextStep is the sentence for a delivery that lacks something.
func (r *Run) nextStep(d *Delivery) string {
	wait := ""
	if s := r.Opening.Burette.WaitS; s > 0 {
		wait = fmt.Sprintf(", wait %d s", s)
	}
	switch {
	case len(r.Ambients) == 0:
		return "Enter the air's temperature, pressure and humidity."
	case r.StartOf(d) == nil && d.FromML.Unscaled() == 0:
		return fmt.Sprintf("Fill the burette, let it down to the zero line%s, touch the drop off and enter the reading.", wait)
	case r.StartOf(d) == nil:
		return fmt.Sprintf("Let the burette down to about %s mL%s, touch the drop off and enter the reading.", d.FromML, wait)
	case r.BeforeOf(d) == nil && r.Opening.Plan.WeighingPattern == Tared:
		return "Put the empty vessel on the pan and tare."
	case r.BeforeOf(d) == nil:
		return "Put the empty vessel on the pan."
	case d.End == nil && d.After == nil:
		return fmt.Sprintf("Deliver to about %s mL%s, touch the drop off, enter the reading and put the vessel on the pan.", d.PointML, wait)
	case d.End == nil:
		return fmt.Sprintf("Enter the reading near %s mL.", d.PointML)
	case d.After == nil:
		return "Put the vessel with the water on the pan."
	}
	return "Enter the water's temperature."
}
