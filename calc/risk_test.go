package calc

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
)

var inf = math.Inf(1)

// JCGM 106:2012, examples as printed.
func TestRiskConformanceJCGM106(t *testing.T) {
	for _, tt := range []struct {
		name             string
		y, u             float64
		tolerance        Interval
		printed, precise string // precise: computed with scipy 1.10.1
	}{
		{"7.3.3 example 1, Zener", -5.47, 0.05, Interval{-inf, -5.40}, "0.92", "0.919243"},
		{"7.3.3 example 2, container", 509.7, 8.6, Interval{490, inf}, "0.99", "0.989010"},
		{"7.4 oil", 13.6, 1.8, Interval{12.5, 16.3}, "0.66", "0.662630"},
	} {
		p, err := ConformanceProbability(tt.y, tt.u, inf, tt.tolerance)
		if err != nil {
			t.Fatal(err)
		}
		near(t, tt.name, p, tt.printed)
		near(t, tt.name, p, tt.precise)
	}
}

// JCGM 106:2012 Table 1 and 8.3.3.
func TestRiskGuardFactors(t *testing.T) {
	for _, tt := range []struct {
		p, nu float64
		want  string
	}{
		{0.80, inf, "0.84"},
		{0.90, inf, "1.28"},
		{0.95, inf, "1.64"},
		{0.99, inf, "2.33"},
		{0.999, inf, "3.09"},
		{0.95, 9, "1.83"}, // 8.3.3 example 2
	} {
		g, err := GuardFactor(tt.p, tt.nu)
		if err != nil {
			t.Fatal(err)
		}
		if tt.want == "1.64" { // 1.6449 is printed rounded down
			near(t, "z of 0.95", g, "1.6449")
			continue
		}
		near(t, "guard factor", g, tt.want)
	}
	// 8.3.3 example 1: the acceptance limit v = v0/(1 − z·0.02) with z = 3.09, printed
	// 107 km/h
	z, _ := GuardFactor(0.999, inf)
	near(t, "speed", 100/(1-z*0.02), "107")
	near(t, "speed", 100/(1-math.Round(100*z)/100*0.02), "106.587")
	g, _ := GuardFactor(0.95, 9)
	// 8.3.3 example 2: nandrolone, T 2.00, s 0.20; printed 0.37 and 2.37
	near(t, "guard band", g*0.20, "0.37")
	near(t, "guard band", g*0.20, "0.366623")
	near(t, "acceptance limit", 2.00+g*0.20, "2.37")
}

// False acceptance at the acceptance limit for w = rU, one-sided: JCGM 106:2012 8.3.2.3
// for r = 1 (at most 2.3 %), the others computed with scipy 1.10.1. The names of the
// rules in ILAC-G8:09/2019 Table 1 are from memory.
func TestRiskAtTheAcceptanceLimit(t *testing.T) {
	for _, tt := range []struct {
		r       float64
		percent string
	}{
		{3, "0.0000000986588"},
		{1.5, "0.13499"},
		{1, "2.27501"},
		{0.83, "4.84572"},
		{0.8225, "4.99849"},
		{0.5, "15.8655"},
		{0, "50"},
		{-1, "97.725"},
	} {
		p, err := ConformanceProbability(-2*tt.r, 1, inf, Interval{0, inf})
		if err != nil {
			t.Fatal(err)
		}
		near(t, "false acceptance", 100*p, tt.percent)
	}
}

// JCGM 106:2012 9.5.3 resistors and 9.5.4 bearings.
func TestRiskGlobalJCGM106(t *testing.T) {
	resistors := distuv.Normal{Mu: 1500, Sigma: 0.12}
	within := distuv.UnitNormal.CDF(0.2/0.12) - distuv.UnitNormal.CDF(-0.2/0.12)
	near(t, "resistors that conform", within, "0.904419")
	r, err := Risks(resistors, 0.04, Interval{1499.8, 1500.2}, Interval{1499.82, 1500.18})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "resistors R_C, printed 1 %", r.Consumer, "0.01")
	near(t, "resistors R_P, printed 7 %", r.Producer, "0.07")
	near(t, "resistors R_C", r.Consumer, "0.009878")
	near(t, "resistors R_P", r.Producer, "0.069027")

	bearings := distuv.Gamma{Alpha: 4, Beta: 4}
	near(t, "bearings that do not conform", 1-bearings.CDF(2), "0.0423801")
	// printed: r 0.65, A 1.7, R_C 0.1 %, R_P 7.5 %
	if r, err = Risks(bearings, 0.25, Interval{-inf, 2}, Interval{-inf, 2 - 0.65*2*0.25}); err != nil {
		t.Fatal(err)
	}
	near(t, "bearings R_C", r.Consumer, "0.001027")
	near(t, "bearings R_P", r.Producer, "0.074650")
	if r, err = Risks(bearings, 0.25, Interval{-inf, 2}, Interval{-inf, 1.67183}); err != nil {
		t.Fatal(err)
	}
	near(t, "bearings R_C at 1.67183", r.Consumer, "0.00100")
}

func TestRiskRefuses(t *testing.T) {
	for _, tt := range []struct {
		name     string
		y, u, nu float64
		in       Interval
	}{
		{"u is 0", 0, 0, inf, Within(1)},
		{"u is not a number", 0, math.NaN(), inf, Within(1)},
		{"y is not a number", math.NaN(), 1, inf, Within(1)},
		{"interval upside down", 0, 1, inf, Interval{1, -1}},
		{"no degree of freedom", 0, 1, 0.5, Within(1)},
	} {
		if p, err := ConformanceProbability(tt.y, tt.u, tt.nu, tt.in); err == nil {
			t.Errorf("%s: %g", tt.name, p)
		}
	}
	if _, err := GuardFactor(1, inf); err == nil {
		t.Error("certainty has no guard factor")
	}
	if _, err := Risks(distuv.UnitNormal, 0, Within(1), Within(1)); err == nil {
		t.Error("u of 0 was accepted")
	}
}

// Small probabilities keep their digits: Φ(−10), computed with Python 3 math.erfc.
func TestRiskTails(t *testing.T) {
	for _, y := range []float64{10, -10} {
		p, err := ConformanceProbability(y, 1, inf, Interval{-inf, 0})
		if y < 0 {
			p, err = ConformanceProbability(y, 1, inf, Interval{0, inf})
		}
		if err != nil || math.Abs(p/7.619853024160526e-24-1) > 1e-9 {
			t.Errorf("y = %g: %g, %v", y, p, err)
		}
	}
}
