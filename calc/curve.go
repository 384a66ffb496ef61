package calc

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"
)

// ErrOutsideCurve marks a reading that lies outside the calibrated range. A
// correction is interpolated and never extrapolated.
var ErrOutsideCurve = errors.New("outside the calibrated range")

// BirgeRule is how scatter beyond the facts' own uncertainty is treated. It keeps the
// coverage when the stated uncertainties are right. Few degrees of freedom cannot show
// that they are too small: with two replicates at five points and 1.5 times the stated
// scatter, the 95 % interval holds the truth in some 89 % of runs; with five replicates
// in 94 %. So state the reading uncertainty of the operator who reads.
const BirgeRule = "If chi² of the residuals exceeds the 95 % point of its distribution, the part of the covariance that comes from single facts is multiplied by chi²/nu and has nu degrees of freedom; otherwise it stands as the facts give it."

// birgeLevel: see BirgeRule.
const birgeLevel = 0.95

// Curve is C(v), the correction from the first mark to the reading v: piecewise
// linear on the test points, zero at the first mark. It travels as JSON and can be
// used again without its facts.
type Curve struct {
	FirstML            float64          `json:"first_mL"` // the first mark, where the correction is 0, mL
	Points             []Point          `json:"points"`   // rising
	CovarianceML2      [][]float64      `json:"covariance_mL2"`
	RandomML2          [][]float64      `json:"random_covariance_mL2"` // its part from single facts
	Chi2               float64          `json:"chi2"`                  // of the residuals, before the Birge ratio
	Nu                 int              `json:"nu"`                    // deliveries less points
	Chi2Limit          float64          `json:"chi2_limit"`            // 95 % point; 0 when nu is 0
	Birge              float64          `json:"birge"`                 // 1 unless BirgeRule applied
	BridgeRateML2PerML float64          `json:"bridge_rate_mL2_per_mL"`
	BridgeNu           DegreesOfFreedom `json:"bridge_nu"`
	Residuals          []Residual       `json:"residuals"`
	Budgets            [][]BudgetLine   `json:"budgets,omitempty"` // by point, see Budget
	Inputs             Inputs           `json:"inputs"`

	factors *factorTable
}

// UnmarshalJSON reads a curve and refuses one that could not have been written.
func (c *Curve) UnmarshalJSON(b []byte) error {
	type plain Curve
	if err := json.Unmarshal(b, (*plain)(c)); err != nil {
		return fmt.Errorf("read curve: %w", err)
	}
	n := len(c.Points)
	if n == 0 || len(c.CovarianceML2) != n || len(c.RandomML2) != n || !(c.BridgeNu > 0) {
		return errors.New("read curve: points, covariance and degrees of freedom do not fit together")
	}
	for i := range n {
		if len(c.CovarianceML2[i]) != n || len(c.RandomML2[i]) != n {
			return errors.New("read curve: the covariance is not square")
		}
	}
	c.factors = &factorTable{p: c.Inputs.CoverageProbability}
	return nil
}

// FitCurve solves for the corrections at pointsML by generalised least squares over
// all deliveries, whatever their start, end, replicate and pattern. The model is
//
//	y = A·c + e,  y = V20 − (end − start),  A = hat(end) − hat(start)
//
// with hat functions on the first mark (0 mL, correction 0) and the points. The
// covariance of e follows from the facts: a fact that two deliveries share is one
// variable, and what the whole run shares is one variable each (JCGM 100:2008, 5.2).
// That the row of A depends on the readings too is of second order and neglected.
// Scatter beyond the facts is treated by BirgeRule.
//
// pointsML rises and is not empty. A point that no delivery determines
// (ErrUndetermined), a reading below 0 or beyond the last point (ErrOutsideCurve), a
// delivery without water (ErrNoWater) and values outside a formula's range
// (*OutsideRange) are errors.
func FitCurve(in Inputs, pointsML []float64, ds []Delivery) (*Curve, error) {
	c, _, err := fit(in, pointsML, ds)
	if err != nil {
		return nil, fmt.Errorf("fit curve: %w", err)
	}
	return c, nil
}

// fit gives the curve together with the solution it came from.
func fit(in Inputs, pointsML []float64, ds []Delivery) (*Curve, *influence, error) {
	m, err := newModel(in, pointsML, ds)
	if err != nil {
		return nil, nil, err
	}
	s, err := m.solve(1)
	if err != nil {
		return nil, nil, err
	}
	c := &Curve{
		Chi2: s.chi2, Nu: len(ds) - len(pointsML), Birge: 1, Inputs: in,
		factors: &factorTable{p: in.CoverageProbability},
	}
	if c.Nu > 0 {
		c.Chi2Limit = chi2Quantile(birgeLevel, c.Nu)
		if c.Chi2 > c.Chi2Limit {
			c.Birge = math.Sqrt(c.Chi2 / float64(c.Nu))
			if s, err = m.solve(c.Birge); err != nil {
				return nil, nil, err
			}
		}
	}
	f, err := s.influence()
	if err != nil {
		return nil, nil, err
	}
	return c, f, c.take(s, f)
}

// take fills the curve from a solution.
func (c *Curve) take(s *solution, f *influence) error {
	p := len(s.c)
	shared := f.commonContributions(s.m)
	c.CovarianceML2, c.RandomML2 = square(p, p), square(p, p)
	for i := range p {
		for j := range p {
			sum := 0.0
			for k := range commonInputs {
				sum += shared[i][k] * shared[j][k]
			}
			c.CovarianceML2[i][j] = s.cov.At(i, j)
			c.RandomML2[i][j] = s.cov.At(i, j) - sum
		}
		c.RandomML2[i][i] = max(c.RandomML2[i][i], 0)
	}
	c.Points = make([]Point, p)
	for i, v := range s.m.pointsML {
		c.Points[i] = Point{ReadingML: v, CorrectionML: s.c[i]}
	}
	c.estimateBridge()
	for i, v := range s.m.pointsML {
		var err error
		if c.Points[i], err = c.expand(v, s.c[i], c.CovarianceML2[i][i], c.RandomML2[i][i], 0); err != nil {
			return err
		}
	}
	c.takeResiduals(s, f)
	c.takeBudgets(s.m, f, shared)
	return nil
}

// commonContributions gives what each variable that the whole run shares contributes
// to each point, mL.
func (f *influence) commonContributions(m *model) [][commonInputs]float64 {
	out := make([][commonInputs]float64, len(m.pointsML))
	for i := range out {
		for row, g := range f.gain.RawRowView(i) {
			for k, contributionML := range m.common[row] {
				out[i][k] += g * contributionML
			}
		}
	}
	return out
}

// expand makes a Point from a correction and the parts of its variance, mL²: the
// whole covariance, its random part, and the bridge between points. Degrees of
// freedom by Welch and Satterthwaite (JCGM 100:2008, G.2b): nu for the random part
// when the Birge ratio scaled it, those of the bridge for the bridge, infinite for the
// rest.
func (c *Curve) expand(readingML, correctionML, variance, random, bridge float64) (Point, error) {
	total := variance + bridge
	p := Point{ReadingML: readingML, CorrectionML: correctionML, UML: math.Sqrt(total), NuEff: DegreesOfFreedom(math.Inf(1))}
	sum := 0.0
	if bridge > 0 {
		sum += bridge * bridge / float64(c.BridgeNu)
	}
	if c.Birge > 1 {
		sum += random * random / float64(c.Nu)
	}
	if sum > 0 {
		p.NuEff = DegreesOfFreedom(total * total / sum)
	}
	var err error
	if p.K, err = c.factor(float64(p.NuEff)); err != nil {
		return Point{}, fmt.Errorf("at %g mL: %w", readingML, err)
	}
	p.ExpandedML = p.K * p.UML
	return p, nil
}

// factor gives the coverage factor for degrees of freedom.
func (c *Curve) factor(nu float64) (float64, error) {
	if c.factors == nil {
		return CoverageFactor(c.Inputs.CoverageProbability, nu)
	}
	return c.factors.factor(nu)
}

// readingsML gives the curve's points as readings.
func (c *Curve) readingsML() []float64 {
	all := make([]float64, len(c.Points))
	for i, p := range c.Points {
		all[i] = p.ReadingML
	}
	return all
}
