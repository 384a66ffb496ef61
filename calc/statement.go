package calc

import (
	"fmt"
	"strings"
)

// Statement says in words which results were judged, by which specification and
// which rule, and what came out (ISO/IEC 17025:2017 7.8.6.2, ILAC-G8:09/2019). It is
// empty for the zero Conformity.
func (c Conformity) Statement() string {
	if len(c.Points) == 0 {
		return ""
	}
	parts := []string{c.judged(), c.outcome(), c.ruleWords(), c.risk()}
	if last := c.Points[len(c.Points)-1].ReadingML; last < c.CapacityML {
		parts = append(parts, fmt.Sprintf("Nothing is said of the scale from %g to %g mL, which was not tested.", last, c.CapacityML))
	}
	if c.LimitStatus == LimitMemory {
		parts = append(parts, "The limit is unverified: compare it with the standard before relying on this statement.")
	}
	if c.LimitNote != "" {
		parts = append(parts, "Note: "+c.LimitNote+".")
	}
	return strings.Join(parts, " ")
}

func (c Conformity) judged() string {
	var at []string
	for _, p := range c.Points {
		at = append(at, fmt.Sprintf("%g", p.ReadingML))
	}
	return fmt.Sprintf("Judged were the corrections at %s mL and the difference between any two of them and the first mark, against the maximum permissible error of ± %g mL of %s, class %s.",
		list(at), c.MPEML, c.Standard, c.Class)
}

func (c Conformity) outcome() string {
	verdict := map[string]string{
		Meets: "meets the specification", DoesNotMeet: "does not meet the specification",
		ConditionalPass: "is a conditional pass", ConditionalFail: "is a conditional fail",
	}[c.Verdict]
	d := c.Decimals
	return fmt.Sprintf("The burette %s. Nearest to the limit: %+.*f mL with U = %.*f mL at %g mL, and %+.*f mL with U = %.*f mL from %g to %g mL.",
		verdict, d, c.WorstPoint.CorrectionML, d, c.WorstPoint.ExpandedML, c.WorstPoint.ReadingML,
		d, c.WorstPair.DifferenceML, d, c.WorstPair.ExpandedML, c.WorstPair.FromML, c.WorstPair.ToML)
}

func (c Conformity) ruleWords() string {
	w := "w = U"
	if c.GuardR != 1 {
		w = fmt.Sprintf("w = %g U", c.GuardR)
	}
	words := map[string]string{
		RuleSimple:    "simple acceptance (ILAC-G8:09/2019 4.2.1), w = 0: a value counts as within when it does not exceed the limit",
		RuleGuarded:   "binary with guard band (ILAC-G8:09/2019 4.2.2), " + w + ": a value counts as within when it does not exceed the limit less w",
		RuleNonBinary: "non-binary with guard band (ILAC-G8:09/2019 4.2.3), " + w + ": pass up to the limit less w, conditional pass up to the limit, conditional fail up to the limit plus w, fail beyond",
	}[c.Rule]
	return fmt.Sprintf("Decision rule: %s. Values are rounded to %d decimals of a mL first, and a value on a boundary gets the better answer.", words, c.Decimals)
}

func (c Conformity) risk() string {
	third := "The largest U is at most a third of the limit."
	if !c.UWithin3rd {
		third = fmt.Sprintf("The largest U, %.*f mL, is more than a third of the limit.", c.Decimals, c.LargestUML)
	}
	return fmt.Sprintf("The probability that the burette keeps the limit everywhere at once is %s, so that of a false %s is %s (JCGM 106:2012). %s",
		probability(c.PConform), c.FalseKind, probability(c.PFalse), third)
}

// probability writes a probability in percent without claiming certainty.
func probability(p float64) string {
	switch {
	case p > 0.9999:
		return "above 99.99 %"
	case p < 0.0001:
		return "below 0.01 %"
	}
	return fmt.Sprintf("%.2f %%", 100*p)
}

// list joins words with commas and a last "and".
func list(words []string) string {
	if len(words) < 2 {
		return strings.Join(words, "")
	}
	return strings.Join(words[:len(words)-1], ", ") + " and " + words[len(words)-1]
}
