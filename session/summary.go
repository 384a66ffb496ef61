package session

import "fmt"

// Summary is a run in a few words: enough for lists, for the due date and to find the
// curve in force.
type Summary struct {
	ID           string `json:"id"`
	State        State  `json:"state"`
	Burette      string `json:"burette"`
	Station      string `json:"station"`
	OpenedAt     Time   `json:"opened"`
	OpenedBy     string `json:"opened_by"`
	FinishedAt   Time   `json:"finished"`
	PerformedBy  string `json:"performed_by,omitempty"`
	ReviewedBy   string `json:"reviewed_by,omitempty"`
	Supersedes   string `json:"supersedes,omitempty"`
	SupersededBy string `json:"superseded_by,omitempty"`
	Folder       string `json:"folder,omitempty"`
	First        int64  `json:"first"`
	Last         int64  `json:"last"`
}

// Summary gives the run in a few words.
func (r *Run) Summary() Summary {
	s := Summary{
		ID: r.ID, State: r.State, Burette: r.Opening.Burette.Name, Station: r.Opening.Station, OpenedAt: r.OpenedAt,
		OpenedBy: r.OpenedBy.Name(), FinishedAt: r.FinishedAt, Supersedes: r.Opening.Supersedes, SupersededBy: r.SupersededBy,
		First: r.First, Last: r.Last,
	}
	if r.Performed != nil {
		s.PerformedBy = r.Performed.Name
	}
	if r.Review != nil {
		s.ReviewedBy = r.Review.Name
	}
	if r.Publishing != nil {
		s.Folder = r.Publishing.Folder
	}
	return s
}

// apply keeps the summary of a run on the shelf in step with the few events that can
// still come.
func (s *Summary) apply(e Event) error {
	s.Last = e.Seq
	switch e.Kind {
	case RunSuperseded:
		return with(e, func(b SupersededBody) error { s.SupersededBy = b.By; return nil })
	case RunReviewed:
		return with(e, func(b SignedBody) error { s.ReviewedBy = b.Name; return nil })
	}
	return nil
}

// Shelve drops the closed runs from the book; their summaries stay.
func (b *Book) Shelve() {
	for id, run := range b.Runs {
		if run.State == Published || run.State == Abandoned {
			delete(b.Runs, id)
		}
	}
}

// RunFromLines builds a run from the lines of its events, in order.
func RunFromLines(lines [][]byte) (*Run, error) {
	var run *Run
	for _, line := range lines {
		e, err := DecodeEvent(line)
		if err != nil {
			return nil, err
		}
		if run == nil {
			if run, err = openAgain(e, line); err != nil {
				return nil, err
			}
			continue
		}
		if err := run.apply(e, line); err != nil {
			return nil, err
		}
	}
	if run == nil {
		return nil, fmt.Errorf("there are no events to build a run from")
	}
	return run, nil
}
