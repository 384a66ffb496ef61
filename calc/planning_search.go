package calc

import (
	"fmt"
	"math"
	"sort"
)

// Goal is the expanded uncertainty wanted at every test point.
type Goal struct {
	ExpandedML float64 // mL, above 0
	MPE        MPE     // against which it is shown; may be the zero MPE
}

// GoalOfRatio is the goal of a test uncertainty ratio MPE/U; 3 is that of JCGM 106:2012
// 8.2.3.
func GoalOfRatio(mpe MPE, ratio float64) Goal { return Goal{mpe.LimitML / ratio, mpe} }

// Proposal is the smallest number of replicates that reaches a goal in one pattern.
type Proposal struct {
	Reached    bool     `json:"reached"`
	Replicates int      `json:"replicates"` // needed; 0 when no number is enough
	Forecast   Forecast `json:"forecast"`   // of the needed replicates, at most MostReplicates
	Words      string   `json:"words"`
}

// Propose gives for every pattern of reading and weighing the fewest replicates that
// reach the goal at all test points, the least work first: see leastWork.
// Patterns that cannot reach it come last and say why.
//
// The variance of a point is R/n + F: R from the facts of one replicate, F from what
// the whole run shares. No number of replicates gets below k·√F.
func Propose(in Inputs, pointsML []float64, room Conditions, goal Goal) ([]Proposal, error) {
	if !(goal.ExpandedML > 0) || math.IsInf(goal.ExpandedML, 1) {
		return nil, fmt.Errorf("plan: a wanted U of %g mL", goal.ExpandedML)
	}
	var all []Proposal
	for _, reading := range []string{readStepwise, readFromZero} {
		for _, weighing := range []string{weighSeparate, weighRunning, weighTared} {
			p, err := propose(in, Layout{pointsML, 1, reading, weighing}, room, goal)
			if err != nil {
				return nil, err
			}
			all = append(all, p)
		}
	}
	leastWork(all)
	return all, nil
}

// leastWork sorts proposals: those that reach the goal first, then by deliveries,
// weighings, fills of the burette and U.
func leastWork(all []Proposal) {
	sort.SliceStable(all, func(i, j int) bool {
		a, b := all[i].Forecast, all[j].Forecast
		switch {
		case all[i].Reached != all[j].Reached:
			return all[i].Reached
		case a.Deliveries != b.Deliveries:
			return a.Deliveries < b.Deliveries
		case a.Weighings != b.Weighings:
			return a.Weighings < b.Weighings
		case a.Fills != b.Fills:
			return a.Fills < b.Fills
		}
		return a.LargestUML < b.LargestUML
	})
}

func propose(in Inputs, l Layout, room Conditions, goal Goal) (Proposal, error) {
	once, err := Foresee(in, l, room, goal.MPE)
	if err != nil {
		return Proposal{}, err
	}
	k, err := CoverageFactor(in.CoverageProbability, math.Inf(1))
	if err != nil {
		return Proposal{}, fmt.Errorf("plan: %w", err)
	}
	p := Proposal{Replicates: replicatesFor(once, goal.ExpandedML/k)}
	l.Replicates = min(max(p.Replicates, 1), MostReplicates)
	if p.Replicates == 0 {
		l.Replicates = MostReplicates
	}
	if p.Forecast, err = Foresee(in, l, room, goal.MPE); err != nil {
		return Proposal{}, err
	}
	p.Reached = p.Replicates > 0 && p.Replicates <= MostReplicates
	p.Words = p.words(goal)
	return p, nil
}

// replicatesFor gives the fewest replicates for a standard uncertainty at every point,
// 0 when none is enough.
func replicatesFor(once Forecast, u float64) int {
	n := 1
	for i := range once.random {
		room := u*u - once.floor[i]
		if room <= 0 {
			return 0
		}
		need := math.Ceil(once.random[i] / room * (1 - 1e-12)) // a goal met exactly is met
		if need > 1e6 {
			return 0
		}
		n = max(n, int(need))
	}
	return n
}

func (p Proposal) words(goal Goal) string {
	f := p.Forecast
	pattern := f.Layout.ReadingPattern + ", weighed " + f.Layout.WeighingPattern
	switch {
	case p.Replicates == 0:
		return fmt.Sprintf("%s: no number of replicates reaches U = %.4g mL. What the whole run shares alone gives U = %.4g mL; most of that is %s.",
			pattern, goal.ExpandedML, f.FloorUML, f.floorLine.What)
	case !p.Reached:
		return fmt.Sprintf("%s: U = %.4g mL would take %d replicates. The largest part is %s: make that smaller.",
			pattern, goal.ExpandedML, p.Replicates, f.Dominant[0].What)
	case p.Replicates == 1:
		return fmt.Sprintf("%s: one delivery a point is enough for U = %.4g mL; two or more show whether deliveries repeat. %s",
			pattern, goal.ExpandedML, f.Words())
	}
	return fmt.Sprintf("%s, %d replicates: %s", pattern, p.Replicates, f.Words())
}
