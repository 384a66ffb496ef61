package ledger

import "fmt"

// Finding is one thing that verification found wrong. It is an error whose chain
// ends in ErrAltered.
type Finding struct {
	Seq  int64  `json:"seq"`  // the event concerned, -1 when none is
	What string `json:"what"` // what is wrong, to be read after "event 12 " or alone
}

// Error gives the finding as a sentence without full stop.
func (f *Finding) Error() string {
	if f.Seq < 0 {
		return f.What
	}
	return fmt.Sprintf("event %d %s", f.Seq, f.What)
}

// Unwrap gives ErrAltered.
func (f *Finding) Unwrap() error { return ErrAltered }
