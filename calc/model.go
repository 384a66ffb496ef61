package calc

import (
	"fmt"
	"math"
)

// factKind is a kind of fact; every fact of it is one independent variable.
type factKind int

const (
	weighingFact factKind = iota
	readingFact
	waterTempFact
	deliveryFact
	factKinds // how many there are
)

// commonInputs is the number of variables that the whole run shares.
const commonInputs = 9

// variable is one fact that bears on deliveries.
type variable struct {
	kind factKind
	fact int64
}

// share is what a variable contributes to the volume of one delivery: slope ×
// standard uncertainty, mL.
type share struct {
	row            int
	contributionML float64
}

// model is the linear model of one run: y = design·c + e. e is a sum over
// independent variables of variance 1, each times its contribution to every row.
type model struct {
	in       Inputs
	pointsML []float64
	ds       []Delivery
	y        []float64               // V20 − (end − start), mL
	design   [][]float64             // row by point
	vars     []variable              // in order of first appearance
	shares   [][]share               // by variable, rows rising
	common   [][commonInputs]float64 // by row, mL
	slopes   []slopes
	index    map[variable]int
}

func newModel(in Inputs, pointsML []float64, ds []Delivery) (*model, error) {
	if err := in.Check(); err != nil {
		return nil, err
	}
	if len(pointsML) == 0 || len(ds) == 0 {
		return nil, fmt.Errorf("%d points and %d deliveries", len(pointsML), len(ds))
	}
	for i, v := range pointsML {
		if !(v > 0) || i > 0 && !(v > pointsML[i-1]) {
			return nil, fmt.Errorf("the points do not rise from above 0: %v", pointsML)
		}
	}
	m := &model{
		in: in, pointsML: pointsML, ds: ds, y: make([]float64, len(ds)), design: square(len(ds), len(pointsML)),
		common: make([][commonInputs]float64, len(ds)), slopes: make([]slopes, len(ds)), index: map[variable]int{},
	}
	numbers := map[int]bool{}
	for i, d := range ds {
		if numbers[d.Delivery] {
			return nil, fmt.Errorf("delivery %d occurs twice", d.Delivery)
		}
		numbers[d.Delivery] = true
		if err := m.addDelivery(i, d); err != nil {
			return nil, err
		}
	}
	return m, m.checkTouched()
}

// square makes a matrix of zeros in one piece of memory.
func square(rows, columns int) [][]float64 {
	all, m := make([]float64, rows*columns), make([][]float64, rows)
	for i := range m {
		m[i] = all[i*columns : (i+1)*columns : (i+1)*columns]
	}
	return m
}

// addDelivery fills row i.
func (m *model) addDelivery(i int, d Delivery) error {
	for _, u := range [5]float64{d.Before.UMassG, d.After.UMassG, d.Start.UReadingML, d.End.UReadingML, d.Water.UWaterTempC} {
		if !(u >= 0) || math.IsInf(u, 1) {
			return fmt.Errorf("delivery %d: a fact has the uncertainty %g", d.Delivery, u)
		}
	}
	v, slope, err := deliver(m.in, d)
	if err != nil {
		return err
	}
	if err := m.addHat(i, d.End.ReadingML, 1); err != nil {
		return fmt.Errorf("delivery %d: %w", d.Delivery, err)
	}
	if err := m.addHat(i, d.Start.ReadingML, -1); err != nil {
		return fmt.Errorf("delivery %d: %w", d.Delivery, err)
	}
	m.y[i], m.slopes[i], m.common[i] = v.CorrectionML, slope, commonShares(m.in, slope)
	weighingG := slope.mass * or(d.After.UMassG, m.in.UWeighingG)
	m.addShare(i, weighingFact, d.After.Fact, weighingG)
	m.addShare(i, weighingFact, d.Before.Fact, -slope.mass*or(d.Before.UMassG, m.in.UWeighingG))
	m.addShare(i, readingFact, d.End.Fact, -or(d.End.UReadingML, m.in.UReadingML))
	m.addShare(i, readingFact, d.Start.Fact, or(d.Start.UReadingML, m.in.UReadingML))
	m.addShare(i, waterTempFact, d.Water.Fact, slope.waterTemp*or(d.Water.UWaterTempC, m.in.UWaterTempC))
	m.addShare(i, deliveryFact, int64(d.Delivery), m.in.UDeliveryML)
	return nil
}

// or gives a fact's own uncertainty, or the usual one where it has none.
func or(own, usual float64) float64 {
	if own != 0 {
		return own
	}
	return usual
}

// addShare adds a contribution of a fact to row i.
func (m *model) addShare(i int, kind factKind, fact int64, contributionML float64) {
	v := variable{kind, fact}
	k, ok := m.index[v]
	if !ok {
		k = len(m.vars)
		m.index[v] = k
		m.vars, m.shares = append(m.vars, v), append(m.shares, nil)
	}
	if last := len(m.shares[k]) - 1; last >= 0 && m.shares[k][last].row == i {
		m.shares[k][last].contributionML += contributionML
		return
	}
	m.shares[k] = append(m.shares[k], share{i, contributionML})
}

// addHat adds weight times the values of the hat functions at a reading to a row.
func (m *model) addHat(row int, readingML, weight float64) error {
	k, right, err := locate(0, m.pointsML, readingML)
	if err != nil {
		return err
	}
	m.design[row][k] += weight * right
	if k > 0 {
		m.design[row][k-1] += weight * (1 - right)
	}
	return nil
}

// locate finds the interval a reading lies in: between point k−1 (the first mark when
// k is 0) and point k, and the share of the way to point k.
func locate(firstML float64, pointsML []float64, readingML float64) (k int, right float64, err error) {
	last := len(pointsML) - 1
	if !(readingML >= firstML && readingML <= pointsML[last]) {
		return 0, 0, fmt.Errorf("the reading %g mL is %w, %g to %g mL", readingML, ErrOutsideCurve, firstML, pointsML[last])
	}
	left := firstML
	for k < last && readingML > pointsML[k] {
		left = pointsML[k]
		k++
	}
	return k, (readingML - left) / (pointsML[k] - left), nil
}

// commonShares gives slope × standard uncertainty, mL, of what the whole run shares,
// in the order of commonLines.
func commonShares(in Inputs, slope slopes) [commonInputs]float64 {
	return [commonInputs]float64{
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

// checkTouched names a point that no delivery bears on.
func (m *model) checkTouched() error {
	for k, v := range m.pointsML {
		touched := false
		for _, row := range m.design {
			touched = touched || row[k] != 0
		}
		if !touched {
			return fmt.Errorf("no delivery bears on the point %g mL: %w", v, ErrUndetermined)
		}
	}
	return nil
}
