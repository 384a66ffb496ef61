package acquire

import (
	"fmt"
	"strconv"
	"time"

	"tenthmark/calc/decimal"
	"tenthmark/session"
)

// LogConfig is one [[log]] section: a station is recorded unattended, at an interval
// (overnight drift, evaporation) or on every settling (a daily check weight).
type LogConfig struct {
	Station    string         `toml:"station"`
	Label      string         `toml:"label"`
	EveryS     decimal.Number `toml:"every_s"`     // seconds between entries; 0 or unset: on every settling
	NominalG   decimal.Number `toml:"nominal_g"`   // of a check weight, unset for none
	ToleranceG decimal.Number `toml:"tolerance_g"` // largest deviation from the nominal that passes
}

// Check says what is wrong with the section. The error is a *session.Fault.
func (c LogConfig) Check() error {
	hint := "Correct the [[log]] section; config.example.toml shows its keys."
	switch {
	case c.Station == "":
		return session.Refuse("log-station", "The log names no station.", hint)
	case c.Label == "":
		return session.Refuse("log-label", "The log has no label.", hint)
	case c.EveryS.IsSet() && c.EveryS.Float() < 0, c.EveryS.IsSet() && c.EveryS.Float() > 0 && c.EveryS.Float() < 1:
		return session.Refuse("log-every_s", fmt.Sprintf("every_s = %s: an entry each second is the most.", c.EveryS), hint)
	case c.NominalG.IsSet() != c.ToleranceG.IsSet():
		return session.Refuse("log-nominal_g", "nominal_g and tolerance_g belong together.", hint)
	case c.NominalG.IsSet() && (c.NominalG.Unscaled() <= 0 || c.ToleranceG.Unscaled() <= 0):
		return session.Refuse("log-nominal_g", "nominal_g and tolerance_g must be greater than zero.", hint)
	case c.NominalG.IsSet() && c.every() > 0:
		return session.Refuse("log-every_s", "A check weight is recorded on settling, not at an interval.", hint)
	}
	return nil
}

func (c LogConfig) every() time.Duration {
	if !c.EveryS.IsSet() {
		return 0
	}
	return seconds(c.EveryS)
}

// Verdict is what a check weight came to.
type Verdict string

// The verdicts. An entry that is no check weight has none.
const (
	Passed Verdict = "passed"
	Failed Verdict = "failed"
)

// LogEntry is one line of a log.
type LogEntry struct {
	Station    string         `json:"station"`
	Label      string         `json:"label"`
	At         time.Time      `json:"at"`
	MassG      decimal.Number `json:"mass_g"`
	Stable     bool           `json:"stable"`
	Raw        session.Raw    `json:"raw"`
	Missing    int            `json:"missing,omitempty"`    // entries that should stand before this one, while nothing came
	DeviationG decimal.Number `json:"deviation_g,omitzero"` // from the nominal, of a check weight
	Verdict    Verdict        `json:"verdict,omitempty"`
}

// LogHeader names the columns of LogEntry.Record.
func LogHeader() []string {
	return []string{"at", "station", "label", "mass_g", "stable", "missing", "deviation_g", "verdict"}
}

// Record gives the entry as one row of a CSV file.
func (e LogEntry) Record() []string {
	return []string{
		e.At.UTC().Format("2006-01-02T15:04:05.000Z"), e.Station, e.Label, e.MassG.String(), strconv.FormatBool(e.Stable),
		strconv.Itoa(e.Missing), e.DeviationG.String(), string(e.Verdict),
	}
}

// Logger decides what a log records. It is pure: the moments come with what it is
// shown. It belongs to one goroutine.
type Logger struct {
	cfg  LogConfig
	next time.Time // when the next entry is due, at an interval
}

// NewLogger checks the section and makes its logger.
func NewLogger(cfg LogConfig) (*Logger, error) {
	if err := cfg.Check(); err != nil {
		return nil, err
	}
	return &Logger{cfg: cfg}, nil
}

// Live is shown every line of the station and says whether it is an entry: the first
// weight at or after each full interval of the day (UTC), so that logs of several
// balances stand at the same times.
func (l *Logger) Live(station string, live Live) (LogEntry, bool) {
	every := l.cfg.every()
	if every == 0 || station != l.cfg.Station || !live.MassG.IsSet() || live.At.Before(l.next) {
		return LogEntry{}, false
	}
	missing := 0
	if !l.next.IsZero() {
		missing = int(live.At.Sub(l.next) / every)
	}
	l.next = live.At.Truncate(every).Add(every)
	return LogEntry{
		Station: station, Label: l.cfg.Label, At: live.At, MassG: live.MassG, Stable: live.Stable, Raw: live.Raw, Missing: missing,
	}, true
}

// Settled is shown every settled weight and says whether it is an entry. With a nominal
// only what can be the check weight is one: an empty pan or a vessel is not.
func (l *Logger) Settled(w Settled) (LogEntry, bool) {
	if l.cfg.every() != 0 || w.Station != l.cfg.Station {
		return LogEntry{}, false
	}
	e := LogEntry{Station: w.Station, Label: l.cfg.Label, At: w.Came, MassG: w.MassG, Stable: true, Raw: w.Raw}
	if !l.cfg.NominalG.IsSet() {
		return e, true
	}
	deviation := w.MassG.Sub(l.cfg.NominalG)
	if abs(deviation).Float() > max(l.cfg.NominalG.Float()/20, 20*l.cfg.ToleranceG.Float()) {
		return LogEntry{}, false
	}
	e.DeviationG, e.Verdict = deviation, Passed
	if abs(deviation).Cmp(l.cfg.ToleranceG) > 0 {
		e.Verdict = Failed
	}
	return e, true
}

// abs gives the number without its sign.
func abs(n decimal.Number) decimal.Number {
	if n.Unscaled() < 0 {
		return decimal.New(-n.Unscaled(), n.Decimals())
	}
	return n
}
