package calc

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/integrate/quad"
	"gonum.org/v1/gonum/stat/distuv"
)

// Interval is a tolerance or acceptance interval. An open side is infinite.
type Interval struct{ Low, Up float64 }

// Within is the interval of ± limit around zero.
func Within(limit float64) Interval { return Interval{-limit, limit} }

// ConformanceProbability gives the probability that a quantity measured as y with
// standard uncertainty u lies in the tolerance interval,
//
//	p = F((up − y)/u) − F((low − y)/u)
//
// JCGM 106:2012 7.4. F is the normal distribution, or Student's t when nu, the
// degrees of freedom of u, is finite (as in its 8.3.3, example 2). u is above 0.
func ConformanceProbability(y, u, nu float64, tolerance Interval) (float64, error) {
	if !(u > 0) || !(nu >= 1) || !(tolerance.Low < tolerance.Up) || math.IsNaN(y) {
		return 0, fmt.Errorf("conformance probability: y %g, u %g, nu %g, tolerance %g to %g", y, u, nu, tolerance.Low, tolerance.Up)
	}
	return between((tolerance.Low-y)/u, (tolerance.Up-y)/u, nu), nil
}

// between gives the probability that a standardised deviate lies between a and b,
// counted from the nearer tail so that small probabilities keep their digits.
func between(a, b, nu float64) float64 {
	if a > 0 {
		a, b = -b, -a
	}
	return lowerTail(b, nu) - lowerTail(a, nu)
}

func lowerTail(z, nu float64) float64 {
	switch {
	case math.IsInf(z, 0):
		return max(0, math.Copysign(1, z))
	case math.IsInf(nu, 1):
		return math.Erfc(-z/math.Sqrt2) / 2
	}
	return distuv.StudentsT{Sigma: 1, Nu: nu}.CDF(z)
}

// GuardFactor gives g so that a guard band w = g·u keeps the probability of false
// acceptance at the acceptance limit at 1 − p, one-sided: the p quantile of the normal
// distribution, or of Student's t for finite nu. JCGM 106:2012 8.3.3.
func GuardFactor(p, nu float64) (float64, error) {
	switch {
	case !(p > 0 && p < 1) || !(nu >= 1):
		return 0, fmt.Errorf("guard factor: probability %g, nu %g", p, nu)
	case math.IsInf(nu, 1):
		return distuv.UnitNormal.Quantile(p), nil
	}
	return distuv.StudentsT{Sigma: 1, Nu: nu}.Quantile(p), nil
}

// CapabilityIndex gives C_m = E_max/U of an instrument with limits ± maxError and
// expanded uncertainty U = 2u (JCGM 106:2012 7.6.5); the same number is called the test
// uncertainty ratio.
func CapabilityIndex(maxError, expanded float64) float64 { return maxError / expanded }

// Prior is what is known of the measured items before measuring one; the
// distributions of gonum/stat/distuv are priors.
type Prior interface {
	Prob(x float64) float64
	Quantile(p float64) float64
}

// GlobalRisks are the probabilities, before an item is measured, that it will be
// accepted though it does not conform (Consumer), and rejected though it conforms
// (Producer). JCGM 106:2012 9.5.
type GlobalRisks struct{ Consumer, Producer float64 }

// Risks integrates the global risks for items that vary as prior, measured with a
// normal error of standard uncertainty u:
//
//	R_C = ∫ outside tolerance  g0(x)·P(accepted | x) dx
//	R_P = ∫ within tolerance   g0(x)·P(rejected | x) dx
func Risks(prior Prior, u float64, tolerance, acceptance Interval) (GlobalRisks, error) {
	if !(u > 0) || !(tolerance.Low < tolerance.Up) || !(acceptance.Low < acceptance.Up) {
		return GlobalRisks{}, fmt.Errorf("global risks: u %g, tolerance %v, acceptance %v", u, tolerance, acceptance)
	}
	const rest = 1e-12 // of the prior, left out on either side
	low, up := prior.Quantile(rest), prior.Quantile(1-rest)
	accepted := func(x float64) float64 {
		return prior.Prob(x) * between((acceptance.Low-x)/u, (acceptance.Up-x)/u, math.Inf(1))
	}
	rejected := func(x float64) float64 { return prior.Prob(x) - accepted(x) }
	a, b := min(max(tolerance.Low, low), up), min(max(tolerance.Up, low), up)
	return GlobalRisks{
		Consumer: integral(accepted, low, a) + integral(accepted, b, up),
		Producer: integral(rejected, a, b),
	}, nil
}

// integral is a smooth function's integral by Gauss–Legendre on panels.
func integral(f func(float64) float64, from, to float64) float64 {
	if !(to > from) {
		return 0
	}
	const panels = 64
	sum, width := 0.0, (to-from)/panels
	for i := range panels {
		left := from + float64(i)*width
		sum += quad.Fixed(f, left, left+width, 12, quad.Legendre{}, 1)
	}
	return sum
}
