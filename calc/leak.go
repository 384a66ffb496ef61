package calc

import "fmt"

// LeakRule is how a stopcock is tested for tightness: the burette stands upright,
// filled to the top line, closed, and after some minutes the reading has fallen by no
// more than some subdivisions.
type LeakRule struct {
	Stopcock  string      `json:"stopcock"`
	Minutes   float64     `json:"minutes"`
	Divisions float64     `json:"divisions"` // largest fall, in subdivisions
	Source    string      `json:"source"`
	Status    LimitStatus `json:"status"`
}

// LeakRules are the rules known to the program; a laboratory may use its own. The
// numbers of ISO 385:2005 were not at hand.
func LeakRules() []LeakRule {
	return []LeakRule{
		{"glass, without grease, wetted", 20, 1, "JJG 196-2006", LimitSecondhand},
		{"plastic (PTFE)", 50, 1, "JJG 196-2006", LimitSecondhand},
	}
}

// LeakTest is one test: two readings and the time between them.
type LeakTest struct {
	StartML, EndML float64 // readings, mL
	Minutes        float64 // between them
	SubdivisionML  float64 // of the burette, mL
}

// LeakResult is what a leak test says.
type LeakResult struct {
	FallML  float64  `json:"fall_mL"`  // end less start
	LimitML float64  `json:"limit_mL"` // for the rule's time
	Tight   bool     `json:"tight"`
	Rule    LeakRule `json:"rule"`
}

// JudgeLeak applies a rule. A test that was too short to show tightness is refused; one
// that has already failed is not. A reading that rises by more than half a subdivision
// is a misreading.
func JudgeLeak(rule LeakRule, t LeakTest) (LeakResult, error) {
	if !(t.SubdivisionML > 0 && t.Minutes > 0 && rule.Divisions > 0 && rule.Minutes > 0) {
		return LeakResult{}, fmt.Errorf("leak test: subdivision %g mL, %g min, rule %g min and %g subdivisions", t.SubdivisionML, t.Minutes, rule.Minutes, rule.Divisions)
	}
	r := LeakResult{FallML: t.EndML - t.StartML, LimitML: rule.Divisions * t.SubdivisionML, Rule: rule}
	if !(r.FallML >= -t.SubdivisionML/2) {
		return LeakResult{}, &Refusal{
			"leak-readings", fmt.Sprintf("The reading went from %g to %g mL: liquid does not flow back.", t.StartML, t.EndML),
			"Read both again, the eye level with the meniscus, and enter the first reading first.",
		}
	}
	within, err := Rule{Decimals: 5}.atMost(r.FallML, r.LimitML)
	if err != nil {
		return LeakResult{}, fmt.Errorf("leak test: %w", err)
	}
	if within && t.Minutes < rule.Minutes {
		return LeakResult{}, &Refusal{
			"leak-too-short", fmt.Sprintf("%g minutes are too short to show that the stopcock is tight.", t.Minutes),
			fmt.Sprintf("Leave it closed for %g minutes in all and read again.", rule.Minutes),
		}
	}
	r.Tight = within
	return r, nil
}

// DeliveryTime is the time in which the meniscus falls freely from the zero line to the
// lowest line, without the waiting time, s. An end that is 0 is open.
type DeliveryTime struct {
	Standard   string      `json:"standard"`
	Class      string      `json:"class"`
	CapacityML float64     `json:"capacity_mL"`
	LowS       float64     `json:"low_s"`
	UpS        float64     `json:"up_s"`
	Status     LimitStatus `json:"status"`
}

// DeliveryTimes are the delivery times known to the program. Those of ISO 385:2005 were
// not at hand; a laboratory enters its own.
func DeliveryTimes() []DeliveryTime {
	return append([]DeliveryTime(nil), deliveryTimes...)
}

var deliveryTimes = []DeliveryTime{
	// type approval GRSI 26769-08
	{"GOST 29252-91", "B", 1, 20, 45, LimitRead},
	{"GOST 29252-91", "B", 2, 25, 70, LimitRead},
	{"GOST 29252-91", "B", 5, 40, 95, LimitRead},
	{"GOST 29252-91", "B", 10, 45, 75, LimitRead},
	{"GOST 29252-91", "B", 25, 25, 75, LimitRead},
	{"GOST 29252-91", "B", 50, 30, 100, LimitRead},
	{"GOST 29252-91", "B", 100, 30, 100, LimitRead},
	{"JJG 196-2006", "A", 1, 20, 35, LimitMemory},
	{"JJG 196-2006", "A", 2, 20, 35, LimitMemory},
	{"JJG 196-2006", "A", 5, 30, 45, LimitMemory},
	{"JJG 196-2006", "A", 10, 30, 45, LimitMemory},
	{"JJG 196-2006", "A", 25, 45, 70, LimitMemory},
	{"JJG 196-2006", "A", 50, 60, 90, LimitMemory},
	{"JJG 196-2006", "A", 100, 70, 100, LimitMemory},
	{"JJG 196-2006", "B", 1, 15, 35, LimitMemory},
	{"JJG 196-2006", "B", 2, 15, 35, LimitMemory},
	{"JJG 196-2006", "B", 5, 20, 45, LimitMemory},
	{"JJG 196-2006", "B", 10, 20, 45, LimitMemory},
	{"JJG 196-2006", "B", 25, 35, 70, LimitMemory},
	{"JJG 196-2006", "B", 50, 50, 90, LimitMemory},
	{"JJG 196-2006", "B", 100, 60, 100, LimitMemory},
	// outflow of at most 0.5 mL/s, computed
	{"USP <31>", "A", 10, 20, 0, LimitSecondhand},
	{"USP <31>", "A", 25, 50, 0, LimitSecondhand},
	{"USP <31>", "A", 50, 100, 0, LimitSecondhand},
	{"USP <31>", "A", 100, 200, 0, LimitSecondhand},
}

// FindDeliveryTime gives the limits for a burette; ok is false where none is known.
func FindDeliveryTime(standard, class string, capacityML float64) (limits DeliveryTime, ok bool) {
	for _, t := range deliveryTimes {
		if t.Standard == standard && t.Class == class && sameML(t.CapacityML, capacityML) {
			return t, true
		}
	}
	return DeliveryTime{}, false
}

// Keeps says whether a measured time lies within the limits, ends included.
func (d DeliveryTime) Keeps(seconds float64) bool {
	return seconds >= d.LowS && (d.UpS == 0 || seconds <= d.UpS)
}
