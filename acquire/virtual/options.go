package virtual

import (
	"errors"
	"fmt"
	"math"
	"time"
)

// Output says when the balance prints by itself.
type Output string

// The outputs.
const (
	Auto         Output = "auto"           // every display update, with or without stability
	AutoStable   Output = "auto-stable"    // every display update that is stable
	OnChange     Output = "on-change"      // one line when a new load has come to rest
	OnInterval   Output = "interval"       // one line each IntervalS, whatever the state
	OnRequest    Output = "request"        // only when PRINT is pressed or asked for, at stability
	OnRequestNow Output = "request-at-any" // only when asked, stable or not
)

// Dialect holds the habits in which makes differ.
type Dialect struct {
	Words          bool // High and Low instead of H and L
	Comma          bool // the decimal mark
	HidePlus       bool // a positive number has no sign
	BlankLastDigit bool // the last digit is dark while the value moves
	NeverUnit      bool // the unit is never sent
	Unverified     int  // last digits in brackets, 0 … 2
	Silent         bool // no reply to questions who it is
	SilentBeyond   bool // an overloaded balance prints nothing
	AutoToggles    bool // ESC P stops and starts automatic printing
}

// Options make a balance. New fills in the defaults that stand beside the fields.
type Options struct {
	Seed                    uint64
	Model, Serial, Firmware string // "VB-220", "0021600412", "00-42-01"
	Form                    int    // 16 or 22 characters; 22
	ID                      string // identification code of the long form; "N"
	Dialect                 Dialect
	Output                  Output  // auto
	IntervalS               float64 // 1, for OnInterval

	CapacityG      float64 // 220
	ReadabilityG   float64 // 0.0001
	RepeatabilityG float64 // where a load comes to rest, standard deviation; 0.00008. Negative: none
	NoiseG         float64 // of the cell while the value moves or Flicker is set; 0.0001. Negative: none
	LagS           float64 // time constant of each of the two stages of the filter; 0.25
	RateHz         float64 // display updates a second; 10
	DriftGS        float64 // of the zero, g/s
	DraughtG       float64 // standard deviation of slow wind on the pan; needs Flicker to be seen at rest
	Flicker        bool    // the display follows the noise even while it is stable

	StableDigits int     // the value is stable when it stays within so many digits …; 2
	StableS      float64 // … for so long; 0.6

	Pace float64 // how much faster than the clock on the wall its world runs; 1
}

func (o Options) withDefaults() Options {
	text := func(s *string, d string) {
		if *s == "" {
			*s = d
		}
	}
	number := func(x *float64, d float64) {
		if *x == 0 {
			*x = d
		}
		*x = max(*x, 0)
	}
	text(&o.Model, "VB-220")
	text(&o.Serial, "0021600412")
	text(&o.Firmware, "00-42-01")
	text(&o.ID, "N")
	text((*string)(&o.Output), string(Auto))
	if o.Form == 0 {
		o.Form = 22
	}
	if o.StableDigits == 0 {
		o.StableDigits = 2
	}
	number(&o.CapacityG, 220)
	number(&o.ReadabilityG, 0.0001)
	number(&o.RepeatabilityG, 0.00008)
	number(&o.NoiseG, 0.0001)
	number(&o.LagS, 0.25)
	number(&o.RateHz, 10)
	number(&o.IntervalS, 1)
	number(&o.StableS, 0.6)
	number(&o.Pace, 1)
	return o
}

// Check says what is wrong with the options, after their defaults were filled in.
func (o Options) Check() error {
	o = o.withDefaults()
	decimals := -math.Log10(o.ReadabilityG)
	switch {
	case o.Form != 16 && o.Form != 22:
		return fmt.Errorf("virtual balance: a line of %d characters: use 16 or 22", o.Form)
	case math.Abs(decimals-math.Round(decimals)) > 1e-9 || decimals < 0 || decimals > 6:
		return fmt.Errorf("virtual balance: readability %g g: use a power of ten from 1 to 0.000001", o.ReadabilityG)
	case o.CapacityG/o.ReadabilityG >= 1e8:
		return errors.New("virtual balance: the capacity has more than eight digits")
	case o.RateHz > 1000 || o.Pace > 1000:
		return errors.New("virtual balance: rate and pace are at most 1000")
	case o.Dialect.Unverified < 0 || o.Dialect.Unverified > 2 || o.Dialect.Unverified > int(math.Round(decimals)):
		return errors.New("virtual balance: at most two decimals can be unverified")
	case len(o.ID) > 6:
		return fmt.Errorf("virtual balance: the code %q has more than six characters", o.ID)
	}
	switch o.Output {
	case Auto, AutoStable, OnChange, OnInterval, OnRequest, OnRequestNow:
		return nil
	}
	return fmt.Errorf("virtual balance: output %q is not known", o.Output)
}

// decimals of the display.
func (o Options) decimals() int { return int(math.Round(-math.Log10(o.ReadabilityG))) }

// update is the time between two display updates, in the balance's own world.
func (o Options) update() time.Duration { return time.Duration(float64(time.Second) / o.RateHz) }
