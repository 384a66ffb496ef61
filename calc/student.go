package calc

import (
	"fmt"
	"math"
	"sync/atomic"

	"gonum.org/v1/gonum/stat/distuv"
)

// CoverageFactor gives k for a two-sided coverage probability p from Student's t with
// nu degrees of freedom, cut to the integer below as JCGM 100:2008 G.4.1 has it; from
// the normal distribution when nu is infinite. nu must be at least 1; a value that
// rounding left just under an integer counts as that integer.
func CoverageFactor(p, nu float64) (float64, error) {
	if err := checkFactor(p, nu); err != nil {
		return 0, err
	}
	return studentFactor(p, wholeNu(nu)), nil
}

// wholeNu cuts degrees of freedom to the integer below; 0 stands for infinity.
func wholeNu(nu float64) int {
	if nu > 1e6 {
		return 0
	}
	return int(math.Floor(nu * (1 + 1e-9)))
}

func checkFactor(p, nu float64) error {
	switch {
	case !(p > 0 && p < 1):
		return fmt.Errorf("coverage probability %g is not between 0 and 1", p)
	case !(nu >= 1-1e-9):
		return fmt.Errorf("%g degrees of freedom are fewer than 1", nu)
	}
	return nil
}

// studentFactor gives the quantile for whole degrees of freedom, 0 for infinite.
// Beyond a thousand the expansion of t about the normal quantile is exact to 1e-13 and
// much faster (Abramowitz and Stegun 26.7.5).
func studentFactor(p float64, nu int) float64 {
	if nu > 0 && nu < 1000 {
		return distuv.StudentsT{Sigma: 1, Nu: float64(nu)}.Quantile((1 + p) / 2)
	}
	x := distuv.UnitNormal.Quantile((1 + p) / 2)
	if nu == 0 {
		return x
	}
	n, y := float64(nu), x*x
	g1 := (y + 1) / 4
	g2 := ((5*y+16)*y + 3) / 96
	g3 := (((3*y+19)*y+17)*y - 15) / 384
	g4 := ((((79*y+776)*y+1482)*y-1920)*y - 945) / 92160
	return x * (1 + (g1+(g2+(g3+g4/n)/n)/n)/n)
}

// factorTable keeps the coverage factors of one probability that were worked out: a
// quantile of t takes some microseconds, and a table of titrations asks for the same
// few a million times.
type factorTable struct {
	p    float64
	bits [1024]atomic.Uint64 // by whole degrees of freedom; 0 for infinite; 0 bits: not worked out yet
}

func (t *factorTable) factor(nu float64) (float64, error) {
	if err := checkFactor(t.p, nu); err != nil {
		return 0, err
	}
	whole := wholeNu(nu)
	if whole >= len(t.bits) {
		return studentFactor(t.p, whole), nil
	}
	place := &t.bits[whole]
	if known := place.Load(); known != 0 {
		return math.Float64frombits(known), nil
	}
	k := studentFactor(t.p, whole)
	place.Store(math.Float64bits(k))
	return k, nil
}

// chi2Quantile gives the value that a chi-squared variable with nu degrees of freedom
// stays below with probability p.
func chi2Quantile(p float64, nu int) float64 {
	return distuv.ChiSquared{K: float64(nu)}.Quantile(p)
}
