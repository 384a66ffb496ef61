package acquire

import (
	"fmt"
	"time"

	"tenthmark/acquire/line"
	"tenthmark/acquire/settle"
	"tenthmark/calc/decimal"
	"tenthmark/protocol"
	"tenthmark/session"
)

// Config is one [[station]] section of the configuration. A key that is left out has
// the default that stands beside it.
type Config struct {
	Name string `toml:"name"`

	Port     string `toml:"port"`
	USB      string `toml:"usb"`
	TCP      string `toml:"tcp"`
	Replay   string `toml:"replay"`
	Baud     int    `toml:"baud"`      // 9600
	DataBits int    `toml:"data_bits"` // 8
	Parity   string `toml:"parity"`    // none
	StopBits int    `toml:"stop_bits"` // 1
	Flow     string `toml:"flow"`      // none
	Record   string `toml:"record"`    // unset: nothing is recorded

	Capture         string         `toml:"capture"`           // settle
	ReadabilityG    decimal.Number `toml:"readability_g"`     // 0.0001
	RepeatabilityG  decimal.Number `toml:"repeatability_g"`   // as the readability
	USensitivityRel decimal.Number `toml:"u_sensitivity_rel"` // 2e-6

	Pattern       string `toml:"pattern"`         // for balances that print something else
	UnitNeverSent bool   `toml:"unit_never_sent"` // the balance shows no stability; its lines are in g

	DwellS decimal.Number `toml:"dwell_s"` // 2
	BandG  decimal.Number `toml:"band_g"`  // from readability and repeatability, see settle.DefaultOptions
	ReArmG decimal.Number `toml:"rearm_g"` // likewise

	PollIntervalS decimal.Number `toml:"poll_interval_s"` // 0.5, in capture mode poll
	PollTimeoutS  decimal.Number `toml:"poll_timeout_s"`  // 15; 40 for a readability below 0.1 mg
	ListenS       decimal.Number `toml:"listen_s"`        // 1.5: after opening, before anything is sent
	ReplyS        decimal.Number `toml:"reply_s"`         // 1: for each question who the balance is
	AskIdentity   *bool          `toml:"ask_identity"`    // true

	ReplayPace float64 `toml:"-"` // how much faster than recorded a replay runs
}

// The defaults that other packages may want to show.
const (
	DefaultReadabilityG    = "0.0001"
	DefaultUSensitivityRel = "2e-6"
)

// WithDefaults fills in what was left out.
func (c Config) WithDefaults() Config {
	if c.Capture == "" {
		c.Capture = string(settle.Settle)
	}
	number := func(n *decimal.Number, text string) {
		if !n.IsSet() {
			*n = decimal.MustParse(text)
		}
	}
	number(&c.ReadabilityG, DefaultReadabilityG)
	number(&c.RepeatabilityG, c.ReadabilityG.String())
	number(&c.USensitivityRel, "0.000002")
	number(&c.DwellS, "2")
	number(&c.PollIntervalS, "0.5")
	number(&c.PollTimeoutS, pollTimeout(c.ReadabilityG))
	number(&c.ListenS, "1.5")
	number(&c.ReplyS, "1")
	if c.AskIdentity == nil {
		yes := true
		c.AskIdentity = &yes
	}
	return c
}

// pollTimeout: finer balances need longer to come to rest.
func pollTimeout(readabilityG decimal.Number) string {
	if readabilityG.Float() < 0.0001 {
		return "40"
	}
	return "15"
}

// Spec gives the line of the station.
func (c Config) Spec() line.Spec {
	return line.Spec{
		Port: c.Port, USB: c.USB, TCP: c.TCP, Replay: c.Replay, Baud: c.Baud, DataBits: c.DataBits, Parity: c.Parity,
		StopBits: c.StopBits, Flow: c.Flow, Record: c.Record, Pace: c.ReplayPace,
	}
}

// settleOptions sizes the detector.
func (c Config) settleOptions() settle.Options {
	o := settle.DefaultOptions(c.ReadabilityG.Float(), c.RepeatabilityG.Float())
	o.Mode = settle.Mode(c.Capture)
	o.NoFlag = c.UnitNeverSent
	o = o.WithDwell(seconds(c.DwellS))
	if c.BandG.IsSet() {
		o = o.WithBand(c.BandG.Float())
	}
	if c.ReArmG.IsSet() {
		o.ReArmG = c.ReArmG.Float()
	}
	if o.Mode == settle.Poll {
		o.Gap = max(o.Gap, 3*seconds(c.PollIntervalS))
	}
	return o
}

// Check says what is wrong with the section. The error is a *session.Fault that names
// the key.
func (c Config) Check() error {
	c = c.WithDefaults()
	if err := c.Spec().Check(); err != nil {
		return refuse("line", err.Error(), "Correct the keys that name the line; config.example.toml shows them.")
	}
	if c.Pattern != "" {
		if _, err := protocol.NewPattern(c.Pattern); err != nil {
			return refuse("pattern", err.Error(), "See `tenthmark listen` for what the balance prints, and write a group (?P<value>…) for the number.")
		}
	}
	for _, key := range []struct {
		name  string
		value decimal.Number
	}{
		{"readability_g", c.ReadabilityG},
		{"repeatability_g", c.RepeatabilityG},
		{"u_sensitivity_rel", c.USensitivityRel},
		{"dwell_s", c.DwellS},
		{"band_g", c.BandG},
		{"rearm_g", c.ReArmG},
		{"poll_interval_s", c.PollIntervalS},
		{"poll_timeout_s", c.PollTimeoutS},
		{"reply_s", c.ReplyS},
	} {
		if key.value.IsSet() && key.value.Unscaled() <= 0 {
			return refuse(key.name, fmt.Sprintf("%s = %s must be greater than zero", key.name, key.value), "Give a positive number, or leave the key out for its default.")
		}
	}
	if c.ListenS.Unscaled() < 0 {
		return refuse("listen_s", fmt.Sprintf("listen_s = %s must not be negative", c.ListenS), "Give 0 or a positive number of seconds.")
	}
	if err := c.settleOptions().Check(); err != nil {
		return refuse("settling", err.Error(), "Check capture (settle, print or poll), dwell_s, band_g and rearm_g: the re-arm step must be larger than the band, the band at least one digit.")
	}
	return nil
}

func refuse(what, message, hint string) error {
	return session.Refuse("station-"+what, message+".", hint)
}

func seconds(n decimal.Number) time.Duration {
	return time.Duration(n.Float() * float64(time.Second))
}
