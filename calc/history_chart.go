package calc

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Charted is the control chart of a burette's correction between two readings, one
// value a calibration.
type Charted struct {
	Values []float64     `json:"values_mL"`
	Limits ControlLimits `json:"limits"` // from all calibrations but the last
	Last   string        `json:"last"`   // where the last one lies: "", "warning" or "action"
}

// ChartHistory charts the corrections from reading a to reading b and judges the last
// calibration against the limits that the ones before it draw; at least four.
func ChartHistory(history []Calibration, aML, bML float64) (Charted, error) {
	if len(history) < 4 {
		return Charted{}, &Refusal{
			"chart-too-few", fmt.Sprintf("%d calibrations make no control chart.", len(history)),
			"Three draw the first limits for the fourth.",
		}
	}
	var c Charted
	for _, h := range history {
		p, err := h.Curve.Between(aML, bML)
		if err != nil {
			return Charted{}, fmt.Errorf("control chart, calibration %s: %w", h.Label, err)
		}
		c.Values = append(c.Values, p.CorrectionML)
	}
	last := c.Values[len(c.Values)-1]
	var err error
	if c.Limits, err = IndividualLimits(c.Values[:len(c.Values)-1]); err != nil {
		return Charted{}, err
	}
	c.Last = c.Limits.judge(last)
	return c, nil
}

func (l ControlLimits) judge(v float64) string {
	switch {
	case v < l.ActLow || v > l.ActUp:
		return "action"
	case v < l.WarnLow || v > l.WarnUp:
		return "warning"
	}
	return ""
}

// RepeatabilityChange is whether a repeatability standard deviation differs from an
// earlier one: F = s²/s₀², two-sided at the given level.
type RepeatabilityChange struct {
	F       float64 `json:"F"`
	Low     float64 `json:"low"` // F below: better than before
	Up      float64 `json:"up"`  // F above: worse than before
	Changed bool    `json:"changed"`
}

// CompareRepeatability compares pooled standard deviations of two calibrations with nu
// degrees of freedom each, before they are pooled for a chart (F test; NIST SOP 20 asks
// for it). A change of s alone points to the operator or the stopcock (common practice,
// no source).
func CompareRepeatability(s, s0 float64, nu, nu0 int, alpha float64) (RepeatabilityChange, error) {
	if !(s >= 0 && s0 > 0) || nu < 1 || nu0 < 1 || !(alpha > 0 && alpha < 1) || math.IsInf(s, 1) {
		return RepeatabilityChange{}, fmt.Errorf("compare repeatability: s %g and %g with %d and %d degrees of freedom at %g", s, s0, nu, nu0, alpha)
	}
	f := distuv.F{D1: float64(nu), D2: float64(nu0)}
	r := RepeatabilityChange{F: s * s / (s0 * s0), Low: f.Quantile(alpha / 2), Up: f.Quantile(1 - alpha/2)}
	r.Changed = r.F < r.Low || r.F > r.Up
	return r, nil
}
