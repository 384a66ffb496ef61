package calc

import (
	"math"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

var fivePoints = []float64{10, 20, 30, 40, 50}

// An independent model of the same inputs, programmed in another language: stepwise with
// reading 0.006 mL, weighing 0.12 mg, delivery 3 µL and thermometer 0.05 °C, u grows
// from 7.0 to 8.4 µL over five segments of 10 mL with two replicates, not by √5: the
// shared readings cancel.
func TestPlanningStepwiseReadingsCancel(t *testing.T) {
	in := DefaultInputs()
	in.UReadingML, in.UWeighingG, in.UDeliveryML, in.UThermometerC = 0.006, 1.2e-4, 0.003, 0.05
	f, err := Foresee(in, Layout{fivePoints, 2, readStepwise, weighSeparate}, OrdinaryRoom(), classA50)
	if err != nil {
		t.Fatal(err)
	}
	if first, last := f.Points[0].UML, f.Points[4].UML; last/first > 1.4 || last/first < 1.1 {
		t.Errorf("u grows from %.5f to %.5f mL", first, last)
	}
	// by hand: u² = (2·0.006² + k·(0.003² + 2·0.00012²))/2 + shared, k segments
	shared := f.floor[0]
	want := math.Sqrt((2*0.006*0.006+0.003*0.003+2*1.2e-4*1.2e-4*1.0057)/2 + shared)
	if math.Abs(f.Points[0].UML-want) > 2e-6 {
		t.Errorf("u at the first point %.6f, by hand %.6f mL", f.Points[0].UML, want)
	}
}

// The variance of a point is R/n + F, so that the forecast for n replicates follows
// from that for one; a fit of n replicates must agree.
func TestPlanningVarianceFallsWithReplicates(t *testing.T) {
	for _, reading := range []string{readStepwise, readFromZero} {
		for _, weighing := range []string{weighSeparate, weighRunning, weighTared} {
			one, err := Foresee(DefaultInputs(), Layout{fivePoints, 1, reading, weighing}, OrdinaryRoom(), MPE{})
			if err != nil {
				t.Fatal(err)
			}
			seven, err := Foresee(DefaultInputs(), Layout{fivePoints, 7, reading, weighing}, OrdinaryRoom(), MPE{})
			if err != nil {
				t.Fatal(err)
			}
			for i := range fivePoints {
				want := math.Sqrt(one.random[i]/7 + one.floor[i])
				if math.Abs(seven.Points[i].UML/want-1) > 1e-9 {
					t.Errorf("%s, %s, point %d: %.10g, R/n + F %.10g", reading, weighing, i, seven.Points[i].UML, want)
				}
			}
		}
	}
}

// What is proposed reaches the goal, and one replicate less does not.
func TestPlanningProposalIsTheSmallest(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		in := DefaultInputs()
		in.UReadingML = rapid.Float64Range(0.002, 0.01).Draw(t, "u reading")
		goal := Goal{ExpandedML: rapid.Float64Range(0.003, 0.02).Draw(t, "wanted U")}
		all, err := Propose(in, fivePoints, OrdinaryRoom(), goal)
		if err != nil {
			t.Fatal(err)
		}
		for _, p := range all {
			if p.Reached != (p.Forecast.LargestUML <= goal.ExpandedML*(1+1e-9)) {
				t.Errorf("%s", p.Words)
			}
			if p.Replicates == 0 && p.Forecast.FloorUML < goal.ExpandedML {
				t.Errorf("the floor %g is below the goal %g: %s", p.Forecast.FloorUML, goal.ExpandedML, p.Words)
			}
			if !p.Reached || p.Replicates == 1 {
				continue
			}
			l := p.Forecast.Layout
			l.Replicates--
			less, err := Foresee(in, l, OrdinaryRoom(), MPE{})
			if err != nil {
				t.Fatal(err)
			}
			if less.LargestUML <= goal.ExpandedML {
				t.Errorf("%d replicates reach it too: %s", l.Replicates, p.Words)
			}
		}
	})
}

func TestPlanningSortsByWork(t *testing.T) {
	all, err := Propose(DefaultInputs(), fivePoints, OrdinaryRoom(), GoalOfRatio(classA50, 3))
	if err != nil {
		t.Fatal(err)
	}
	if len(all) != 6 || !all[0].Reached {
		t.Fatalf("%d proposals, first: %s", len(all), all[0].Words)
	}
	for i := 1; i < len(all); i++ {
		a, b := all[i-1].Forecast, all[i].Forecast
		if all[i].Reached && (a.Deliveries > b.Deliveries || a.Deliveries == b.Deliveries && a.Weighings > b.Weighings) {
			t.Errorf("%d deliveries, %d weighings before %d, %d", a.Deliveries, a.Weighings, b.Deliveries, b.Weighings)
		}
	}
	if f := all[0].Forecast; !f.Within3rd || f.TestRatio < 3 || f.Layout.WeighingPattern != weighRunning {
		t.Errorf("best: %+v", f.Layout)
	}
}

// A 1 mL burette of class A needs U ≤ 0.002 mL, barely reachable by eye: a thermometer
// that is common to the run can make it unreachable, and the answer says so.
func TestPlanningSaysWhenNothingReaches(t *testing.T) {
	in := DefaultInputs()
	in.UThermometerC = 2
	all, err := Propose(in, fivePoints, OrdinaryRoom(), Goal{ExpandedML: 0.01})
	if err != nil {
		t.Fatal(err)
	}
	for _, p := range all {
		if p.Reached || p.Replicates != 0 || !strings.Contains(p.Words, "no number of replicates") || !strings.Contains(p.Words, "water thermometer") {
			t.Errorf("%d: %s", p.Replicates, p.Words)
		}
	}
	in = DefaultInputs()
	in.UReadingML = 0.03
	all, err = Propose(in, fivePoints, OrdinaryRoom(), Goal{ExpandedML: 0.004})
	if err != nil {
		t.Fatal(err)
	}
	if p := all[0]; p.Reached || p.Replicates <= MostReplicates || !strings.Contains(p.Words, "would take") || !strings.Contains(p.Words, "each burette reading") {
		t.Errorf("%d: %s", p.Replicates, p.Words)
	}
}

// Two settings of the meniscus dominate in a usual 50 mL burette.
func TestPlanningDominantInput(t *testing.T) {
	f, err := Foresee(DefaultInputs(), Layout{fivePoints, 3, readFromZero, weighSeparate}, OrdinaryRoom(), classA50)
	if err != nil {
		t.Fatal(err)
	}
	if f.Dominant[0].Input != "u_reading_mL" || f.Dominant[0].SharePct < 50 || f.Deliveries != 15 || f.Weighings != 30 {
		t.Errorf("%+v", f.Dominant[0])
	}
	if w := f.Words(); !strings.Contains(w, "15 deliveries") || !strings.Contains(w, "third") {
		t.Error(w)
	}
}

func TestPlanningRefuses(t *testing.T) {
	room := OrdinaryRoom()
	for _, tt := range []struct {
		name string
		l    Layout
	}{
		{"no replicate", Layout{fivePoints, 0, readStepwise, weighSeparate}},
		{"no points", Layout{nil, 1, readStepwise, weighSeparate}},
		{"falling points", Layout{[]float64{20, 10}, 1, readFromZero, weighSeparate}},
		{"reading pattern", Layout{fivePoints, 1, "", weighSeparate}},
		{"weighing pattern", Layout{fivePoints, 1, readStepwise, "guessed"}},
	} {
		if f, err := Foresee(DefaultInputs(), tt.l, room, MPE{}); err == nil {
			t.Errorf("%s: %+v", tt.name, f)
		}
	}
	if _, err := Propose(DefaultInputs(), fivePoints, room, Goal{}); err == nil {
		t.Error("a goal of 0 was accepted")
	}
	room.WaterTempC = 60
	if _, err := Foresee(DefaultInputs(), Layout{fivePoints, 1, readStepwise, weighSeparate}, room, MPE{}); err == nil {
		t.Error("hot water was accepted")
	}
}

// Between points the bridge adds rate·L/4 halfway, by hand; more points shorten L.
func TestPlanningPoints(t *testing.T) {
	earlier := useCurve()
	earlier.BridgeRateML2PerML, earlier.BridgeNu = 1.1e-5, 5
	all, err := ProposePoints(DefaultInputs(), 50, OrdinaryRoom(), Goal{ExpandedML: 0.017, MPE: classA50}, earlier)
	if err != nil {
		t.Fatal(err)
	}
	best := all[0]
	if !best.Reached || len(best.Forecast.Layout.PointsML) < 4 || best.Forecast.BetweenUML > 0.017 || best.Forecast.LargestUML > 0.017 {
		t.Errorf("%s", best.Words)
	}
	two := false
	for i, p := range all {
		if len(p.Forecast.Layout.PointsML) == 2 {
			two = true
			if p.Reached || !strings.Contains(p.Words, "do not reach") {
				t.Errorf("25 mL are too long a way: %s", p.Words)
			}
		}
		if i > 0 && p.Reached && p.Forecast.Deliveries < all[i-1].Forecast.Deliveries {
			t.Errorf("not in order of work: %s", p.Words)
		}
	}
	if !two {
		t.Error("two points were not tried")
	}
	one, err := Foresee(DefaultInputs(), Layout{fivePoints, 1, readFromZero, weighSeparate}, OrdinaryRoom(), MPE{})
	if err != nil {
		t.Fatal(err)
	}
	_, between, err := one.curve.largestU(3, earlier)
	if err != nil {
		t.Fatal(err)
	}
	// halfway between 40 and 50 mL
	random := (one.random[3] + one.random[4]) / 4 / 3
	shared := math.Pow((math.Sqrt(one.floor[3])+math.Sqrt(one.floor[4]))/2, 2) // nearly one variable
	bridge := 1.1e-5 * 10 / 4
	total := random + shared + bridge
	k, err := CoverageFactor(0.9545, 5*total*total/(bridge*bridge))
	if err != nil || math.Abs(between/(k*math.Sqrt(total))-1) > 0.01 {
		t.Errorf("U halfway %.5f, by hand %.5f mL, %v", between, k*math.Sqrt(total), err)
	}
	if _, err := ProposePoints(DefaultInputs(), 0, OrdinaryRoom(), Goal{ExpandedML: 0.02}, earlier); err == nil {
		t.Error("a burette of 0 mL")
	}
}
