package calc

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Rule is a decision rule by its name: simple, guarded or non-binary.
type Rule struct {
	Name string `json:"rule"`
}

// WorstPair is the largest correction between two points.
type WorstPair struct {
	FromML       float64 `json:"from_mL"`
	ToML         float64 `json:"to_mL"`
	DifferenceML float64 `json:"difference_mL"`
	ExpandedML   float64 `json:"U_mL"`
}

// Conformity is whether a curve keeps its class.
type Conformity struct {
	Standard   string    `json:"standard"`
	Class      string    `json:"class"`
	MPEML      float64   `json:"mpe_mL"`
	WorstPoint Point     `json:"worst_point"`
	WorstPair  WorstPair `json:"worst_pair"`
	Rule       string    `json:"rule"`
	Verdict    string    `json:"verdict"`
	PConform   float64   `json:"p_conform"`
}

// Assess judges every point and every pair of points against the limit.
func Assess(c *Curve, mpe MPE, rule Rule) (Conformity, error) {
	out := Conformity{Standard: mpe.Standard, Class: mpe.Class, MPEML: mpe.LimitML, Rule: rule.Name, Verdict: "does not meet"}
	marks := append([]float64{c.FirstML}, c.readingsML()...)
	for j, b := range marks {
		for _, a := range marks[:j] {
			p, err := c.Between(a, b)
			if err != nil {
				return Conformity{}, err
			}
			if a == c.FirstML && math.Abs(p.CorrectionML) >= math.Abs(out.WorstPoint.CorrectionML) {
				out.WorstPoint = p
			}
			if math.Abs(p.CorrectionML) >= math.Abs(out.WorstPair.DifferenceML) {
				out.WorstPair = WorstPair{a, b, p.CorrectionML, p.ExpandedML}
				n := distuv.Normal{Mu: p.CorrectionML, Sigma: p.UML}
				out.PConform = n.CDF(mpe.LimitML) - n.CDF(-mpe.LimitML)
			}
		}
	}
	guard := 0.0
	if rule.Name == "guarded" {
		guard = out.WorstPair.ExpandedML
	}
	if math.Abs(out.WorstPair.DifferenceML) <= mpe.LimitML-guard {
		out.Verdict = "meets"
	}
	return out, nil
}
