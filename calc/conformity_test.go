package calc

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// handCurve is a curve with given corrections and covariance, as if a calibration had
// given it, with k = 2.
func handCurve(readings, corrections []float64, covariance [][]float64) *Curve {
	c := &Curve{CovarianceML2: covariance, Birge: 1, BridgeNu: DegreesOfFreedom(math.Inf(1)), Inputs: DefaultInputs(), RandomML2: covariance}
	c.Inputs.CoverageProbability = 0.954499736103642 // k = 2
	for i, r := range readings {
		c.Points = append(c.Points, Point{ReadingML: r, CorrectionML: corrections[i]})
	}
	for i := range readings {
		c.Points[i], _ = c.At(readings[i])
	}
	return c
}

// diagonal gives independent points of standard uncertainty u.
func diagonal(n int, u float64) [][]float64 {
	m := make([][]float64, n)
	for i := range m {
		m[i] = make([]float64, n)
		m[i][i] = u * u
	}
	return m
}

var classA50 = MPE{LimitML: 0.05, Class: "A", CapacityML: 50, SubdivisionML: 0.1, Standard: "ISO 385:2005", Status: LimitSecondhand}

func TestConformityDecisions(t *testing.T) {
	words := map[string]string{"pass": Meets, "fail": DoesNotMeet, "conditional pass": ConditionalPass, "conditional fail": ConditionalFail}
	for _, r := range csvRows(t, "decision_50mL_class_A.csv") {
		c := handCurve([]float64{50}, []float64{-dec(t, r[0])}, diagonal(1, dec(t, r[1])/2))
		for i, name := range []string{RuleSimple, RuleGuarded, RuleNonBinary} {
			got, err := Assess(c, classA50, Rule{Name: name})
			if err != nil {
				t.Fatal(err)
			}
			if want := words[r[3+i]]; got.Verdict != want {
				t.Errorf("error %s mL, %s: %s, want %s", r[0], name, got.Verdict, want)
			}
			near(t, "error "+r[0]+": p_conform", got.PConform, r[6])
			near(t, "error "+r[0]+": p at the point", got.WorstPoint.PConform, r[6])
		}
	}
}

// The two-point rule: JJG 196-2006 for burettes, and ISO 4788 (as NTC 2321) for
// cylinders, in the same words; for ISO 385:2005 clause 6 from memory.
func TestConformityTwoPointRule(t *testing.T) {
	for _, r := range csvRows(t, "two_point_rule.csv") {
		var readings, corrections []float64
		everyPoint := true
		for i, e := range strings.Fields(r[1]) {
			readings = append(readings, float64(10*(i+1)))
			corrections = append(corrections, -dec(t, e))
			everyPoint = everyPoint && math.Abs(dec(t, e)) <= 0.05
		}
		got, err := Assess(handCurve(readings, corrections, diagonal(len(readings), 1e-4)), classA50, Rule{})
		if err != nil {
			t.Fatal(err)
		}
		near(t, r[0]+": span", got.SpanML, r[3])
		near(t, r[0]+": largest error", math.Abs(got.WorstPoint.CorrectionML), r[2])
		if (r[5] == "True") != (got.Verdict == Meets) {
			t.Errorf("%s: %s", r[0], got.Verdict)
		}
		if (r[4] == "True") != everyPoint {
			t.Errorf("%s: the fixture's point by point answer is wrong", r[0])
		}
	}
}

// Errors of +0.04 and −0.03 mL pass point by point and differ by 0.07 mL.
func TestConformityNamesTheWorstPair(t *testing.T) {
	c := handCurve([]float64{10, 20, 30, 40, 50}, []float64{-0.04, -0.03, -0.01, 0.01, 0.03}, diagonal(5, 0.003))
	got, err := Assess(c, classA50, Rule{})
	if err != nil {
		t.Fatal(err)
	}
	p := got.WorstPair
	if p.FromML != 10 || p.ToML != 50 || math.Abs(p.DifferenceML-0.07) > 1e-12 || p.Verdict != DoesNotMeet {
		t.Errorf("worst pair %+v", p)
	}
	if got.WorstPoint.ReadingML != 10 || got.WorstPoint.Verdict != Meets {
		t.Errorf("worst point %+v", got.WorstPoint)
	}
	if got.FalseKind != "rejection" || got.PFalse != got.PConform {
		t.Errorf("a rejection can only be false by rejecting: %+v", got)
	}
}

// The guard on a pair is U of the difference. With fully correlated points it is next
// to nothing, with independent ones √2 times that of a point.
func TestConformityGuardUsesTheCovariance(t *testing.T) {
	u := 0.006
	shared := [][]float64{{u * u, 0.999 * u * u}, {0.999 * u * u, u * u}}
	for _, tt := range []struct {
		name    string
		cov     [][]float64
		want    string
		wantU   float64
		wantFor [2]float64
	}{
		{"shared", shared, Meets, 2 * u * math.Sqrt(0.002), [2]float64{25, 50}},
		{"independent", diagonal(2, u), DoesNotMeet, 2 * u * math.Sqrt2, [2]float64{25, 50}},
	} {
		c := handCurve([]float64{25, 50}, []float64{-0.02, 0.02}, tt.cov)
		got, err := Assess(c, classA50, Rule{Name: RuleGuarded})
		if err != nil {
			t.Fatal(err)
		}
		pair, err := c.Between(25, 50)
		if err != nil || math.Abs(pair.ExpandedML-tt.wantU) > 1e-12 {
			t.Errorf("%s: U of the pair %g, want %g", tt.name, pair.ExpandedML, tt.wantU)
		}
		if got.Verdict != tt.want || got.WorstPair.FromML != tt.wantFor[0] || got.WorstPair.ToML != tt.wantFor[1] {
			t.Errorf("%s: %s, %+v", tt.name, got.Verdict, got.WorstPair)
		}
	}
}

// A difference that is the limit in decimals is 0.05000000000000000277 in binary.
func TestConformityBoundaryIsDecimal(t *testing.T) {
	c := handCurve([]float64{10, 20}, []float64{0.03, 0.03 - 0.08}, diagonal(2, 1e-6))
	if d := 0.03 - 0.08; d > -0.05 {
		t.Skip("binary arithmetic is exact here")
	}
	wide := MPE{LimitML: 0.08, Class: "A", Standard: "ISO 385:2005"}
	got, err := Assess(c, wide, Rule{})
	if err != nil || got.Verdict != Meets || got.Decimals != 4 {
		t.Errorf("%s at %d decimals, %v", got.Verdict, got.Decimals, err)
	}
	fine := MPE{LimitML: 0.006, Class: "A"}
	if got, err := Assess(c, fine, Rule{}); err != nil || got.Decimals != 5 {
		t.Errorf("%d decimals, %v", got.Decimals, err)
	}
}

// JCGM 106:2012 8.2.3: accept when |e| ≤ E_max and U ≤ E_max/3; thirds of the limits of
// ISO 385:2005 computed by hand.
func TestConformityThirdOfTheLimit(t *testing.T) {
	for _, r := range csvRows(t, "limits_iso385_2005.csv") {
		mpe, err := Limit("", "A", dec(t, r[0]), dec(t, r[1]))
		if err != nil {
			t.Fatal(err)
		}
		near(t, r[0]+" mL: MPE/3", mpe.LimitML/3, r[4])
		for _, c := range []struct {
			factor float64
			want   bool
		}{{1, true}, {1.02, false}} {
			curve := handCurve([]float64{dec(t, r[0])}, []float64{0}, diagonal(1, c.factor*mpe.LimitML/6))
			got, err := Assess(curve, mpe, Rule{})
			if err != nil || got.UWithin3rd != c.want {
				t.Errorf("%s mL, U = %g: within a third %v, %v", r[0], got.LargestUML, got.UWithin3rd, err)
			}
		}
	}
}

func TestConformityRefuses(t *testing.T) {
	c := handCurve([]float64{50}, []float64{0.01}, diagonal(1, 0.003))
	for _, tt := range []struct {
		name  string
		curve *Curve
		mpe   MPE
		rule  Rule
	}{
		{"rule not known", c, classA50, Rule{Name: "lenient"}},
		{"negative guard band", c, classA50, Rule{Name: RuleGuarded, R: -1}},
		{"no limit", c, MPE{}, Rule{}},
		{"limit not a number", c, MPE{LimitML: math.NaN()}, Rule{}},
		{"no points", &Curve{}, classA50, Rule{}},
		{"correction not a number", handCurve([]float64{50}, []float64{math.NaN()}, diagonal(1, 0.003)), classA50, Rule{}},
	} {
		if got, err := Assess(tt.curve, tt.mpe, tt.rule); err == nil {
			t.Errorf("%s: %+v", tt.name, got)
		}
	}
	var r *Refusal
	if _, err := Assess(c, classA50, Rule{Name: "lenient"}); !errors.As(err, &r) || r.Hint == "" {
		t.Errorf("no hint: %v", err)
	}
}

// ISO/IEC 17025:2017 7.8.6.2: the statement names the results, the specification and
// the rule.
func TestConformityStatement(t *testing.T) {
	c := handCurve([]float64{10, 20, 30}, []float64{-0.01, 0.02, 0.012}, diagonal(3, 0.004))
	for rule, want := range map[string]string{RuleSimple: "4.2.1", RuleGuarded: "4.2.2", RuleNonBinary: "4.2.3"} {
		got, err := Assess(c, classA50, Rule{Name: rule})
		if err != nil {
			t.Fatal(err)
		}
		s := got.Statement()
		for _, part := range []string{"from 30 to 50 mL, which was not tested", "10, 20 and 30 mL", "ISO 385:2005, class A", "± 0.05 mL", "ILAC-G8:09/2019 " + want, "meets the specification", "from 10 to 20 mL"} {
			if !strings.Contains(s, part) {
				t.Errorf("%s: %q is missing in\n%s", rule, part, s)
			}
		}
	}
	memory, err := Limit("ASTM E287-02", "A", 50, 0.1)
	if err != nil {
		t.Fatal(err)
	}
	got, err := Assess(c, memory, Rule{})
	if err != nil || !strings.Contains(got.Statement(), "The limit is unverified") {
		t.Errorf("%v: %s", err, got.Statement())
	}
}

func TestConformityJSON(t *testing.T) {
	c := handCurve([]float64{10}, []float64{-0.01}, diagonal(1, 0.004))
	got, err := Assess(c, classA50, Rule{})
	if err != nil {
		t.Fatal(err)
	}
	b, err := json.Marshal(got)
	if err != nil {
		t.Fatal(err)
	}
	var m map[string]any
	if err := json.Unmarshal(b, &m); err != nil {
		t.Fatal(err)
	}
	for _, key := range []string{"class", "mpe_mL", "worst_point", "worst_pair", "rule", "verdict", "p_conform"} {
		if _, ok := m[key]; !ok {
			t.Errorf("%s is missing in %s", key, b)
		}
	}
	point, ok := m["worst_point"].(map[string]any)
	if !ok || point["reading_mL"] != 10.0 || point["correction_mL"] != -0.01 || point["U_mL"] == nil {
		t.Errorf("worst_point %v", m["worst_point"])
	}
}

// A verdict never gets better when the limit shrinks, and p_conform never grows.
func TestConformityMonotone(t *testing.T) {
	rank := map[string]int{Meets: 0, ConditionalPass: 1, ConditionalFail: 2, DoesNotMeet: 3}
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(1, 5).Draw(t, "points")
		var readings, corrections []float64
		for i := range n {
			readings = append(readings, float64(10*(i+1)))
			corrections = append(corrections, rapid.Float64Range(-0.06, 0.06).Draw(t, "correction"))
		}
		c := handCurve(readings, corrections, diagonal(n, rapid.Float64Range(0.001, 0.01).Draw(t, "u")))
		rule := Rule{Name: rapid.SampledFrom([]string{RuleSimple, RuleGuarded, RuleNonBinary}).Draw(t, "rule")}
		limit := rapid.Float64Range(0.01, 0.1).Draw(t, "limit")
		wide, err1 := Assess(c, MPE{LimitML: limit}, rule)
		tight, err2 := Assess(c, MPE{LimitML: 0.8 * limit}, rule)
		if err1 != nil || err2 != nil {
			t.Fatal(err1, err2)
		}
		if rank[tight.Verdict] < rank[wide.Verdict] || tight.PConform > wide.PConform+2e-4 {
			t.Errorf("limit %g: %s %g, 0.8 of it: %s %g", limit, wide.Verdict, wide.PConform, tight.Verdict, tight.PConform)
		}
		if wide.PConform > wide.WorstPair.PConform+2e-4 { // the integration's own error
			t.Errorf("all at once %g, the worst pair alone %g", wide.PConform, wide.WorstPair.PConform)
		}
	})
}

// The joint probability against counting: draw curves, look at the span.
func TestConformityJointProbability(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	for _, tt := range []struct {
		name string
		mean []float64
		u    float64
		rho  float64
		nu   float64
	}{
		{"easy", []float64{0.01, 0.02, -0.005, -0.01, 0.005}, 0.007, 0.3, math.Inf(1)},
		{"near", []float64{-0.0117, -0.0219, -0.0017, 0.0119, 0.0160}, 0.0069, 0.5, math.Inf(1)},
		{"hopeless", []float64{0.04, 0.03, 0, -0.03}, 0.008, 0.1, math.Inf(1)},
		{"few degrees of freedom", []float64{-0.0117, -0.0219, -0.0017, 0.0119, 0.0160}, 0.0069, 0.5, 5},
	} {
		n := len(tt.mean)
		cov := diagonal(n, tt.u)
		for i := range n {
			for j := range n {
				if i != j {
					cov[i][j] = tt.rho * tt.u * tt.u
				}
			}
		}
		p, se, err := spanProbability(tt.mean, cov, tt.nu, 0.05)
		if err != nil {
			t.Fatal(err)
		}
		const draws = 200000
		count := countWithin(rng, tt.mean, tt.u, tt.rho, tt.nu, draws)
		sd := math.Sqrt(max(p*(1-p), 1e-6)/draws) + se
		if se > 2e-4 || math.Abs(count-p) > 4.5*sd {
			t.Errorf("%s: %.5f ± %.1e, counted %.5f", tt.name, p, se, count)
		}
	}
}

// countWithin draws equicorrelated curves and counts those that span at most 0.05 mL.
func countWithin(rng *rand.Rand, mean []float64, u, rho, nu float64, draws int) float64 {
	within := 0
	for range draws {
		common, scale := rng.NormFloat64(), 1.0
		if !math.IsInf(nu, 1) {
			chi2 := 0.0
			for range int(nu) {
				z := rng.NormFloat64()
				chi2 += z * z
			}
			scale = math.Sqrt(nu / chi2)
		}
		lo, hi := 0.0, 0.0
		for _, m := range mean {
			v := m + scale*u*(math.Sqrt(rho)*common+math.Sqrt(1-rho)*rng.NormFloat64())
			lo, hi = min(lo, v), max(hi, v)
		}
		if hi-lo <= 0.05 {
			within++
		}
	}
	return float64(within) / float64(draws)
}

// The same curve always gives the same number, and a variance of 0 is allowed.
func TestConformityJointIsRepeatable(t *testing.T) {
	cov := diagonal(3, 0.006)
	cov[1][1] = 0
	a, _, err := spanProbability([]float64{0.01, 0.03, -0.01}, cov, math.Inf(1), 0.05)
	b, _, err2 := spanProbability([]float64{0.01, 0.03, -0.01}, cov, math.Inf(1), 0.05)
	if err != nil || err2 != nil || a != b || !(a > 0 && a < 1) {
		t.Errorf("%g, %g, %v, %v", a, b, err, err2)
	}
	if _, _, err := spanProbability([]float64{0, 0}, [][]float64{{1, 2}, {2, 1}}, math.Inf(1), 1); err == nil {
		t.Error("an indefinite covariance was accepted")
	}
}

// A plan of the largest size that a run takes.
func TestConformityManyPoints(t *testing.T) {
	var readings, corrections []float64
	for i := range 100 {
		readings = append(readings, float64(i+1)/2)
		corrections = append(corrections, 0.02*math.Sin(float64(i)/15))
	}
	c := handCurve(readings, corrections, diagonal(100, 0.002))
	got, err := Assess(c, classA50, Rule{Name: RuleGuarded})
	if err != nil || len(got.Points) != 100 || !(got.PConform > 0.9 && got.PConform <= 1) {
		t.Errorf("p %g, %v", got.PConform, err)
	}
}

// Statement in hand: an empty Conformity has none.
func TestConformityEmptyStatement(t *testing.T) {
	if s := (Conformity{}).Statement(); s != "" {
		t.Errorf("%q", s)
	}
}

func BenchmarkConformityJoint(b *testing.B) {
	c := handCurve([]float64{10, 20, 30, 40, 50}, []float64{-0.0117, -0.0219, -0.0017, 0.0119, 0.0160}, diagonal(5, 0.006))
	for _, nu := range []float64{math.Inf(1), 5} {
		b.Run(fmt.Sprintf("points=5/nu=%g", nu), func(b *testing.B) {
			for b.Loop() {
				if _, _, err := spanProbability([]float64{-0.0117, -0.0219, -0.0017, 0.0119, 0.0160}, c.CovarianceML2, nu, 0.05); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}
