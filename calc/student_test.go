package calc

import (
	"math"
	"strings"
	"testing"
)

// JCGM 100:2008, table G.2, as printed, for 68.27, 90, 95, 95.45, 99 and 99.73 %.
const tableG2 = `
1 1.84 6.31 12.71 13.97 63.66 235.80
2 1.32 2.92 4.30 4.53 9.92 19.21
3 1.20 2.35 3.18 3.31 5.84 9.22
4 1.14 2.13 2.78 2.87 4.60 6.62
5 1.11 2.02 2.57 2.65 4.03 5.51
6 1.09 1.94 2.45 2.52 3.71 4.90
7 1.08 1.89 2.36 2.43 3.50 4.53
8 1.07 1.86 2.31 2.37 3.36 4.28
9 1.06 1.83 2.26 2.32 3.25 4.09
10 1.05 1.81 2.23 2.28 3.17 3.96
11 1.05 1.80 2.20 2.25 3.11 3.85
12 1.04 1.78 2.18 2.23 3.05 3.76
13 1.04 1.77 2.16 2.21 3.01 3.69
14 1.04 1.76 2.14 2.20 2.98 3.64
15 1.03 1.75 2.13 2.18 2.95 3.59
16 1.03 1.75 2.12 2.17 2.92 3.54
17 1.03 1.74 2.11 2.16 2.90 3.51
18 1.03 1.73 2.10 2.15 2.88 3.48
19 1.03 1.73 2.09 2.14 2.86 3.45
20 1.03 1.72 2.09 2.13 2.85 3.42
25 1.02 1.71 2.06 2.11 2.79 3.33
30 1.02 1.70 2.04 2.09 2.75 3.27
35 1.01 1.70 2.03 2.07 2.72 3.23
40 1.01 1.68 2.02 2.06 2.70 3.20
45 1.01 1.68 2.01 2.06 2.69 3.18
50 1.01 1.68 2.01 2.05 2.68 3.16
100 1.005 1.660 1.984 2.025 2.626 3.077
inf 1.000 1.645 1.960 2.000 2.576 3.000`

var tableProbabilities = []float64{0.682689492137086, 0.90, 0.95, 0.954499736103642, 0.99, 0.997300203936740}

func factorOf(t *testing.T, p, nu float64) float64 {
	t.Helper()
	k, err := CoverageFactor(p, nu)
	if err != nil {
		t.Fatal(err)
	}
	return k
}

func TestStudentTableG2(t *testing.T) {
	for row := range strings.Lines(strings.TrimSpace(tableG2)) {
		cells := strings.Fields(row)
		nu := math.Inf(1)
		if cells[0] != "inf" {
			nu = num(t, cells[0])
		}
		for i, p := range tableProbabilities {
			want := cells[1+i]
			if nu == 35 && i == 1 {
				want = "1.69" // printed 1.70: a slip in the guide, the value is 1.6896
			}
			near(t, "nu "+cells[0], factorOf(t, p, nu), want)
		}
	}
}

// Computed with scipy 1.10.1.
func TestStudentAgainstScipy(t *testing.T) {
	for _, r := range csvRows(t, "student_t.csv") {
		if r[0] == "inf" {
			continue
		}
		for i, p := range tableProbabilities {
			near(t, "nu "+r[0], factorOf(t, p, num(t, r[0])), r[1+i])
		}
	}
}

// JCGM 100:2008 G.4.1: effective degrees of freedom are cut to the integer below.
func TestCoverageFactorTruncates(t *testing.T) {
	if factorOf(t, 0.95, 16.75) != factorOf(t, 0.95, 16) || factorOf(t, 0.95, 16.75) == factorOf(t, 0.95, 17) {
		t.Error("16.75 is not cut to 16")
	}
	if factorOf(t, 0.95, 17-1e-11) != factorOf(t, 0.95, 17) {
		t.Error("rounding made 16 of 17")
	}
	table := &factorTable{p: 0.95}
	for _, nu := range []float64{1, 2.5, 16.75, 999.5, 1000, 1023.9, 1024, 5000, 1e7, math.Inf(1)} {
		for range 2 { // the second time from the table
			got, err := table.factor(nu)
			if want := factorOf(t, 0.95, nu); err != nil || got != want {
				t.Errorf("nu %g: %.17g from the table, %.17g without", nu, got, want)
			}
		}
	}
	// where the expansion takes over it agrees with the quantile
	if a, b := factorOf(t, 0.9545, 1000), studentFactor(0.9545, 999); math.Abs(a-b) > 3e-6 {
		t.Errorf("999 degrees %.12f, 1000 degrees %.12f", b, a)
	}
	for _, c := range []struct{ p, nu float64 }{{0, 5}, {1, 5}, {math.NaN(), 5}, {0.95, 0.5}, {0.95, math.NaN()}, {0.95, -1}} {
		if _, err := CoverageFactor(c.p, c.nu); err == nil {
			t.Errorf("p %g, nu %g passed", c.p, c.nu)
		}
	}
}
