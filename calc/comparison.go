package calc

import (
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"

	"tenthmark/calc/decimal"
)

// enDecimals is how many decimals of an En number decide: 1 exactly comes out as
// 1.00000000000004 in binary arithmetic.
const enDecimals = 4

// EnScore gives En = (x − xRef)/√(U² + Uref²) of ISO 13528 and ISO/IEC 17043, with
// expanded uncertainties.
func EnScore(x, xRef, expanded, expandedRef float64) (float64, error) {
	en := (x - xRef) / math.Hypot(expanded, expandedRef)
	if math.IsNaN(en) || math.IsInf(en, 0) {
		return 0, fmt.Errorf("the En score of %g and %g with U %g and %g is no number", x, xRef, expanded, expandedRef)
	}
	return en, nil
}

// EnSatisfactory says whether |En| ≤ 1, decided at four decimals.
func EnSatisfactory(en float64) bool {
	n, err := decimal.Round(math.Abs(en), enDecimals)
	return err == nil && n.Cmp(decimal.MustParse("1")) <= 0
}

// ComparedPoint is one test point in two calibrations.
type ComparedPoint struct {
	ReadingML    float64 `json:"reading_mL"`
	BeforeML     float64 `json:"before_mL"` // corrections, mL
	AfterML      float64 `json:"after_mL"`
	ChangeML     float64 `json:"change_mL"` // after − before
	UChangeML    float64 `json:"u_change_mL"`
	En           float64 `json:"En"`
	Satisfactory bool    `json:"satisfactory"`
}

// Comparison is how a burette changed from one calibration to another.
type Comparison struct {
	Points     []ComparedPoint `json:"points"`
	Worst      ComparedPoint   `json:"worst"`   // largest |En|
	Chi2       float64         `json:"chi2"`    // of all changes at once, with their covariance
	Chi2Limit  float64         `json:"chi2_95"` // its 95 % point
	Agree      bool            `json:"agree"`   // every |En| ≤ 1 and chi² within its limit
	Indication string          `json:"indication,omitempty"`
}

// Compare sets two calibrations side by side at the points of the second. shared, 0
// to 1, is how much of what each run had in common (thermometer, balance, formulas, see
// Inputs) was the same in both: 0 gives En in its usual form, 1 is for the same
// instruments within their certificates, whose errors then cancel. Chi² takes the
// changes at all points together,
//
//	chi² = dᵀ (R₁ + R₂ + (1 − shared)(K₁ + K₂))⁻¹ d
//
// R the parts of the covariances from single facts, K those shared within a run.
func Compare(before, after *Curve, shared float64) (Comparison, error) {
	if !(shared >= 0 && shared <= 1) {
		return Comparison{}, fmt.Errorf("compare calibrations: a shared part of %g is not between 0 and 1", shared)
	}
	var out Comparison
	n := len(after.Points)
	d, v := mat.NewVecDense(max(n, 1), nil), mat.NewSymDense(max(n, 1), nil)
	out.Agree = n > 0
	for i, b := range after.Points {
		a, err := before.At(b.ReadingML)
		if err != nil {
			return Comparison{}, fmt.Errorf("compare calibrations: %w", err)
		}
		d.SetVec(i, b.CorrectionML-a.CorrectionML)
		for j := range i + 1 {
			one, err := before.covariance(b.ReadingML, after.Points[j].ReadingML, shared)
			if err != nil {
				return Comparison{}, err
			}
			v.SetSym(i, j, one+after.RandomML2[i][j]+(1-shared)*(after.CovarianceML2[i][j]-after.RandomML2[i][j]))
		}
		p, err := comparedPoint(a, b, before, after, shared, v.At(i, i))
		if err != nil {
			return Comparison{}, err
		}
		out.take(p)
	}
	if n == 0 {
		return Comparison{}, errors.New("compare calibrations: the curve has no points")
	}
	return out, out.together(d, v)
}

func (c *Comparison) take(p ComparedPoint) {
	c.Points = append(c.Points, p)
	c.Agree = c.Agree && p.Satisfactory
	if len(c.Points) == 1 || math.Abs(p.En) > math.Abs(c.Worst.En) {
		c.Worst = p
	}
}

func comparedPoint(a, b Point, before, after *Curve, shared, variance float64) (ComparedPoint, error) {
	own := func(c *Curve, p Point) (float64, error) {
		v, err := c.covariance(p.ReadingML, p.ReadingML, shared)
		return p.K * math.Sqrt(max(v, 0)), err
	}
	ua, err := own(before, a)
	if err != nil {
		return ComparedPoint{}, err
	}
	ub, err := own(after, b)
	if err != nil {
		return ComparedPoint{}, err
	}
	en, err := EnScore(b.CorrectionML, a.CorrectionML, ub, ua)
	return ComparedPoint{
		b.ReadingML, a.CorrectionML, b.CorrectionML, b.CorrectionML - a.CorrectionML,
		math.Sqrt(variance), en, EnSatisfactory(en),
	}, err
}

// together fills chi² of all changes and what they look like.
func (c *Comparison) together(d *mat.VecDense, v *mat.SymDense) error {
	var chol mat.Cholesky
	if !chol.Factorize(v) {
		return errors.New("compare calibrations: the covariance of the changes is not positive definite")
	}
	var x mat.VecDense
	if err := chol.SolveVecTo(&x, d); err != nil {
		return fmt.Errorf("compare calibrations: %w", err)
	}
	c.Chi2, c.Chi2Limit = mat.Dot(d, &x), chi2Quantile(0.95, d.Len())
	c.Agree = c.Agree && c.Chi2 <= c.Chi2Limit
	if !c.Agree {
		c.Indication = indication(c.Points)
	}
	return nil
}

// indication names what a change of this shape often comes from (common practice, no
// source).
func indication(points []ComparedPoint) string {
	low, high := math.Inf(1), math.Inf(-1)
	for _, p := range points {
		low, high = min(low, p.ChangeML), max(high, p.ChangeML)
	}
	first, last := points[0], points[len(points)-1]
	sameSign := low > 0 || high < 0
	proportional := last.ChangeML * first.ReadingML / last.ReadingML
	switch {
	case len(points) < 3 || !sameSign:
		return "The points changed in different ways: look at single deliveries before blaming the burette."
	case math.Abs(first.ChangeML-proportional) < math.Abs(first.ChangeML-last.ChangeML):
		return "The change grows with the reading: thermometer, glass expansion entered, cleanliness or attacked glass."
	}
	return "All points moved alike: the tip, the setting of the zero line, or air in the tip."
}

// covariance gives that of C(a) and C(b), mL², with the share of what the run had in
// common taken off, and the bridge at a reading between points.
func (c *Curve) covariance(aML, bML, shared float64) (float64, error) {
	a, err := c.place(aML)
	if err != nil {
		return 0, err
	}
	b, err := c.place(bML)
	if err != nil {
		return 0, err
	}
	first := spot{0, 0, a.lengthML}
	sum := 0.0
	for _, x := range weightsOf(first, a) {
		for _, y := range weightsOf(first, b) {
			if x.weight != 0 && y.weight != 0 {
				whole, random := c.CovarianceML2[x.point][y.point], c.RandomML2[x.point][y.point]
				sum += x.weight * y.weight * (random + (1-shared)*(whole-random))
			}
		}
	}
	// Cov(B(a), B(b)) from the variances of the two and of their difference
	bridge := (c.bridge(first, a) + c.bridge(first, b) - c.bridge(a, b)) / 2
	return sum + bridge, nil
}
