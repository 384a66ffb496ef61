package calc

import (
	"errors"
	"math"
	"os"
	"strings"
	"testing"

	"tenthmark/calc/decimal"
)

// csvRows reads a fixture of decimals: no comment lines, no header, one row a line.
func csvRows(t *testing.T, name string) [][]string {
	t.Helper()
	b, err := os.ReadFile("../testdata/calc/" + name)
	if err != nil {
		t.Fatal(err)
	}
	var rows [][]string
	for line := range strings.Lines(string(b)) {
		if line = strings.TrimSpace(line); line != "" && line[0] != '#' {
			rows = append(rows, strings.Split(line, ","))
		}
	}
	return rows[1:]
}

func dec(t *testing.T, s string) float64 {
	t.Helper()
	n, err := decimal.Parse(s)
	if err != nil {
		t.Fatal(err)
	}
	return n.Float()
}

// near fails when got differs from want by more than half a unit of want's last
// printed digit.
func near(t *testing.T, what string, got float64, want string) {
	t.Helper()
	n := decimal.MustParse(want)
	if half := 0.5000001 * math.Pow10(-n.Decimals()); !(math.Abs(got-n.Float()) <= half) {
		t.Errorf("%s = %.10g, published %s", what, got, want)
	}
}

func TestLimitsISO385(t *testing.T) {
	for _, r := range csvRows(t, "limits_iso385_2005.csv") {
		for class, column := range map[string]int{"A": 2, "AS": 2, "B": 3} {
			m, err := Limit("", class, dec(t, r[0]), dec(t, r[1]))
			if err != nil {
				t.Fatal(err)
			}
			if m.LimitML != dec(t, r[column]) || m.Standard != "ISO 385:2005" || m.Class != class {
				t.Errorf("%s mL / %s mL class %s: %+v", r[0], r[1], class, m)
			}
			if wait := map[string]int{"AS": 30}[class]; m.WaitS != wait {
				t.Errorf("class %s waits %d s, want %d s (ISO 385:2005 5.2)", class, m.WaitS, wait)
			}
		}
	}
}

// ISO 384:1978 (as GB/T 12809-91): limits are taken from the series 10-12-15-20-25-30-
// 40-50-60-80, class A of graduated ware does not exceed the smallest division.
func TestLimitsFollowISO384(t *testing.T) {
	series := []int{10, 12, 15, 20, 25, 30, 40, 50, 60, 80}
	all, err := Limits("ISO 385:2005")
	if err != nil {
		t.Fatal(err)
	}
	for _, m := range all {
		if m.Class == "B" {
			continue
		}
		found := false
		for _, s := range series {
			for _, scale := range []float64{1e-4, 1e-3, 1e-2} {
				found = found || sameML(m.LimitML, float64(s)*scale)
			}
		}
		if !found || m.LimitML > m.SubdivisionML+1e-12 {
			t.Errorf("%g mL: ± %g mL against a subdivision of %g mL", m.CapacityML, m.LimitML, m.SubdivisionML)
		}
	}
}

func TestLimitsOtherStandards(t *testing.T) {
	tests := []struct {
		standard, class string
		capacity, want  float64
		status          LimitStatus
	}{
		{"JJG 196-2006", "A", 10, 0.025, LimitSecondhand},
		{"JJG 196-2006", "B", 25, 0.08, LimitSecondhand},
		{"JJG 196-2006", "A", 100, 0.1, LimitSecondhand},
		{"GOST 29252-91", "B", 5, 0.02, LimitRead},
		{"GOST 29252-91", "B", 25, 0.1, LimitRead},
		{"ASTM E287-02", "A", 25, 0.03, LimitMemory}, // from memory
		{"USP <31>", "A", 50, 0.05, LimitMemory},     // from memory
	}
	for _, c := range tests {
		m, err := Limit(c.standard, c.class, c.capacity, 0.1)
		if err != nil || m.LimitML != c.want || m.Status != c.status {
			t.Errorf("%s %s %g mL: %+v, %v; want %g", c.standard, c.class, c.capacity, m, err, c.want)
		}
	}
}

// ASTM E287-02 1.1.3: a capacity not listed takes the limit of the next smaller listed
// size; class B is twice class A.
func TestLimitsNextSmallerSize(t *testing.T) {
	a, errA := Limit("ASTM E287-02", "A", 30, 0.1)
	b, errB := Limit("ASTM E287-02", "B", 30, 0.1)
	if errA != nil || errB != nil {
		t.Fatal(errA, errB)
	}
	if a.LimitML != 0.03 || a.CapacityML != 30 || !strings.Contains(a.Note, "next smaller size, 25 mL") {
		t.Errorf("30 mL: %+v", a)
	}
	if b.LimitML != 2*a.LimitML {
		t.Errorf("class B is %g, class A %g", b.LimitML, a.LimitML)
	}
}

func TestLimitsRefuse(t *testing.T) {
	tests := []struct {
		name, standard, class string
		capacity, subdivision float64
		code, hint            string
	}{
		{"no class mark", "", "", 50, 0.1, "class-missing", "No class mark means class B"},
		{"class of another trade", "", "1", 50, 0.1, "class-unknown", "A, AS, B"},
		{"AS in a standard without it", "ASTM E287-02", "AS", 50, 0.1, "class-unknown", "A, B"},
		{"capacity not listed", "", "A", 30, 0.1, "capacity-unlisted", "25, 50, 100"},
		{"below the smallest size", "ASTM E287-02", "A", 5, 0.02, "capacity-unlisted", "10, 25"},
		{"capacity missing", "", "A", 0, 0.1, "capacity-unlisted", "50"},
		{"two subdivisions, none given", "", "A", 10, 0, "subdivision-unlisted", "0.02 and 0.05"},
		{"subdivision not listed", "", "A", 50, 0.05, "subdivision-unlisted", "0.1"},
		{"standard not known", "house rule 7", "A", 50, 0.1, "standard-unknown", "ISO 385:2005"},
	}
	for _, c := range tests {
		t.Run(c.name, func(t *testing.T) {
			m, err := Limit(c.standard, c.class, c.capacity, c.subdivision)
			var r *Refusal
			if !errors.As(err, &r) || r.Code != c.code || !strings.Contains(r.Hint, c.hint) {
				t.Errorf("got %+v, %v", m, err)
			}
		})
	}
}

func TestLimitsSubdivisionNotNeeded(t *testing.T) {
	m, err := Limit("", "B", 50, 0)
	if err != nil || m.LimitML != 0.1 {
		t.Errorf("got %+v, %v", m, err)
	}
}

func TestLimitEntered(t *testing.T) {
	m, err := EnteredLimit("house rule 7", "A", 50, 0.1, 0.04)
	if err != nil || m.LimitML != 0.04 || m.Status != LimitEntered {
		t.Errorf("got %+v, %v", m, err)
	}
	for _, bad := range []float64{0, -0.05, 50, math.NaN()} {
		if _, err := EnteredLimit("house rule 7", "A", 50, 0.1, bad); err == nil {
			t.Errorf("a limit of %g mL was accepted", bad)
		}
	}
}
