package session

import (
	"fmt"
	"time"

	"tenthmark/calc/decimal"
)

// LogSampleBody is the body of a LogSample event: what a station showed, recorded
// unattended under a label. A check weight has a nominal mass and a tolerance.
type LogSampleBody struct {
	Label      string         `json:"label"`
	MassG      decimal.Number `json:"mass_g"`
	Stable     bool           `json:"stable"`
	Raw        Raw            `json:"raw"`
	Missing    int            `json:"missing,omitempty"` // samples that should stand before this one, while nothing came
	NominalG   decimal.Number `json:"nominal_g,omitzero"`
	DeviationG decimal.Number `json:"deviation_g,omitzero"`
	Within     *bool          `json:"within,omitempty"` // the tolerance; absent without one
	Came       Time           `json:"came"`             // when its line came; the event says when it was recorded
}

// Check is the latest check weighing of a station under a label.
type Check struct {
	Event  int64
	At     Time
	Within bool
}

func checkKey(station, label string) string { return station + "\x00" + label }

// applySample remembers check weighings.
func (b *Book) applySample(e Event) error {
	return with(e, func(s LogSampleBody) error {
		if s.Within != nil {
			b.Checks[checkKey(e.Subject, s.Label)] = Check{Event: e.Seq, At: e.At, Within: *s.Within}
		}
		return nil
	})
}

// mustBeChecked refuses a run on a balance whose check weight was not within its
// tolerance on the same day. label "" demands nothing.
func (b *Book) mustBeChecked(station, label string, local time.Time) error {
	if label == "" {
		return nil
	}
	check, ok := b.Checks[checkKey(station, label)]
	hint := fmt.Sprintf("Put the check weight of %q on the pan and let it settle, then open the run.", label)
	switch {
	case !ok || check.At.In(local.Location()).Format(time.DateOnly) != local.Format(time.DateOnly):
		return Refuse("balance-not-checked", fmt.Sprintf("The balance of %s was not checked today.", station), hint)
	case !check.Within:
		return Refuse("balance-off", fmt.Sprintf("The check weight on %s was outside its tolerance.", station), "Look for the cause, adjust the balance by its manual, then check again.")
	}
	return nil
}
