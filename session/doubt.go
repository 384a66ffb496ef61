package session

import (
	"fmt"
	"math"

	"tenthmark/calc/decimal"
)

// Doubt is a delivery whose mass and readings do not agree with one another. It is
// named before the run goes on: the operator amends a value, voids the delivery, or
// says that the values stand.
type Doubt struct {
	Delivery int            `json:"delivery"`
	Kind     string         `json:"kind"` // misreading or implausible
	Text     string         `json:"text"`
	Fact     int64          `json:"fact,omitempty"` // the reading that may be wrong
	Value    decimal.Number `json:"value,omitzero"` // what it would then be
	OffByML  float64        `json:"off_by_mL"`      // how far the delivery is from what was expected
	Expected float64        `json:"expected_mL"`    // correction expected from its replicates, or 0
}

// Hint tells how to get past a doubt.
func (d *Doubt) Hint() string {
	return "Look at the burette again. Amend the reading, void the delivery, or answer that the values stand."
}

// Parts of a subdivision: a difference within nearMark of a whole number of
// subdivisions looks like a misread line, one beyond farOff cannot be left unsaid
// (common practice, no source).
const (
	nearMark = 0.3
	farOff   = 0.5
)

// DoubtAbout compares a complete delivery's volume with its readings, and with its
// replicates as far as there are any. Nil when there is nothing to ask, or when
// somebody answered after the last change.
func (r *Run) DoubtAbout(d *Delivery) *Doubt {
	if d.Void != nil || !r.IsComplete(d) {
		return nil
	}
	if d.Answered != nil && d.Answered.Event > r.lastTouched(d) {
		return nil
	}
	result, err := r.Result(d)
	if err != nil {
		return &Doubt{Delivery: d.Number, Kind: "implausible", Text: fmt.Sprintf("Delivery %d cannot be computed: %v.", d.Number, err)}
	}
	expected := r.expectedCorrection(d)
	return r.judge(d, result.CorrectionML-expected, expected)
}

func (r *Run) judge(d *Delivery, offML, expectedML float64) *Doubt {
	subdivision := r.Opening.Burette.SubdivisionML
	lines := math.Round(offML / subdivision.Float())
	rest := offML/subdivision.Float() - lines
	doubt := &Doubt{Delivery: d.Number, OffByML: offML, Expected: expectedML}
	switch {
	case lines != 0 && math.Abs(rest) <= nearMark:
		shift := decimal.New(int64(lines)*subdivision.Unscaled(), subdivision.Decimals())
		doubt.Kind, doubt.Fact = "misreading", d.End.Fact
		doubt.Value = d.End.ReadingML.Sub(decimal.New(-shift.Unscaled(), shift.Decimals()))
		doubt.Text = fmt.Sprintf("Delivery %d: the water is %s than the readings say, close to %s: the reading %s mL was probably %s mL.",
			d.Number, moreOrLess(offML), wholeLines(lines), d.End.ReadingML, doubt.Value)
	case math.Abs(offML) > farOff*subdivision.Float():
		doubt.Kind = "implausible"
		doubt.Text = fmt.Sprintf("Delivery %d: the water is %s than the readings say: a lost drop, a bubble, a wet vessel or a wrong value.", d.Number, moreOrLess(offML))
	default:
		return nil
	}
	return doubt
}

func moreOrLess(offML float64) string {
	if offML < 0 {
		return fmt.Sprintf("%.3f mL less", -offML)
	}
	return fmt.Sprintf("%.3f mL more", offML)
}

func wholeLines(lines float64) string {
	if math.Abs(lines) == 1 {
		return "one line of the scale"
	}
	return fmt.Sprintf("%.0f lines of the scale", math.Abs(lines))
}

// expectedCorrection is the mean correction of the earlier deliveries between the
// same points, 0 when there are none.
func (r *Run) expectedCorrection(d *Delivery) float64 {
	sum, n := 0.0, 0
	for _, other := range r.Deliveries[:d.Number-1] {
		if other.Void != nil || !r.IsComplete(other) || other.FromML.Cmp(d.FromML) != 0 || other.PointML.Cmp(d.PointML) != 0 {
			continue
		}
		if result, err := r.Result(other); err == nil {
			sum, n = sum+result.CorrectionML, n+1
		}
	}
	if n == 0 {
		return 0
	}
	return sum / float64(n)
}

// lastTouched gives the number of the latest event that changed what the delivery
// is computed from.
func (r *Run) lastTouched(d *Delivery) int64 {
	last := max(r.BeforeOf(d).Fact, d.After.Fact)
	for _, reading := range []*Reading{r.StartOf(d), d.End} {
		last = max(last, reading.Fact, latest(reading.Amended))
	}
	return max(last, d.Water.Fact, latest(d.Water.Amended))
}

func latest(changes []Change) int64 {
	if len(changes) == 0 {
		return 0
	}
	return changes[len(changes)-1].Event
}
