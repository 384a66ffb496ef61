package calc

import (
	"fmt"
	"math"
	"strings"
	"time"
)

// Outlook is when a burette whose drift goes on will leave its class.
type Outlook struct {
	Reliable bool      `json:"reliable"` // at least EnoughForDrift calibrations
	From     time.Time `json:"from"`     // the last calibration
	Horizon  time.Time `json:"horizon"`  // how far it was looked
	Leaves   Crossing  `json:"leaves"`   // when the foretold difference exceeds the limit
	InDoubt  Crossing  `json:"in_doubt"` // when the probability to keep the limit falls below Sure
	Sure     float64   `json:"p_wanted"`
}

// Crossing is the first pair of marks to cross a line, and when.
type Crossing struct {
	Happens bool      `json:"happens"` // within the horizon
	At      time.Time `json:"at"`
	FromML  float64   `json:"from_mL"`
	ToML    float64   `json:"to_mL"`
}

// Foretell looks ahead from the last calibration for the first time at which any
// difference between two marks exceeds the limit by its drift, and the first time at
// which it keeps the limit with a probability below sure (0.5 to 1). history is in
// order of time; at least three calibrations, and four to be reliable.
func Foretell(history []Calibration, mpe MPE, sure float64, years float64) (Outlook, error) {
	if !(sure > 0.5 && sure < 1) || !(years > 0 && years <= 100) || !(mpe.LimitML > 0) {
		return Outlook{}, fmt.Errorf("outlook: probability %g, %g years, limit %g mL", sure, years, mpe.LimitML)
	}
	for i := 1; i < len(history); i++ {
		if !history[i].At.After(history[i-1].At) {
			return Outlook{}, fmt.Errorf("outlook: calibration %s is not later than the one before it", history[i].Label)
		}
	}
	if len(history) == 0 {
		return Outlook{}, fmt.Errorf("outlook: no calibrations")
	}
	last := history[len(history)-1]
	o := Outlook{From: last.At, Horizon: after(last.At, years), Sure: sure, Reliable: len(history) >= EnoughForDrift}
	marks := append([]float64{last.Curve.FirstML}, last.Curve.readingsML()...)
	for j, b := range marks {
		for _, a := range marks[:j] {
			d, err := DriftOf(history, a, b)
			if err != nil {
				return Outlook{}, err
			}
			o.Leaves.earlier(d, o.crossing(years, func(t time.Time) bool {
				c, _ := d.AtTime(t)
				return math.Abs(c) > mpe.LimitML
			}))
			o.InDoubt.earlier(d, o.crossing(years, func(t time.Time) bool { return d.probability(t, mpe.LimitML) < sure }))
		}
	}
	return o, nil
}

// probability that the difference keeps the limit at a time.
func (d Drift) probability(t time.Time, limitML float64) float64 {
	c, u := d.AtTime(t)
	p, err := ConformanceProbability(c, u, float64(d.Nu), Within(limitML))
	if err != nil {
		return 0
	}
	return p
}

// crossing finds the first time in the horizon at which something is so, to the day.
func (o Outlook) crossing(years float64, is func(time.Time) bool) time.Time {
	steps := int(math.Ceil(years * 12))
	low := o.From
	if is(low) {
		return low
	}
	for i := 1; i <= steps; i++ {
		high := after(o.From, years*float64(i)/float64(steps))
		if !is(high) {
			low = high
			continue
		}
		for high.Sub(low) > 24*time.Hour {
			if mid := low.Add(high.Sub(low) / 2); is(mid) {
				high = mid
			} else {
				low = mid
			}
		}
		return high
	}
	return time.Time{}
}

// after adds years of the mean length.
func after(t time.Time, years float64) time.Time {
	return t.Add(time.Duration(years * hoursPerYear * float64(time.Hour)))
}

// earlier keeps the earliest crossing.
func (c *Crossing) earlier(d Drift, at time.Time) {
	if at.IsZero() || c.Happens && !at.Before(c.At) {
		return
	}
	*c = Crossing{true, at, d.FromML, d.ToML}
}

// Due is when a burette is to be calibrated again, and why then.
type Due struct {
	At      time.Time `json:"at"`
	Because string    `json:"because"` // "interval" or "drift"
}

// DueDate gives the laboratory's interval after the last calibration, or the day on
// which the class comes into doubt when that is earlier and the outlook reliable. A day
// that a month does not have becomes its last day.
func DueDate(last time.Time, intervalMonths int, o *Outlook) (Due, error) {
	if intervalMonths < 1 || intervalMonths > 240 {
		return Due{}, &Refusal{
			"interval-unusable", fmt.Sprintf("An interval of %d months makes no sense.", intervalMonths),
			"Enter 1 to 240 months.",
		}
	}
	due := Due{addMonths(last, intervalMonths), "interval"}
	if o != nil && o.Reliable && o.InDoubt.Happens && o.InDoubt.At.Before(due.At) {
		due = Due{o.InDoubt.At, "drift"}
	}
	return due, nil
}

func addMonths(t time.Time, months int) time.Time {
	moved := t.AddDate(0, months, 0)
	if moved.Day() != t.Day() { // ran over into the next month
		moved = moved.AddDate(0, 0, -moved.Day())
	}
	return moved
}

// LongestInterval gives the longest interval in months for a glass, by the name of its
// material, after ASTM E542-01(2021) 4.2 and 4.3: 10 years for borosilicate, 5 for
// soda-lime, when it was never attacked (hydrofluoric or hot phosphoric acid, hot strong
// alkali) or heated above 150 °C (soda-lime 90 °C). ok is false for other materials.
func LongestInterval(material string) (months int, ok bool) {
	switch {
	case strings.HasPrefix(material, "borosilicate"):
		return 120, true
	case strings.HasPrefix(material, "soda-lime"):
		return 60, true
	}
	return 0, false
}

// Staircase proposes the next interval in months from how a burette was found: half as
// long again when the difference nearest to the limit used at most four fifths of it,
// two thirds as long when the limit was not kept, else the same. The method is that of
// ILAC-G24 (automatic adjustment), its numbers are from memory and the laboratory's to
// choose; longest, e.g. from LongestInterval, is not exceeded.
func Staircase(months, longest int, found Conformity) int {
	used := math.Abs(found.WorstPair.DifferenceML) / found.MPEML
	next := months
	switch {
	case found.Verdict == DoesNotMeet || found.Verdict == ConditionalFail:
		next = months * 2 / 3
	case used <= 0.8:
		next = months * 3 / 2
	}
	return max(1, min(next, longest))
}
