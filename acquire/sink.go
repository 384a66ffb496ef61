package acquire

import (
	"context"
	"time"

	"tenthmark/acquire/settle"
	"tenthmark/calc/decimal"
	"tenthmark/session"
)

// Settled is a weight that a station took.
type Settled struct {
	settle.Settled
	Station  string
	Mode     settle.Mode
	Identity session.Identity
	Came     time.Time // when its line came, by the clock on the wall
}

// Weight gives the settled weight as the session knows it.
func (s Settled) Weight() session.Weight {
	w := session.Weight{MassG: s.MassG, Raw: s.Raw, Mode: string(s.Mode), Identity: s.Identity}
	if s.Mode != settle.Print {
		w.Trace = &session.Trace{
			Frames: s.Dwell.Lines, DwellMS: s.Dwell.Length.Milliseconds(), SlopeGS: s.Dwell.SlopeGS, NoiseG: s.Dwell.NoiseG,
			WaitingMS: s.Dwell.Waiting.Milliseconds(),
		}
	}
	return w
}

// Live is what the balance shows at a moment.
type Live struct {
	Text     string         // the number as sent, with its sign; "" when the display shows none
	Unit     string         // as sent; "" while the balance does not show stability
	Stable   bool           // as the balance marks it
	Status   string         // "", overload, underload, adjusting, blank, report or the text of an error
	MassG    decimal.Number // the number in g; absent when the line is no plain weight
	Raw      []byte         // the line, exactly as it came
	At       time.Time      // when the line came
	Progress float64        // how far the dwell has come, 0 … 1
	Armed    bool           // whether the load is taken once it has come to rest
}

// Diagnosis names something that is not an outage and that the operator should know.
type Diagnosis struct {
	Code    string // stable, lower case with hyphens
	Message string
	Hint    string
}

// Codes of diagnoses.
const (
	DiagnoseSilent    = "balance-silent"     // nothing comes, though the line is open
	DiagnoseNotStable = "balance-not-stable" // it answers, but not when asked for a stable weight
	DiagnoseSetting   = "line-setting"       // speed or parity do not fit
	DiagnoseUnread    = "line-unreadable"    // no line was understood
	DiagnoseAutoPrint = "auto-print"         // it prints by itself: the station listens and does not ask
	DiagnoseStreaming = "print-streams"      // capture mode print, but the lines come by themselves
	DiagnoseError     = "balance-error"      // the balance reports an error code
)

// Sink takes what a station finds out. All methods are called from the station's one
// goroutine. Weight may take its time (lines wait meanwhile, and come with the time
// at which they arrived); the others must return at once.
type Sink interface {
	Weight(ctx context.Context, w Settled)
	Live(station string, l Live)
	Online(station string, id session.Identity)
	Offline(station string, reason *session.Fault)
	Diagnosis(station string, d Diagnosis)
}
