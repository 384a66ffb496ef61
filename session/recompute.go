package session

import (
	"encoding/json"
	"fmt"

	"tenthmark/calc/decimal"
)

// Difference is one place where a run, built again from what the balance sent and
// what people entered, does not come out as it is recorded.
type Difference struct {
	Event    int64
	What     string
	Recorded string
	Again    string
}

func (d Difference) String() string {
	return fmt.Sprintf("event %d: %s: recorded %s, again %s", d.Event, d.What, d.Recorded, d.Again)
}

// Recompute builds a run again from the lines of its events alone: every weight from
// its raw bytes through decode, every fact through the pairing, and the numbers
// through calc. It gives the run and what came out otherwise than recorded.
func Recompute(lines [][]byte, decode func(Raw) (decimal.Number, error)) (*Run, []Difference, error) {
	var run *Run
	var found []Difference
	for _, line := range lines {
		e, err := DecodeEvent(line)
		if err != nil {
			return nil, nil, err
		}
		if run == nil {
			if run, err = openAgain(e, line); err != nil {
				return nil, nil, err
			}
			continue
		}
		differences, err := run.decideAgain(e, decode)
		if err != nil {
			return nil, nil, fmt.Errorf("event %d %s: %w", e.Seq, e.Kind, err)
		}
		found = append(found, differences...)
		if err := run.apply(e, line); err != nil {
			return nil, nil, err
		}
	}
	if run == nil {
		return nil, nil, fmt.Errorf("there are no events to recompute from")
	}
	return run, found, nil
}

func openAgain(e Event, line []byte) (*Run, error) {
	if e.Kind != RunOpened {
		return nil, fmt.Errorf("event %d is %s and does not open the run", e.Seq, e.Kind)
	}
	b := NewBook()
	b.Next = e.Seq
	if err := b.Apply(line); err != nil {
		return nil, err
	}
	return b.Runs[e.Subject], nil
}

// decideAgain compares an event with what would be decided now on the same input.
func (r *Run) decideAgain(e Event, decode func(Raw) (decimal.Number, error)) ([]Difference, error) {
	switch e.Kind {
	case WeightTaken:
		b, err := body[WeighingBody](e)
		if err != nil {
			return nil, err
		}
		return r.weighAgain(e, b.Weight, b.Seen != 0, decode)
	case WeightSeen:
		b, err := body[SeenBody](e)
		if err != nil {
			return nil, err
		}
		return r.weighAgain(e, b.Weight, false, decode)
	case ReadingMade:
		b, err := body[ReadingBody](e)
		if err != nil {
			return nil, err
		}
		return r.enterAgain(e, Facts{ReadingML: b.ReadingML}), nil
	case WaterTempMade:
		b, err := body[WaterTempBody](e)
		if err != nil {
			return nil, err
		}
		return r.enterAgain(e, Facts{WaterTempC: b.WaterTempC}), nil
	case RunFinished, RunReviewed:
		b, err := body[SignedBody](e)
		if err != nil {
			return nil, err
		}
		if b.RecordSHA256 != r.RecordHash() {
			return []Difference{{e.Seq, "the record that was signed", b.RecordSHA256, r.RecordHash()}}, nil
		}
	}
	return nil, nil
}

// weighAgain decodes the raw bytes and places the weight anew. A weight that somebody
// took by hand is only decoded.
func (r *Run) weighAgain(e Event, w Weight, byHand bool, decode func(Raw) (decimal.Number, error)) ([]Difference, error) {
	massG, err := decode(w.Raw)
	if err != nil {
		return nil, fmt.Errorf("raw bytes %q: %w", w.Raw, err)
	}
	if massG != w.MassG {
		return []Difference{{e.Seq, "the weight in the raw bytes", w.MassG.String() + " g", massG.String() + " g"}}, nil
	}
	if byHand {
		return nil, nil
	}
	return compare(e, r.SeeWeight(w)), nil
}

func (r *Run) enterAgain(e Event, f Facts) []Difference {
	drafts, err := r.Enter(f)
	if err != nil {
		return []Difference{{e.Seq, "the entry", string(e.Body), "refused: " + err.Error()}}
	}
	return compare(e, drafts)
}

// compare holds an event against the one draft that should give it.
func compare(e Event, drafts []Draft) []Difference {
	if len(drafts) != 1 {
		return []Difference{{e.Seq, "the number of events", "1", fmt.Sprint(len(drafts))}}
	}
	again, err := json.Marshal(drafts[0].Body)
	if err != nil {
		again = []byte(err.Error())
	}
	if drafts[0].Kind != e.Kind || string(again) != string(e.Body) {
		return []Difference{{e.Seq, "what was decided", fmt.Sprintf("%s %s", e.Kind, e.Body), fmt.Sprintf("%s %s", drafts[0].Kind, again)}}
	}
	return nil
}
