package calc

import (
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// ErrOutsideCurve marks a reading that lies outside the calibrated range. A
// correction is interpolated and never extrapolated.
var ErrOutsideCurve = errors.New("outside the calibrated range")

// BirgeRule is how scatter beyond the facts' own uncertainty is treated.
const BirgeRule = "The part of the covariance that comes from single facts is multiplied by chi²/nu when chi² exceeds the 95 % point of its distribution; otherwise it stands as it is."

// birgeLevel: see BirgeRule.
const birgeLevel = 0.95

// FitCurve solves for the corrections at pointsML by generalised least squares over
// all deliveries, whatever their start, end, replicate and pattern. The model is
//
//	y = A·c + e,  y = V20 − (end − start),  A = hat(end) − hat(start)
//
// with hat functions on the first mark (0 mL, correction 0) and the points. The
// covariance of e follows from the facts: a fact that two deliveries share is one
// variable, and what the whole run shares is one variable each (JCGM 100, 5.2).
//
// pointsML rises and is not empty. A point that no delivery determines, a reading
// below 0 or beyond the last point, and a delivery without water are errors.
func FitCurve(in Inputs, pointsML []float64, ds []Delivery) (*Curve, error) {
	if err := in.Check(); err != nil {
		return nil, fmt.Errorf("fit curve: %w", err)
	}
	s, err := newSystem(in, pointsML, ds)
	if err != nil {
		return nil, fmt.Errorf("fit curve: %w", err)
	}
	fit, err := s.solve(1)
	if err != nil {
		return nil, fmt.Errorf("fit curve: %w", err)
	}
	c := &Curve{Chi2: fit.chi2, Nu: len(ds) - len(pointsML), Birge: 1, in: in}
	if c.Nu > 0 && c.Chi2 > chi2Quantile(birgeLevel, c.Nu) {
		c.Birge = math.Sqrt(c.Chi2 / float64(c.Nu))
		if fit, err = s.solve(c.Birge); err != nil {
			return nil, fmt.Errorf("fit curve: %w", err)
		}
	}
	if err := c.take(s, fit); err != nil {
		return nil, fmt.Errorf("fit curve: %w", err)
	}
	return c, nil
}

// system is the linear model of one run.
type system struct {
	pointsML []float64
	ds       []Delivery
	design   *mat.Dense    // n × p
	y        *mat.VecDense // n
	random   *mat.SymDense // n × n, from single facts
	common   *mat.Dense    // n × 9, slope × uncertainty of what the run shares
}

func newSystem(in Inputs, pointsML []float64, ds []Delivery) (*system, error) {
	n, p := len(ds), len(pointsML)
	if p == 0 || n == 0 {
		return nil, fmt.Errorf("%d points and %d deliveries", p, n)
	}
	for i, v := range pointsML {
		if !(v > 0) || i > 0 && !(v > pointsML[i-1]) {
			return nil, fmt.Errorf("the points do not rise from above 0: %v", pointsML)
		}
	}
	s := &system{
		pointsML: pointsML, ds: ds, design: mat.NewDense(n, p, nil), y: mat.NewVecDense(n, nil),
		random: mat.NewSymDense(n, nil), common: mat.NewDense(n, commonInputs, nil),
	}
	earlier := map[variable][]share{}
	for i, d := range ds {
		if err := s.addDelivery(in, i, d, earlier); err != nil {
			return nil, err
		}
	}
	return s, s.checkDetermined()
}

// addDelivery fills row i of the model. earlier holds what the rows before rest on,
// so that a shared fact becomes a covariance.
func (s *system) addDelivery(in Inputs, i int, d Delivery, earlier map[variable][]share) error {
	v, slope, err := deliver(in, d)
	if err != nil {
		return err
	}
	if err := s.addHat(i, d.End.ReadingML, 1); err != nil {
		return fmt.Errorf("delivery %d: %w", d.Delivery, err)
	}
	if err := s.addHat(i, d.Start.ReadingML, -1); err != nil {
		return fmt.Errorf("delivery %d: %w", d.Delivery, err)
	}
	s.y.SetVec(i, v.CorrectionML)
	for _, r := range randomShares(in, d, slope) {
		earlier[r.variable] = append(earlier[r.variable], share{i, r.contribution})
		for _, other := range earlier[r.variable] {
			s.random.SetSym(other.row, i, s.random.At(other.row, i)+other.contribution*r.contribution)
		}
	}
	s.common.SetRow(i, commonShares(in, slope))
	return nil
}

// addHat adds weight times the values of the hat functions at a reading to a row.
func (s *system) addHat(row int, readingML, weight float64) error {
	k, right, err := locate(0, s.pointsML, readingML)
	if err != nil {
		return err
	}
	s.design.Set(row, k, s.design.At(row, k)+weight*right)
	if k > 0 {
		s.design.Set(row, k-1, s.design.At(row, k-1)+weight*(1-right))
	}
	return nil
}

// locate finds the interval a reading lies in: between point k−1 (the first mark when
// k is 0) and point k, and the share of the way to point k.
func locate(firstML float64, pointsML []float64, readingML float64) (k int, right float64, err error) {
	if !(readingML >= firstML && readingML <= pointsML[len(pointsML)-1]) {
		return 0, 0, fmt.Errorf("the reading %g mL is %w, %g to %g mL", readingML, ErrOutsideCurve, firstML, pointsML[len(pointsML)-1])
	}
	left := firstML
	for k = range pointsML {
		if readingML <= pointsML[k] {
			break
		}
		left = pointsML[k]
	}
	return k, (readingML - left) / (pointsML[k] - left), nil
}

// variable names one random variable: a kind of fact and the fact's number.
type variable struct {
	kind string
	fact int64
}

// share is what a variable contributes to one row: slope × standard uncertainty.
type share struct {
	row          int
	contribution float64
}

// randomShare is one fact's contribution to a delivery.
type randomShare struct {
	variable
	contribution float64
}

// randomShares lists the single facts that a delivery rests on.
func randomShares(in Inputs, d Delivery, slope slopes) [6]randomShare {
	or := func(own, usual float64) float64 {
		if own != 0 {
			return own
		}
		return usual
	}
	return [6]randomShare{
		{variable{"weighing", d.After.Fact}, slope.mass * or(d.After.UMassG, in.UWeighingG)},
		{variable{"weighing", d.Before.Fact}, -slope.mass * or(d.Before.UMassG, in.UWeighingG)},
		{variable{"reading", d.End.Fact}, -or(d.End.UReadingML, in.UReadingML)},
		{variable{"reading", d.Start.Fact}, or(d.Start.UReadingML, in.UReadingML)},
		{variable{"water_temp", d.Water.Fact}, slope.waterTemp * or(d.Water.UWaterTempC, in.UWaterTempC)},
		{variable{"delivery", int64(d.Delivery)}, in.UDeliveryML},
	}
}

// commonInputs is the number of variables that the whole run shares.
const commonInputs = 9

func commonShares(in Inputs, slope slopes) []float64 {
	return []float64{
		slope.waterTemp * in.UThermometerC,
		slope.airTemp * in.UAirTempC,
		slope.pressure * in.UPressureHPa,
		slope.humidity * in.UHumidityPct,
		slope.waterRel * in.UWaterDensityRel,
		slope.airRel * in.UAirDensityRel,
		slope.expansionRel * in.UExpansionRel,
		slope.scale * in.USensitivityRel,
		slope.weightDensity * in.UWeightDensityKgM3,
	}
}

// checkDetermined names a point that no delivery bears on.
func (s *system) checkDetermined() error {
	for k, v := range s.pointsML {
		touched := false
		for i := range s.ds {
			touched = touched || s.design.At(i, k) != 0
		}
		if !touched {
			return fmt.Errorf("no delivery bears on the point %g mL", v)
		}
	}
	return nil
}

// solution is the outcome of one solve.
type solution struct {
	c        *mat.VecDense
	cov      *mat.SymDense
	gain     *mat.Dense // c = gain · y, p × n
	residual *mat.VecDense
	chi2     float64
}

// solve does the least squares with the random part scaled by birge².
func (s *system) solve(birge float64) (*solution, error) {
	n, p := s.design.Dims()
	v := mat.NewSymDense(n, nil)
	v.ScaleSym(birge*birge, s.random)
	v.SymRankK(v, 1, s.common)
	var cv mat.Cholesky
	if !cv.Factorize(v) {
		return nil, errors.New("the covariance of the deliveries is not positive definite")
	}
	var va, normal mat.Dense
	if err := cv.SolveTo(&va, s.design); err != nil {
		return nil, fmt.Errorf("weights: %w", err)
	}
	normal.Mul(s.design.T(), &va)
	var cn mat.Cholesky
	if !cn.Factorize(symmetric(&normal)) {
		return nil, errors.New("the deliveries do not determine every point")
	}
	out := &solution{c: mat.NewVecDense(p, nil), cov: mat.NewSymDense(p, nil), gain: &mat.Dense{}, residual: mat.NewVecDense(n, nil)}
	if err := cn.SolveTo(out.gain, va.T()); err != nil {
		return nil, fmt.Errorf("normal equations: %w", err)
	}
	if err := cn.InverseTo(out.cov); err != nil {
		return nil, fmt.Errorf("covariance: %w", err)
	}
	out.c.MulVec(out.gain, s.y)
	out.residual.MulVec(s.design, out.c)
	out.residual.SubVec(s.y, out.residual)
	var weighted mat.VecDense
	if err := cv.SolveVecTo(&weighted, out.residual); err != nil {
		return nil, fmt.Errorf("residuals: %w", err)
	}
	out.chi2 = mat.Dot(out.residual, &weighted)
	return out, nil
}

// symmetric copies the mean of both triangles.
func symmetric(m *mat.Dense) *mat.SymDense {
	n, _ := m.Dims()
	s := mat.NewSymDense(n, nil)
	for i := range n {
		for j := i; j < n; j++ {
			s.SetSym(i, j, (m.At(i, j)+m.At(j, i))/2)
		}
	}
	return s
}

// take fills the curve from a solution.
func (c *Curve) take(s *system, fit *solution) error {
	var gr, random mat.Dense
	gr.Mul(fit.gain, s.random)
	random.Mul(&gr, fit.gain.T())
	p := len(s.pointsML)
	c.CovarianceML2, c.random = make([][]float64, p), make([][]float64, p)
	for i := range p {
		c.CovarianceML2[i], c.random[i] = make([]float64, p), make([]float64, p)
		for j := range p {
			c.CovarianceML2[i][j] = fit.cov.At(i, j)
			c.random[i][j] = random.At(i, j) * c.Birge * c.Birge
		}
	}
	for i, v := range s.pointsML {
		point, err := c.expand(v, fit.c.AtVec(i), c.CovarianceML2[i][i], c.random[i][i], 0)
		if err != nil {
			return err
		}
		c.Points = append(c.Points, point)
	}
	for i, d := range s.ds {
		c.Residuals = append(c.Residuals, Residual{d.Delivery, fit.residual.AtVec(i)})
	}
	c.estimateBridge()
	return nil
}

// estimateBridge: a curve that wanders like Brownian motion has increments of
// variance rate × length, so each measured increment is one degree of freedom.
func (c *Curve) estimateBridge() {
	left := Point{ReadingML: c.FirstML}
	for _, p := range c.Points {
		step := p.CorrectionML - left.CorrectionML
		c.BridgeRateML2PerML += step * step / (p.ReadingML - left.ReadingML) / float64(len(c.Points))
		left = p
	}
	c.BridgeNu = DegreesOfFreedom(len(c.Points))
}

// expand makes a Point from a correction and the parts of its variance, mL²: the
// whole covariance, its random part, and the bridge between points.
func (c *Curve) expand(readingML, correctionML, variance, random, bridge float64) (Point, error) {
	total := variance + bridge
	p := Point{ReadingML: readingML, CorrectionML: correctionML, UML: math.Sqrt(total), NuEff: DegreesOfFreedom(math.Inf(1))}
	sum := bridge * bridge / float64(c.BridgeNu)
	if c.Birge > 1 {
		sum += random * random / float64(c.Nu)
	}
	if bridge == 0 && c.Birge == 1 {
		sum = 0
	}
	if sum > 0 {
		p.NuEff = DegreesOfFreedom(total * total / sum)
	}
	var err error
	if p.K, err = CoverageFactor(c.in.CoverageProbability, float64(p.NuEff)); err != nil {
		return Point{}, fmt.Errorf("at %g mL: %w", readingML, err)
	}
	p.ExpandedML = p.K * p.UML
	return p, nil
}

// readingsML gives the curve's points as readings.
func (c *Curve) readingsML() []float64 {
	all := make([]float64, len(c.Points))
	for i, p := range c.Points {
		all[i] = p.ReadingML
	}
	return all
}

// At gives the correction at a reading in mL, interpolated linearly, with the
// uncertainty of the interpolation. A reading outside the calibrated range is
// ErrOutsideCurve.
func (c *Curve) At(readingML float64) (Point, error) { return c.Between(c.FirstML, readingML) }

// Between gives C(b) − C(a), the correction of the volume delivered from reading a to
// reading b, with its uncertainty from the full covariance. ReadingML of the result
// is b.
func (c *Curve) Between(aML, bML float64) (Point, error) {
	weights := make([]float64, len(c.Points))
	points := c.readingsML()
	for _, end := range []struct{ v, sign float64 }{{aML, -1}, {bML, 1}} {
		k, right, err := locate(c.FirstML, points, end.v)
		if err != nil {
			return Point{}, err
		}
		weights[k] += end.sign * right
		if k > 0 {
			weights[k-1] += end.sign * (1 - right)
		}
	}
	correction := 0.0
	for i, w := range weights {
		correction += w * c.Points[i].CorrectionML
	}
	return c.expand(bML, correction, quadratic(c.CovarianceML2, weights), quadratic(c.random, weights), c.bridgeBetween(aML, bML))
}

func quadratic(m [][]float64, w []float64) float64 {
	sum := 0.0
	for i := range m {
		for j := range m[i] {
			sum += w[i] * m[i][j] * w[j]
		}
	}
	return sum
}

// bridgeBetween gives the variance, mL², that linear interpolation adds to C(b) − C(a):
// between two knots the curve is a Brownian bridge, with covariance
// rate·(min − left)(right − max)/(right − left) inside one interval and none between
// two intervals.
func (c *Curve) bridgeBetween(aML, bML float64) float64 {
	points := c.readingsML()
	ka, ra, _ := locate(c.FirstML, points, aML)
	kb, rb, _ := locate(c.FirstML, points, bML)
	length := func(k int) float64 {
		if k == 0 {
			return points[0] - c.FirstML
		}
		return points[k] - points[k-1]
	}
	cov := func(k int, x, y float64) float64 {
		return c.BridgeRateML2PerML * length(k) * min(x, y) * (1 - max(x, y))
	}
	sum := cov(ka, ra, ra) + cov(kb, rb, rb)
	if ka == kb {
		sum -= 2 * cov(ka, ra, rb)
	}
	return max(sum, 0)
}
