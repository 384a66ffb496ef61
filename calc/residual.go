package calc

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Residual is how far one delivery lies from the curve. A flag is a question to the
// operator; it removes nothing.
type Residual struct {
	Delivery      int     `json:"delivery"`
	ResidualML    float64 `json:"residual_mL"`      // observed minus fitted, mL
	Checked       bool    `json:"checked"`          // other deliveries predict this one
	LeaveOneOutML float64 `json:"leave_one_out_mL"` // observed minus what all the others predict, mL
	Normalised    float64 `json:"normalised"`       // the same over its standard uncertainty
	Flag          bool    `json:"flag"`             // larger than any of so many should be, see FlagRule
}

// FlagRule is when a residual is flagged.
const FlagRule = "A delivery is flagged when its normalised leave-one-out residual is larger than the largest of all would be in 5 % of runs without a fault (Bonferroni)."

const flagLevel = 0.05

func (c *Curve) takeResiduals(s *solution, f *influence) {
	m := s.m
	limit := distuv.UnitNormal.Quantile(1 - flagLevel/float64(2*len(m.ds)))
	c.Residuals = make([]Residual, len(m.ds))
	for i, d := range m.ds {
		fitted := 0.0
		for k, a := range m.design[i] {
			fitted += a * s.c[k]
		}
		r := Residual{Delivery: d.Delivery, ResidualML: m.y[i] - fitted}
		// leverage is 1/variance of the prediction error; without redundancy it is 0
		// but for rounding.
		if f.leverage[i] > 1e-9*f.precision[i] {
			r.Checked = true
			r.LeaveOneOutML = f.pull[i] / f.leverage[i]
			r.Normalised = f.pull[i] / math.Sqrt(f.leverage[i])
			r.Flag = math.Abs(r.Normalised) > limit
		}
		c.Residuals[i] = r
	}
}
