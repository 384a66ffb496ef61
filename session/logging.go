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
	Text       string         `json:"text"` // the number as sent; "" when the display showed none
	Unit       string         `json:"unit"`
	Stable     bool           `json:"stable"`
	Status     string         `json:"status,omitempty"` // instead of a number: overload, no value for 12 s …
	MassG      decimal.Number `json:"mass_g,omitzero"`
	NominalG   decimal.Number `json:"nominal_g,omitzero"`
	DeviationG decimal.Number `json:"deviation_g,omitzero"`
	Within     *bool          `json:"within,omitempty"` // the tolerance; absent without one
}

// CheckAgainst fills in how far a check weight is off. Both must be present.
func (b LogSampleBody) CheckAgainst(nominalG, toleranceG decimal.Number) LogSampleBody {
	if !b.MassG.IsSet() || !nominalG.IsSet() || !toleranceG.IsSet() {
		return b
	}
	b.NominalG, b.DeviationG = nominalG, b.MassG.Sub(nominalG)
	off := b.DeviationG
	if off.Unscaled() < 0 {
		off = decimal.New(-off.Unscaled(), off.Decimals())
	}
	within := off.Cmp(toleranceG) <= 0
	b.Within = &within
	return b
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
