package calc

import (
	"fmt"
	"math"

	"tenthmark/calc/decimal"
)

// Names of the decision rules.
const (
	RuleSimple    = "simple"     // |error| ≤ MPE, no guard band
	RuleGuarded   = "guarded"    // |error| ≤ MPE − w
	RuleNonBinary = "non-binary" // w on both sides of the limit, four answers
)

// Verdicts, best first. The two in the middle exist with the non-binary rule alone.
const (
	Meets           = "meets"
	ConditionalPass = "conditional pass"
	ConditionalFail = "conditional fail"
	DoesNotMeet     = "does not meet"
)

// verdicts by rank.
var verdicts = [...]string{Meets, ConditionalPass, ConditionalFail, DoesNotMeet}

// Rule is a decision rule, agreed before the work. The zero Rule is simple
// acceptance.
type Rule struct {
	Name     string  // RuleSimple, RuleGuarded or RuleNonBinary
	R        float64 // guard band w = R·U, 0 < R ≤ 3; 0 means 1
	Decimals int     // of a mL, to which both sides are rounded before they are compared; 0: four, and five for an MPE below 0.01 mL
}

// JudgedPoint is one test point with its verdict.
type JudgedPoint struct {
	Point
	PConform float64 `json:"p_conform"`
	Verdict  string  `json:"verdict"`
}

// JudgedPair is the difference between the corrections at two marks.
type JudgedPair struct {
	FromML       float64          `json:"from_mL"`
	ToML         float64          `json:"to_mL"`
	DifferenceML float64          `json:"difference_mL"` // C(to) − C(from)
	UML          float64          `json:"u_mL"`          // from the curve's covariance
	NuEff        DegreesOfFreedom `json:"nu_eff"`
	K            float64          `json:"k"`
	ExpandedML   float64          `json:"U_mL"`
	PConform     float64          `json:"p_conform"`
	Verdict      string           `json:"verdict"`
}

// Conformity is whether a curve keeps its class: the limit at every test point, and
// for the difference between any two of the test points and the first mark.
type Conformity struct {
	Standard    string        `json:"standard"`
	Class       string        `json:"class"`
	MPEML       float64       `json:"mpe_mL"`
	LimitStatus LimitStatus   `json:"limit_status,omitempty"` // how far the limit itself was checked
	LimitNote   string        `json:"limit_note,omitempty"`
	CapacityML  float64       `json:"capacity_mL"` // nominal; 0: not known
	Points      []JudgedPoint `json:"points"`
	WorstPoint  JudgedPoint   `json:"worst_point"` // the one nearest to, or furthest beyond, its acceptance limit
	WorstPair   JudgedPair    `json:"worst_pair"`
	SpanML      float64       `json:"span_mL"` // largest less smallest correction, with 0 at the first mark
	Rule        string        `json:"rule"`
	GuardR      float64       `json:"guard_r"`  // w = GuardR·U
	Decimals    int           `json:"decimals"` // of a mL, at which it was decided
	Verdict     string        `json:"verdict"`  // the worst of all
	PConform    float64       `json:"p_conform"`
	FalseKind   string        `json:"false_kind"`         // "acceptance" or "rejection": how the verdict can be wrong
	PFalse      float64       `json:"p_false"`            // and the probability that it is
	LargestUML  float64       `json:"largest_U_mL"`       // of the test points
	UWithin3rd  bool          `json:"U_within_third_MPE"` // JCGM 106:2012 8.2.3
}

// Assess judges a curve against a limit by a decision rule.
//
// The limit holds at every test point and between any two of the test points and the
// first mark, whose correction is 0 by definition: errors that keep ± MPE point by
// point can still differ by more than the MPE. Guard bands use the U of the very value
// that is judged, for a pair from the covariance of the curve. Values on a boundary
// get the better verdict; both sides are rounded to Rule.Decimals and compared as
// decimals, because 0.05 − 0.012 is no exact binary number.
//
// PConform is the probability that the burette keeps the limit at all points and
// between all pairs at once (see spanProbability); it is normal, or t with the fewest
// degrees of freedom that any point or pair has. At one point or pair it is that of
// JCGM 106:2012 7.4.
func Assess(c *Curve, mpe MPE, rule Rule) (Conformity, error) {
	j, err := newJudge(mpe, rule)
	if err != nil {
		return Conformity{}, err
	}
	if len(c.Points) == 0 {
		return Conformity{}, fmt.Errorf("conformity: the curve has no points")
	}
	marks := append([]float64{c.FirstML}, c.readingsML()...)
	for i, b := range marks {
		for _, a := range marks[:i] {
			if err := j.pair(c, a, b); err != nil {
				return Conformity{}, fmt.Errorf("conformity, %g to %g mL: %w", a, b, err)
			}
		}
	}
	return j.conclude(c)
}

// judge collects what Assess finds.
type judge struct {
	mpe       MPE
	rule      Rule
	out       Conformity
	rank      int // of the worst verdict
	pointNear float64
	pairNear  float64
	nu        float64 // the fewest degrees of freedom
}

func newJudge(mpe MPE, rule Rule) (*judge, error) {
	if !(mpe.LimitML > 0) || math.IsInf(mpe.LimitML, 1) {
		return nil, fmt.Errorf("conformity: a limit of %g mL", mpe.LimitML)
	}
	switch rule.Name {
	case RuleSimple, "":
		rule.Name, rule.R = RuleSimple, 0
	case RuleGuarded, RuleNonBinary:
		if rule.R == 0 {
			rule.R = 1
		}
	default:
		return nil, &Refusal{
			"rule-unknown", fmt.Sprintf("There is no decision rule %q.", rule.Name),
			"The rules are simple, guarded and non-binary.",
		}
	}
	if !(rule.R >= 0 && rule.R <= 3) || rule.Decimals < 0 || rule.Decimals > 9 {
		return nil, &Refusal{
			"rule-unusable", fmt.Sprintf("A guard band of %g U, decided at %d decimals, makes no sense.", rule.R, rule.Decimals),
			"The factor is above 0 and at most 3, the decimals 1 to 9.",
		}
	}
	if rule.Decimals == 0 {
		rule.Decimals = 4
		if mpe.LimitML < 0.01 {
			rule.Decimals = 5
		}
	}
	return &judge{mpe: mpe, rule: rule, pointNear: math.Inf(-1), pairNear: math.Inf(-1), nu: math.Inf(1)}, nil
}

// pair judges C(b) − C(a); with a the first mark, b is a test point.
func (j *judge) pair(c *Curve, a, b float64) error {
	p, err := c.Between(a, b)
	if err != nil {
		return err
	}
	rank, err := j.rule.judge(p.CorrectionML, p.ExpandedML, j.mpe.LimitML)
	if err != nil {
		return err
	}
	prob := 1.0 // exactly known
	if p.UML > 0 {
		if prob, err = ConformanceProbability(p.CorrectionML, p.UML, float64(p.NuEff), Within(j.mpe.LimitML)); err != nil {
			return err
		}
	} else if math.Abs(p.CorrectionML) > j.mpe.LimitML {
		prob = 0
	}
	j.rank, j.nu = max(j.rank, rank), min(j.nu, float64(p.NuEff))
	near := math.Abs(p.CorrectionML) + j.rule.R*p.ExpandedML
	if near > j.pairNear {
		j.pairNear = near
		j.out.WorstPair = JudgedPair{a, b, p.CorrectionML, p.UML, p.NuEff, p.K, p.ExpandedML, prob, verdicts[rank]}
	}
	if a == c.FirstML {
		j.point(JudgedPoint{p, prob, verdicts[rank]}, near)
	}
	return nil
}

func (j *judge) point(p JudgedPoint, near float64) {
	j.out.Points = append(j.out.Points, p)
	j.out.LargestUML = max(j.out.LargestUML, p.ExpandedML)
	if near > j.pointNear {
		j.pointNear, j.out.WorstPoint = near, p
	}
}

func (j *judge) conclude(c *Curve) (Conformity, error) {
	out := j.out
	out.Standard, out.Class, out.MPEML = j.mpe.Standard, j.mpe.Class, j.mpe.LimitML
	out.CapacityML = j.mpe.CapacityML
	out.LimitStatus, out.LimitNote = j.mpe.Status, j.mpe.Note
	out.Rule, out.GuardR, out.Decimals = j.rule.Name, j.rule.R, j.rule.Decimals
	out.Verdict = verdicts[j.rank]
	lo, hi, mean := 0.0, 0.0, make([]float64, len(c.Points))
	for i, p := range c.Points {
		mean[i] = p.CorrectionML
		lo, hi = min(lo, p.CorrectionML), max(hi, p.CorrectionML)
	}
	out.SpanML = hi - lo
	third, err := j.rule.atMost(3*out.LargestUML, j.mpe.LimitML)
	if err != nil {
		return Conformity{}, fmt.Errorf("conformity: %w", err)
	}
	out.UWithin3rd = third
	if out.PConform, _, err = spanProbability(mean, c.CovarianceML2, j.nu, j.mpe.LimitML); err != nil {
		return Conformity{}, fmt.Errorf("conformity: %w", err)
	}
	out.FalseKind, out.PFalse = "rejection", out.PConform
	if j.rank <= 1 {
		out.FalseKind, out.PFalse = "acceptance", 1-out.PConform
	}
	return out, nil
}

// judge gives the rank of the verdict on one value: ILAC-G8:09/2019 4.2.1 to 4.2.3
// with acceptance limit AL = TL − w, w = R·U.
func (r Rule) judge(value, expanded, limit float64) (int, error) {
	zones := []float64{limit} // upper ends of the verdicts' zones, best first
	ranks := []int{0, 3}
	w := r.R * expanded
	switch r.Name {
	case RuleGuarded:
		zones = []float64{limit - w}
	case RuleNonBinary:
		zones, ranks = []float64{limit - w, limit, limit + w}, []int{0, 1, 2, 3}
	}
	for i, end := range zones {
		within, err := r.atMost(math.Abs(value), end)
		if err != nil {
			return 0, err
		}
		if within {
			return ranks[i], nil
		}
	}
	return ranks[len(zones)], nil
}

// atMost compares after rounding to r.Decimals; equal counts as within.
func (r Rule) atMost(value, end float64) (bool, error) {
	a, err := decimal.Round(value, r.Decimals)
	if err != nil {
		return false, err
	}
	b, err := decimal.Round(end, r.Decimals)
	if err != nil {
		return false, err
	}
	return a.Cmp(b) <= 0, nil
}
