package calc

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// CoverageFactor gives k for a two-sided coverage probability p from Student's t with
// nu degrees of freedom, cut to the integer below as JCGM 100:2008 G.4.1 has it; from
// the normal distribution when nu is infinite. nu must be at least 1.
func CoverageFactor(p, nu float64) (float64, error) {
	switch {
	case !(p > 0 && p < 1):
		return 0, fmt.Errorf("coverage probability %g is not between 0 and 1", p)
	case math.IsInf(nu, 1) || nu > 1e6:
		return distuv.UnitNormal.Quantile((1 + p) / 2), nil
	case !(nu >= 1):
		return 0, fmt.Errorf("%g degrees of freedom are fewer than 1", nu)
	}
	return distuv.StudentsT{Sigma: 1, Nu: math.Floor(nu)}.Quantile((1 + p) / 2), nil
}

// chi2Quantile gives the value that a chi-squared variable with nu degrees of freedom
// stays below with probability p.
func chi2Quantile(p float64, nu int) float64 {
	return distuv.ChiSquared{K: float64(nu)}.Quantile(p)
}
