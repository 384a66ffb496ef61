package calc

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// ChartConstants are the factors of control charts for groups of n values from a normal
// process: σ = R̄/d2 = s̄/c4; limits of the mean x̄ ± A2·R̄ or x̄ ± A3·s̄, of the range D3·R̄ and
// D4·R̄, of the standard deviation B3·s̄ and B4·s̄ (ISO 7870-2, three sigma).
type ChartConstants struct {
	N                              int
	C4, D2, SigmaRange             float64 // SigmaRange is d3, the deviation of the range in units of σ
	A2, A3, D3Low, D4Up, B3Low, B4 float64
}

// ControlConstants computes the factors for groups of n values, 2 ≤ n ≤ 100, from the
// distributions of range and standard deviation of normal values.
func ControlConstants(n int) (ChartConstants, error) {
	if n < 2 || n > 100 {
		return ChartConstants{}, fmt.Errorf("control chart: groups of %d values", n)
	}
	m := float64(n)
	lgA, _ := math.Lgamma(m / 2)
	lgB, _ := math.Lgamma((m - 1) / 2)
	c := ChartConstants{N: n, C4: math.Sqrt(2/(m-1)) * math.Exp(lgA-lgB)}
	c.D2 = integral(func(w float64) float64 { return 1 - rangeCDF(n, w) }, 0, rangeEnd)
	square := 2 * integral(func(w float64) float64 { return w * (1 - rangeCDF(n, w)) }, 0, rangeEnd)
	c.SigmaRange = math.Sqrt(square - c.D2*c.D2)
	c.A2, c.A3 = 3/(c.D2*math.Sqrt(m)), 3/(c.C4*math.Sqrt(m))
	c.D3Low, c.D4Up = max(0, 1-3*c.SigmaRange/c.D2), 1+3*c.SigmaRange/c.D2
	spread := 3 * math.Sqrt(1-c.C4*c.C4) / c.C4
	c.B3Low, c.B4 = max(0, 1-spread), 1+spread
	return c, nil
}

// rangeEnd is where the range of up to 100 standard normal values has certainly ended.
const rangeEnd = 14

// rangeCDF is the distribution of the range of n standard normal values,
// n ∫ φ(x)·[Φ(x + w) − Φ(x)]ⁿ⁻¹ dx.
func rangeCDF(n int, w float64) float64 {
	const panels = 24
	sum, from, width := 0.0, -8.5, 17.0/panels
	for i := range panels {
		left := from + float64(i)*width
		for k, node := range rangeNodes {
			x := left + width*(1+node)/2
			p := distuv.UnitNormal.CDF(x+w) - distuv.UnitNormal.CDF(x)
			sum += rangeWeights[k] * width / 2 * distuv.UnitNormal.Prob(x) * math.Pow(p, float64(n-1))
		}
	}
	return min(float64(n)*sum, 1)
}

// Nodes and weights of the Gauss–Legendre rule of order 5.
var (
	rangeNodes   = [5]float64{-0.9061798459386640, -0.5384693101056831, 0, 0.5384693101056831, 0.9061798459386640}
	rangeWeights = [5]float64{0.2369268850561891, 0.4786286704993665, 0.5688888888888889, 0.4786286704993665, 0.2369268850561891}
)

// CriticalRangeFactor gives f: the range of n values of standard deviation σ exceeds
// f·σ by chance with probability 1 − p (ISO 5725-6, critical range). 2 ≤ n ≤ 100.
func CriticalRangeFactor(n int, p float64) (float64, error) {
	if n < 2 || n > 100 || !(p > 0 && p < 1) {
		return 0, fmt.Errorf("critical range: %d values, probability %g", n, p)
	}
	low, high := 0.0, float64(rangeEnd)
	for range 60 {
		mid := (low + high) / 2
		if rangeCDF(n, mid) < p {
			low = mid
		} else {
			high = mid
		}
	}
	return (low + high) / 2, nil
}

// RangeCheck is whether replicates lie closer together than chance allows.
type RangeCheck struct {
	Range  float64 // largest less smallest
	Warn   float64 // exceeded by chance in 5 % of sets
	Repeat float64 // exceeded by chance in 1 % of sets
}

// Warned and Failed say whether the range exceeds the limits.
func (r RangeCheck) Warned() bool { return r.Range > r.Warn }

// Failed says that the set should be repeated. Nothing is dropped.
func (r RangeCheck) Failed() bool { return r.Range > r.Repeat }

// CheckRange compares the range of replicates with what their repeatability standard
// deviation allows by chance (ISO 5725-6).
func CheckRange(values []float64, sigma float64) (RangeCheck, error) {
	if !(sigma > 0) {
		return RangeCheck{}, fmt.Errorf("critical range: a repeatability of %g", sigma)
	}
	warn, err := CriticalRangeFactor(len(values), 0.95)
	if err != nil {
		return RangeCheck{}, err
	}
	again, err := CriticalRangeFactor(len(values), 0.99)
	if err != nil {
		return RangeCheck{}, err
	}
	r := RangeCheck{slices.Max(values) - slices.Min(values), warn * sigma, again * sigma}
	if math.IsNaN(r.Range) || math.IsInf(r.Range, 0) {
		return RangeCheck{}, fmt.Errorf("critical range: a value is not finite")
	}
	return r, nil
}

// ControlLimits are the lines of a chart: centre, warning at 2 and action at 3 standard
// deviations.
type ControlLimits struct {
	N               int // values the lines are drawn from
	Centre, Sigma   float64
	WarnLow, WarnUp float64
	ActLow, ActUp   float64
	Provisional     bool // fewer than EnoughForChart values
}

// EnoughForChart is from how many values on control limits are worth acting on
// (common practice: 7 to 12 to begin with, better 25 to 30; no source).
const EnoughForChart = 7

// IndividualLimits draws the chart of single values, one a calibration, in their order
// in time. σ is the mean moving range over d2 of two, so that a slow drift does not
// hide itself. At least 3 values.
func IndividualLimits(values []float64) (ControlLimits, error) {
	if len(values) < 3 {
		return ControlLimits{}, fmt.Errorf("control chart: %d values are too few, at least 3", len(values))
	}
	two, err := ControlConstants(2)
	if err != nil {
		return ControlLimits{}, err
	}
	moving := 0.0
	for i := 1; i < len(values); i++ {
		moving += math.Abs(values[i]-values[i-1]) / float64(len(values)-1)
	}
	return limitsAround(stat.Mean(values, nil), moving/two.D2, len(values))
}

// MeanLimits draws the chart of the means of groups of n from the grand mean and the
// mean range of the groups: centre ± A2·R̄.
func MeanLimits(grandMean, meanRange float64, n, groups int) (ControlLimits, error) {
	c, err := ControlConstants(n)
	if err != nil {
		return ControlLimits{}, err
	}
	return limitsAround(grandMean, meanRange/c.D2/math.Sqrt(float64(n)), groups)
}

func limitsAround(centre, sigma float64, n int) (ControlLimits, error) {
	if math.IsNaN(centre+sigma) || math.IsInf(centre+sigma, 0) {
		return ControlLimits{}, fmt.Errorf("control chart: a value is not finite")
	}
	return ControlLimits{
		N: n, Centre: centre, Sigma: sigma, Provisional: n < EnoughForChart,
		WarnLow: centre - 2*sigma, WarnUp: centre + 2*sigma, ActLow: centre - 3*sigma, ActUp: centre + 3*sigma,
	}, nil
}
