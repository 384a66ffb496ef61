package calc

import (
	"fmt"
	"math"
)

// pointCounts are the numbers of equally spaced points that ProposePoints tries.
var pointCounts = []int{2, 4, 5, 8, 10, 20, 25, 40, 50}

// ProposePoints gives, for equally spaced points and either pattern of reading, the
// least work that reaches the goal at the test points and halfway between them. Between
// points the burette's own wander counts; its rate is taken from an earlier calibration
// of the burette (or of one like it), with the few degrees of freedom it has. More
// points shorten the way that the curve can wander.
func ProposePoints(in Inputs, capacityML float64, room Conditions, goal Goal, earlier *Curve) ([]Proposal, error) {
	if !(goal.ExpandedML > 0) || math.IsInf(goal.ExpandedML, 1) || !(capacityML > 0) {
		return nil, fmt.Errorf("plan: a wanted U of %g mL for %g mL", goal.ExpandedML, capacityML)
	}
	var all []Proposal
	for _, count := range pointCounts {
		points := make([]float64, count)
		for i := range points {
			points[i] = capacityML * float64(i+1) / float64(count)
		}
		for _, reading := range []string{readStepwise, readFromZero} {
			p, err := proposeAnywhere(in, Layout{points, 1, reading, weighSeparate}, room, goal, earlier)
			if err != nil {
				return nil, err
			}
			all = append(all, p)
		}
	}
	leastWork(all)
	return all, nil
}

func proposeAnywhere(in Inputs, l Layout, room Conditions, goal Goal, earlier *Curve) (Proposal, error) {
	once, err := Foresee(in, l, room, goal.MPE)
	if err != nil {
		return Proposal{}, err
	}
	p := Proposal{Reached: true}
	anywhere := 0.0
	for n := 1; ; n++ {
		var between float64
		if anywhere, between, err = once.curve.largestU(n, earlier); err != nil {
			return Proposal{}, fmt.Errorf("plan: %w", err)
		}
		p.Replicates, p.Forecast.BetweenUML = n, between
		if anywhere <= goal.ExpandedML {
			break
		}
		if n == MostReplicates {
			p.Reached, p.Replicates = false, 0
			break
		}
	}
	between := p.Forecast.BetweenUML
	l.Replicates = max(p.Replicates, 1)
	if !p.Reached {
		l.Replicates = MostReplicates
	}
	if p.Forecast, err = Foresee(in, l, room, goal.MPE); err != nil {
		return Proposal{}, err
	}
	p.Forecast.BetweenUML = between
	p.Words = p.pointWords(goal, anywhere)
	return p, nil
}

func (p Proposal) pointWords(goal Goal, anywhere float64) string {
	l := p.Forecast.Layout
	if !p.Reached {
		return fmt.Sprintf("%d points, %s: %d replicates do not reach U = %.4g mL everywhere; they reach %.4g mL.",
			len(l.PointsML), l.ReadingPattern, MostReplicates, goal.ExpandedML, anywhere)
	}
	return fmt.Sprintf("%d points, %s, %d replicates: %s", len(l.PointsML), l.ReadingPattern, p.Replicates, p.Forecast.Words())
}

// largestU gives the largest U at or halfway between points, and halfway alone, that n
// replicates of what c is one of would give a burette that wanders as earlier did.
func (c *Curve) largestU(n int, earlier *Curve) (anywhere, between float64, err error) {
	many := &Curve{
		FirstML: c.FirstML, Points: c.Points, Birge: 1, Inputs: c.Inputs, factors: c.factors,
		CovarianceML2: square(len(c.Points), len(c.Points)), RandomML2: square(len(c.Points), len(c.Points)),
		BridgeRateML2PerML: earlier.BridgeRateML2PerML, BridgeNu: earlier.BridgeNu,
	}
	for i := range c.Points {
		for j := range c.Points {
			random := c.RandomML2[i][j]
			many.RandomML2[i][j] = random / float64(n)
			many.CovarianceML2[i][j] = c.CovarianceML2[i][j] - random + random/float64(n)
		}
	}
	left := c.FirstML
	for _, p := range c.Points {
		half, err := many.At((left + p.ReadingML) / 2)
		if err != nil {
			return 0, 0, err
		}
		at, err := many.At(p.ReadingML)
		if err != nil {
			return 0, 0, err
		}
		between, left = max(between, half.ExpandedML), p.ReadingML
		anywhere = max(anywhere, between, at.ExpandedML)
	}
	return anywhere, between, nil
}
