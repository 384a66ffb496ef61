package session

import (
	"fmt"
	"strings"

	"tenthmark/calc/decimal"
)

// Ranges that an entry must lie in. They keep slips of the finger out; what the
// formulas are valid for is calc's own, narrower business.
const (
	lowestWaterC, highestWaterC     = 5, 40
	lowestAirC, highestAirC         = 5, 40
	lowestAirHPa, highestAirHPa     = 600, 1100
	lowestHumidity, highestHumidity = 0, 100
)

// CheckReason gives a reason without blanks around it; a change without a reason is
// refused.
func CheckReason(reason string) (string, error) {
	reason = strings.TrimSpace(reason)
	if reason == "" {
		return "", Refuse("reason-missing", "A reason is needed.", "Say in a few words why.")
	}
	if len(reason) > 500 {
		return "", Refuse("reason-too-long", "The reason is longer than 500 bytes.", "Say it in a few words.")
	}
	return reason, nil
}

func inRange(code, what, unit string, v decimal.Number, low, high float64) error {
	if !v.IsSet() {
		return Refuse(code, fmt.Sprintf("The %s is missing.", what), fmt.Sprintf("Enter it in %s, for example 21.4.", unit))
	}
	if f := v.Float(); f < low || f > high {
		return Refuse(code, fmt.Sprintf("The %s %s %s is not between %g and %g.", what, v, unit, low, high), "Look at the instrument again and enter what it shows.")
	}
	return nil
}

func checkWaterTemp(v decimal.Number) error {
	return inRange("water-temp-out-of-range", "water temperature", "°C", v, lowestWaterC, highestWaterC)
}

func checkAmbient(a AmbientBody) error {
	if err := inRange("ambient-out-of-range", "air temperature", "°C", a.AirTempC, lowestAirC, highestAirC); err != nil {
		return err
	}
	if err := inRange("ambient-out-of-range", "air pressure", "hPa", a.PressureHPa, lowestAirHPa, highestAirHPa); err != nil {
		return err
	}
	return inRange("ambient-out-of-range", "relative humidity", "%", a.HumidityPct, lowestHumidity, highestHumidity)
}

// checkScale: a reading lies on the scale.
func (r *Run) checkScale(v decimal.Number) error {
	b := r.Opening.Burette
	if !v.IsSet() {
		return Refuse("reading-missing", "There is no reading.", "Enter it in millilitres, for example 10.02.")
	}
	if v.Unscaled() < 0 || v.Cmp(b.CapacityML.Number) > 0 {
		return Refuse("reading-outside-scale", fmt.Sprintf("The reading %s mL is not on the scale of burette %s, 0 to %s mL.", v, b.Name, b.CapacityML), "Look at the meniscus again and enter what it shows.")
	}
	return nil
}

// checkReadingAs: a reading keeps its delivery, and the one that shares it, running
// down the scale.
func (r *Run) checkReadingAs(f *Reading, v decimal.Number) error {
	if err := r.checkScale(v); err != nil {
		return err
	}
	for _, d := range r.Deliveries {
		start, end := r.StartOf(d), d.End
		if d.Void != nil || start == nil || end == nil {
			continue
		}
		if start == f && v.Cmp(end.ReadingML) >= 0 || end == f && v.Cmp(start.ReadingML) <= 0 {
			return errOrder(d, v)
		}
	}
	return nil
}

// checkReadingAt: a new reading, where it is going to be placed.
func (r *Run) checkReadingAt(p place, v decimal.Number) error {
	if err := r.checkScale(v); err != nil {
		return err
	}
	start := r.StartOf(p.delivery)
	if p.role == End && start != nil && v.Cmp(start.ReadingML) <= 0 {
		return errOrder(p.delivery, v)
	}
	if p.role == Start && v.Cmp(p.delivery.PointML) >= 0 {
		return errOrder(p.delivery, v)
	}
	return nil
}

func errOrder(d *Delivery, v decimal.Number) error {
	return Refuse("reading-order", fmt.Sprintf("With %s mL, delivery %d (from about %s to about %s mL) would not run down the scale.", v, d.Number, d.FromML, d.PointML),
		"Look at the meniscus again; if an earlier reading is wrong, amend that one first.")
}
