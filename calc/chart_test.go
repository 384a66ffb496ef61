package calc

import (
	"math"
	"testing"
)

func TestChartConstants(t *testing.T) {
	for _, r := range csvRows(t, "control_chart_constants.csv") {
		n := int(dec(t, r[0]))
		c, err := ControlConstants(n)
		if err != nil {
			t.Fatal(err)
		}
		for i, got := range []float64{c.C4, c.D2, c.SigmaRange, c.D3Low, c.D4Up, c.A2} {
			near(t, "n = "+r[0]+", column "+string(rune('1'+i)), got, r[1+i])
		}
		for i, p := range []float64{0.95, 0.99} {
			f, err := CriticalRangeFactor(n, p)
			if err != nil {
				t.Fatal(err)
			}
			near(t, "n = "+r[0]+", critical range", f, r[7+i])
		}
	}
}

// ISO 5725-6, critical range factors f(n) as printed, from memory.
func TestChartCriticalRangePublished(t *testing.T) {
	for i, want := range []string{"2.8", "3.3", "3.6", "3.9", "4.0", "4.2", "4.3", "4.4", "4.5"} {
		f, err := CriticalRangeFactor(i+2, 0.95)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "f", f, want)
	}
}

// A3, B3 and B4 of ISO 7870-2, from memory.
func TestChartStandardDeviation(t *testing.T) {
	for n, want := range map[int][3]string{2: {"2.659", "0", "3.267"}, 3: {"1.954", "0", "2.568"}, 5: {"1.427", "0", "2.089"}, 10: {"0.975", "0.284", "1.716"}} {
		c, err := ControlConstants(n)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "A3", c.A3, want[0])
		near(t, "B3", c.B3Low, want[1])
		near(t, "B4", c.B4, want[2])
	}
}

// σ = 0.003 mL and three replicates: warn above 0.010, repeat above 0.012 mL (computed
// with the factors above).
func TestChartRangeOfReplicates(t *testing.T) {
	for _, tt := range []struct {
		name           string
		values         []float64
		warned, failed bool
	}{
		{"close", []float64{9.990, 9.985, 9.990}, false, false},
		{"wide", []float64{9.990, 9.979, 9.985}, true, false},
		{"too wide", []float64{9.990, 9.977, 9.985}, true, true},
	} {
		r, err := CheckRange(tt.values, 0.003)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "warn", r.Warn, "0.0099")
		near(t, "repeat", r.Repeat, "0.0124")
		if r.Warned() != tt.warned || r.Failed() != tt.failed {
			t.Errorf("%s: %+v", tt.name, r)
		}
	}
	for name, values := range map[string][]float64{"one": {1}, "not a number": {1, math.NaN()}, "infinite": {1, math.Inf(-1)}} {
		if r, err := CheckRange(values, 0.003); err == nil {
			t.Errorf("%s: %+v", name, r)
		}
	}
	if _, err := CheckRange([]float64{1, 2}, 0); err == nil {
		t.Error("a repeatability of 0 was accepted")
	}
}

// Individuals: centre ± 3·MR̄/1.128 = ± 2.66·MR̄ (common practice, no source).
func TestChartIndividuals(t *testing.T) {
	values := []float64{0.010, 0.012, 0.009, 0.011, 0.012}
	l, err := IndividualLimits(values)
	if err != nil {
		t.Fatal(err)
	}
	movingRange := (0.002 + 0.003 + 0.002 + 0.001) / 4
	near(t, "factor", (l.ActUp-l.Centre)/movingRange, "2.66")
	near(t, "centre", l.Centre, "0.0108")
	if !l.Provisional || l.N != 5 {
		t.Errorf("five values are provisional: %+v", l)
	}
	if _, err := IndividualLimits(values[:2]); err == nil {
		t.Error("two values made a chart")
	}
	if _, err := IndividualLimits([]float64{1, 2, math.NaN()}); err == nil {
		t.Error("a chart with a hole")
	}
}

func TestChartMeans(t *testing.T) {
	l, err := MeanLimits(10, 0.5, 4, 25)
	if err != nil || l.Provisional {
		t.Fatal(l, err)
	}
	near(t, "A2", (l.ActUp-10)/0.5, "0.7286")
}
