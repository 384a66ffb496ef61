package calc

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// Outlier is the value that lies furthest out, and whether that is suspicious. It is
// a flag: ask for a cause, repeat, and keep the value.
type Outlier struct {
	Index    int     // of the value
	Value    float64 // the value itself
	G        float64 // test statistic
	Critical float64 // its critical value
	Flagged  bool    // G exceeds Critical
}

// GrubbsCritical gives the critical value of Grubbs' test for one outlier among n
// values at the level alpha,
//
//	G = (n − 1)/√n · √(t²/(n − 2 + t²))
//
// t the upper alpha/(2n) point of Student's t with n − 2 degrees of freedom for either
// side, alpha/n for one side chosen beforehand. n is at least 3.
func GrubbsCritical(n int, alpha float64, bothSides bool) (float64, error) {
	if n < 3 || !(alpha > 0 && alpha < 1) {
		return 0, fmt.Errorf("outlier test: %d values at a level of %g", n, alpha)
	}
	sides := 1.0
	if bothSides {
		sides = 2
	}
	m := float64(n)
	t := distuv.StudentsT{Sigma: 1, Nu: m - 2}.Quantile(alpha / (sides * m))
	return (m - 1) / math.Sqrt(m) * math.Sqrt(t*t/(m-2+t*t)), nil
}

// Grubbs tests the value furthest from the mean on either side, G = max|x − x̄|/s, at
// the level alpha. With three values G cannot exceed 1.155 and the test says next to
// nothing: use CheckRange.
func Grubbs(values []float64, alpha float64) (Outlier, error) {
	critical, err := GrubbsCritical(len(values), alpha, true)
	if err != nil {
		return Outlier{}, err
	}
	mean, s := stat.MeanStdDev(values, nil)
	if math.IsNaN(s) || math.IsInf(s, 0) {
		return Outlier{}, fmt.Errorf("outlier test: a value is not finite")
	}
	o := Outlier{Critical: critical, Value: values[0]}
	if s == 0 {
		return o, nil // all are equal
	}
	for i, v := range values {
		if g := math.Abs(v-mean) / s; g > o.G {
			o.Index, o.Value, o.G = i, v, g
		}
	}
	o.Flagged = o.G > o.Critical
	return o, nil
}

// dixonCritical are the critical values of Dixon's r10 for 3 to 10 values, both sides,
// 5 %. From memory: the usual table, unverified.
var dixonCritical = [...]float64{3: 0.970, 0.829, 0.710, 0.625, 0.568, 0.526, 0.493, 0.466}

// Dixon tests the value with the larger gap to its neighbour, Q = gap/range (r10), for
// 3 to 10 values at 5 % on both sides. Its critical values are from memory; prefer
// Grubbs.
func Dixon(values []float64) (Outlier, error) {
	n := len(values)
	if n < 3 || n > 10 {
		return Outlier{}, fmt.Errorf("outlier test: r10 is for 3 to 10 values, not %d", n)
	}
	order := sortedIndex(values)
	low, high := values[order[0]], values[order[n-1]]
	if !(high-low >= 0) || math.IsInf(high-low, 1) {
		return Outlier{}, fmt.Errorf("outlier test: a value is not finite")
	}
	o := Outlier{Index: order[0], Value: low, Critical: dixonCritical[n]}
	if high == low {
		return o, nil
	}
	below, above := values[order[1]]-low, high-values[order[n-2]]
	o.G = below / (high - low)
	if above > below {
		o.Index, o.Value, o.G = order[n-1], high, above/(high-low)
	}
	o.Flagged = o.G > o.Critical
	return o, nil
}

func sortedIndex(values []float64) []int {
	order := make([]int, len(values))
	for i := range order {
		order[i] = i
		for j := i; j > 0 && values[order[j]] < values[order[j-1]]; j-- {
			order[j], order[j-1] = order[j-1], order[j]
		}
	}
	return order
}
