package calc

import (
	"errors"
	"math"
	"testing"
)

// JJG 196-2006 as quoted in two independent texts: glass 20 min, plastic 50 min, at most
// one smallest division.
func TestLeakRules(t *testing.T) {
	glass, plastic := LeakRules()[0], LeakRules()[1]
	for _, tt := range []struct {
		name  string
		rule  LeakRule
		test  LeakTest
		tight bool
		code  string
	}{
		{"nothing ran", glass, LeakTest{0.00, 0.00, 20, 0.1}, true, ""},
		{"one division exactly", glass, LeakTest{0.02, 0.12, 20, 0.1}, true, ""},
		{"more than a division", glass, LeakTest{0.02, 0.13, 20, 0.1}, false, ""},
		{"glass rule on plastic is too short", plastic, LeakTest{0, 0.02, 20, 0.1}, false, "leak-too-short"},
		{"plastic", plastic, LeakTest{0, 0.02, 50, 0.1}, true, ""},
		{"leaks before the time is over", plastic, LeakTest{0, 0.3, 5, 0.1}, false, ""},
		{"parallax of a tenth", glass, LeakTest{0.02, 0.01, 20, 0.1}, true, ""},
		{"readings swapped", glass, LeakTest{0.52, 0.02, 20, 0.1}, false, "leak-readings"},
		{"reading missing", glass, LeakTest{0, math.NaN(), 20, 0.1}, false, "leak-readings"},
	} {
		got, err := JudgeLeak(tt.rule, tt.test)
		var r *Refusal
		if code := ""; errors.As(err, &r) || err != nil {
			if r != nil {
				code = r.Code
			}
			if code != tt.code {
				t.Errorf("%s: %v", tt.name, err)
			}
			continue
		}
		if tt.code != "" || got.Tight != tt.tight {
			t.Errorf("%s: %+v", tt.name, got)
		}
	}
	if _, err := JudgeLeak(glass, LeakTest{0, 0, 20, 0}); err == nil {
		t.Error("a subdivision of 0 was accepted")
	}
}

// Type approval GRSI 26769-08 for class 2 (B): 25 mL 25 to 75 s; USP <31>: at most
// 0.5 mL/s, which is slower.
func TestLeakDeliveryTimes(t *testing.T) {
	gost, ok := FindDeliveryTime("GOST 29252-91", "B", 25)
	if !ok || gost.LowS != 25 || gost.UpS != 75 || gost.Status != LimitRead {
		t.Errorf("%+v", gost)
	}
	usp, ok := FindDeliveryTime("USP <31>", "A", 50)
	if !ok || usp.LowS != 50/0.5 {
		t.Errorf("%+v", usp)
	}
	for _, tt := range []struct {
		limits DeliveryTime
		s      float64
		want   bool
	}{{gost, 24.9, false}, {gost, 25, true}, {gost, 75, true}, {gost, 75.1, false}, {usp, 99, false}, {usp, 5000, true}, {gost, math.NaN(), false}} {
		if got := tt.limits.Keeps(tt.s); got != tt.want {
			t.Errorf("%s, %g s: %v", tt.limits.Standard, tt.s, got)
		}
	}
	if _, ok := FindDeliveryTime("ISO 385:2005", "AS", 50); ok {
		t.Error("ISO 385:2005 delivery times were never read")
	}
	if times := DeliveryTimes(); len(times) == 0 {
		t.Error("no table")
	} else if times[0].LowS = 1; deliveryTimes[0].LowS == 1 {
		t.Error("the table can be changed from outside")
	}
}
