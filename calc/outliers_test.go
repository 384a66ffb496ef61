package calc

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/floats"
	"pgregory.net/rapid"
)

func TestOutliersGrubbsTable(t *testing.T) {
	for _, r := range csvRows(t, "grubbs.csv") {
		n := int(dec(t, r[0]))
		for i, c := range []struct {
			alpha float64
			both  bool
		}{{0.05, true}, {0.05, false}, {0.01, true}, {0.01, false}} {
			g, err := GrubbsCritical(n, c.alpha, c.both)
			if err != nil {
				t.Fatal(err)
			}
			near(t, "n = "+r[0], g, r[1+i])
		}
	}
}

// Published tables. Both sides: LibreTexts, Analytical Chemistry 2.1 (Harvey), appendix
// 6; its 2.202 for n = 7 is a misprint of 2.020. One side: a published table of one-sided values.
func TestOutliersGrubbsPublished(t *testing.T) {
	for n, want := range map[int][4]string{
		3: {"1.155", "1.15", "1.155", ""}, 4: {"1.481", "1.46", "1.496", ""}, 5: {"1.715", "1.67", "1.764", ""},
		6: {"1.887", "1.82", "1.973", ""}, 7: {"2.020", "1.94", "2.139", ""}, 8: {"2.126", "2.03", "2.274", ""},
		9: {"2.215", "2.11", "2.387", ""}, 10: {"2.29", "2.18", "2.482", ""},
		11: {"2.355"}, 12: {"2.412"}, 13: {"2.462"}, 14: {"2.507"},
	} {
		for i, c := range []struct {
			alpha float64
			both  bool
		}{{0.05, true}, {0.05, false}, {0.01, true}} {
			if want[i] == "" {
				continue
			}
			g, err := GrubbsCritical(n, c.alpha, c.both)
			if err != nil {
				t.Fatal(err)
			}
			// Tables of the time rounded or cut: one unit of the last digit.
			half := math.Pow10(-(len(want[i]) - 2))
			if math.Abs(g-dec(t, want[i])) > half {
				t.Errorf("n = %d, alpha %g: %.4f, published %s", n, c.alpha, g, want[i])
			}
		}
	}
}

// With three values G is at most 2/√3 = 1.155 however far one lies out.
func TestOutliersThreeValuesSayNothing(t *testing.T) {
	o, err := Grubbs([]float64{10.00, 10.01, 99}, 0.05)
	if err != nil || o.G > 2/math.Sqrt(3)+1e-12 || o.Index != 2 {
		t.Errorf("%+v, %v", o, err)
	}
}

func TestOutliersFlag(t *testing.T) {
	clean := []float64{9.988, 9.990, 9.985, 9.991, 9.987, 9.989}
	slip := append([]float64{10.088}, clean...) // misread by one line of 0.1 mL
	for _, tt := range []struct {
		name   string
		values []float64
		want   bool
		index  int
	}{
		{"clean", clean, false, 2},
		{"one line misread", slip, true, 0},
		{"all equal", []float64{1, 1, 1, 1}, false, 0},
	} {
		before := append([]float64(nil), tt.values...)
		g, err := Grubbs(tt.values, 0.05)
		if err != nil || g.Flagged != tt.want || g.Index != tt.index {
			t.Errorf("Grubbs, %s: %+v, %v", tt.name, g, err)
		}
		d, err := Dixon(tt.values)
		if err != nil || d.Flagged != tt.want {
			t.Errorf("Dixon, %s: %+v, %v", tt.name, d, err)
		}
		if !floats.Equal(before, tt.values) {
			t.Errorf("%s: the values were changed", tt.name)
		}
	}
}

// Dixon r10: Q of 0.189, 0.167, 0.187, 0.183, 0.186, 0.182, 0.181, 0.184, 0.181, 0.177 is
// (0.177 − 0.167)/(0.189 − 0.167) = 0.455, below 0.466 (the usual textbook set, from
// memory).
func TestOutliersDixonTextbook(t *testing.T) {
	d, err := Dixon([]float64{0.189, 0.167, 0.187, 0.183, 0.186, 0.182, 0.181, 0.184, 0.181, 0.177})
	if err != nil || d.Index != 1 || d.Flagged {
		t.Fatalf("%+v, %v", d, err)
	}
	near(t, "Q", d.G, "0.455")
}

func TestOutliersRefuse(t *testing.T) {
	for name, values := range map[string][]float64{
		"two values": {1, 2}, "not a number": {1, 2, math.NaN()}, "infinite": {1, 2, math.Inf(1)},
	} {
		if o, err := Grubbs(values, 0.05); err == nil {
			t.Errorf("Grubbs, %s: %+v", name, o)
		}
		if o, err := Dixon(values); err == nil {
			t.Errorf("Dixon, %s: %+v", name, o)
		}
	}
	if _, err := Dixon(make([]float64, 11)); err == nil {
		t.Error("Dixon took 11 values")
	}
	if _, err := Grubbs([]float64{1, 2, 3}, 0); err == nil {
		t.Error("a level of 0 was accepted")
	}
}

// Flags do not depend on the unit or the zero of the scale.
func TestOutliersScale(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		values := rapid.SliceOfN(rapid.Float64Range(-1, 1), 3, 10).Draw(t, "values")
		scaled := make([]float64, len(values))
		for i, v := range values {
			scaled[i] = 10 + 4*v
		}
		a, err1 := Grubbs(values, 0.05)
		b, err2 := Grubbs(scaled, 0.05)
		if err1 != nil || err2 != nil {
			t.Fatal(err1, err2)
		}
		if math.Abs(a.G-b.G) > 1e-6*max(1, a.G) && floats.Max(values)-floats.Min(values) > 1e-6 {
			t.Errorf("%g and %g", a.G, b.G)
		}
	})
}
