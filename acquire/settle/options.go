package settle

import (
	"errors"
	"fmt"
	"time"
)

// Mode is the way in which weights are taken.
type Mode string

// The modes.
const (
	Settle Mode = "settle" // hands-free, from a stream of lines
	Print  Mode = "print"  // every stable line is a weight: the operator presses PRINT
	Poll   Mode = "poll"   // as Settle, on lines that the daemon asks for
)

// Options sizes the detector. DefaultOptions gives sizes for a balance.
type Options struct {
	Mode Mode

	// DigitG is one step of the display, g. What moves by less than that in a
	// dwell is level.
	DigitG float64

	// BandG is the largest spread (highest minus lowest) in a dwell, g. Of 40
	// normal deviates 999 in 1000 spread over less than 6 standard deviations; a
	// display that flickers about a step spreads over 2 digits.
	BandG float64

	// DriftGS is the fastest even drift at which a weight is still taken, g/s; the band
	// grows by it with the length of the dwell. An open vessel loses some milligrams a
	// minute; 1 digit a second is 6 mg a minute on a balance that shows 0.1 mg.
	DriftGS float64

	// ReArmG is how far the load must move from the last taken weight, g. It is
	// larger than what draught and bumps leave behind and smaller than one drop
	// from a burette (some 30 to 50 mg), so that the last drop is not overlooked.
	ReArmG float64

	// ReArmHold is how long unstable lines must show the load away before it counts:
	// a bumped table throws the display about for some tenths of a second, and no
	// hand takes a vessel off and puts it back as fast. One stable line away from
	// the last weight counts at once.
	ReArmHold time.Duration

	// Dwell is how long the load must be at rest.
	Dwell time.Duration

	// Gap is the longest pause between two lines of a dwell. It grows by itself for
	// a balance that prints slowly.
	Gap time.Duration

	// MinLines is how many lines a dwell has at least.
	MinLines int

	// NoFlag declares that the balance never marks a line as stable. The dwell is
	// then half as long again.
	NoFlag bool
}

// A drop is the smallest portion that a burette delivers; 20 mg is less than any.
const belowOneDropG = 0.02

// DefaultOptions sizes the detector for a balance with this readability (one digit)
// and repeatability (standard deviation of repeated weighings), both in g and
// positive. The larger of the two is what the display can be trusted to.
func DefaultOptions(readabilityG, repeatabilityG float64) Options {
	trustG := max(readabilityG, repeatabilityG)
	bandG := max(3*readabilityG, 6*repeatabilityG)
	return Options{
		Mode:      Settle,
		DigitG:    readabilityG,
		BandG:     bandG,
		DriftGS:   readabilityG,
		ReArmG:    max(2*bandG, min(100*trustG, belowOneDropG)),
		ReArmHold: 400 * time.Millisecond,
		Dwell:     2 * time.Second,
		Gap:       1500 * time.Millisecond,
		MinLines:  3,
	}
}

// Check says what is wrong with the options.
func (o Options) Check() error {
	switch {
	case o.Mode != Settle && o.Mode != Print && o.Mode != Poll:
		return fmt.Errorf("settle: mode %q is not known", o.Mode)
	case !(o.DigitG > 0):
		return errors.New("settle: the digit must be positive")
	case !(o.BandG >= o.DigitG):
		return errors.New("settle: the band must be at least one digit")
	case !(o.DriftGS >= 0):
		return errors.New("settle: the drift must not be negative")
	case !(o.ReArmG > o.BandG):
		return errors.New("settle: the re-arm step must be larger than the band")
	case o.Dwell <= 0 || o.Gap <= 0 || o.ReArmHold < 0:
		return errors.New("settle: dwell and gap must be positive")
	case o.MinLines < 2:
		return errors.New("settle: a dwell needs at least 2 lines")
	}
	return nil
}

// WithDwell sets the dwell and, in proportion, the pause and the hold that were sized
// for the default of two seconds.
func (o Options) WithDwell(dwell time.Duration) Options {
	o.Dwell = dwell
	o.Gap = max(o.Gap, dwell/2)
	o.ReArmHold = min(o.ReArmHold, dwell/5)
	return o
}

// WithBand sets the band, and the re-arm step where that would become too small.
func (o Options) WithBand(bandG float64) Options {
	o.BandG = bandG
	o.ReArmG = max(o.ReArmG, 2*bandG)
	return o
}
