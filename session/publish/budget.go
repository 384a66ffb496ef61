package publish

import (
	"context"
	"fmt"
	"strings"

	"tenthmark/calc"
)

// The simulation that checks the uncertainty: enough trials for two significant
// digits, and always the same ones, so that the document can be made again.
const (
	checkTrials = 200_000
	checkSeed   = 1
)

// uncertaintyText lays the uncertainty open: every input of every point, what was
// done about scatter, and the check by propagating distributions.
func uncertaintyText(m Material) ([]byte, error) {
	var b strings.Builder
	fmt.Fprintf(&b, "UNCERTAINTY of run %s, burette %s\n\nFirst order by JCGM 100, full covariance; coverage probability %g.\n", m.Document.Run.ID, m.Document.Run.Burette.Name, m.Document.Inputs.CoverageProbability)
	for i, p := range m.Curve.Points {
		fmt.Fprintf(&b, "\nPoint %g mL: correction %+.5f mL, u = %.5f mL, degrees of freedom %s, k = %.3f, U = %.5f mL\n", p.ReadingML, p.CorrectionML, p.UML, degrees(p.NuEff), p.K, p.ExpandedML)
		fmt.Fprintf(&b, "  %-46s %5s %12s %-12s %13s %12s %6s %7s\n", "input", "count", "u", "distribution", "sensitivity", "u(C), mL", "nu", "share")
		lines, err := m.Curve.Budget(i)
		if err != nil {
			return nil, err
		}
		for _, line := range lines {
			fmt.Fprintf(&b, "  %-46s %5d %12.3g %-12s %13.4g %12.3e %6s %6.1f %%\n", line.What+", "+line.Unit, line.Count, line.U, line.Distribution, line.Sensitivity, line.Contribution, degrees(line.Nu), line.SharePct)
		}
	}
	fmt.Fprintf(&b, "\nScatter: chi² = %.2f with %d degrees of freedom, Birge ratio %.3f. %s\n", m.Curve.Chi2, m.Curve.Nu, m.Curve.Birge, calc.BirgeRule)
	fmt.Fprintf(&b, "Between the points the curve counts as wandering at %.2e mL²/mL (degrees of freedom %s).\n", m.Curve.BridgeRateML2PerML, degrees(m.Curve.BridgeNu))
	writeResiduals(&b, m.Curve)
	err := writeSimulation(&b, m)
	return []byte(b.String()), err
}

func degrees(nu calc.DegreesOfFreedom) string {
	if float64(nu) > 1e6 {
		return "inf"
	}
	return fmt.Sprintf("%.1f", float64(nu))
}

func writeResiduals(b *strings.Builder, c *calc.Curve) {
	fmt.Fprintf(b, "\nResiduals (observed minus fitted; leave-one-out: minus what all the others predict)\n  delivery   residual, mL   leave-one-out, mL   normalised\n")
	for _, r := range c.Residuals {
		mark := ""
		if r.Flag {
			mark = "  flagged"
		}
		fmt.Fprintf(b, "  %8d   %+12.5f   %+17.5f   %+10.2f%s\n", r.Delivery, r.ResidualML, r.LeaveOneOutML, r.Normalised, mark)
	}
	fmt.Fprintf(b, "%s Nothing is removed.\n", calc.FlagRule)
}

func writeSimulation(b *strings.Builder, m Material) error {
	result, err := calc.MonteCarlo(context.Background(), m.Document.Inputs, points(m.Curve), m.Deliveries, calc.Simulation{Trials: checkTrials, Seed: checkSeed})
	if err != nil {
		return err
	}
	fmt.Fprintf(b, "\nCheck by simulation (JCGM 101): %d trials, seed %d\n  reading, mL   correction, mL      u, mL   interval, mL              against first order\n", result.Trials, result.Seed)
	for _, p := range result.Points {
		fmt.Fprintf(b, "  %11g   %+14.5f   %8.5f   %+.5f to %+.5f   %s (ends differ by %+.5f and %+.5f, tolerance %.5f)\n",
			p.ReadingML, p.CorrectionML, p.UML, p.SymmetricML.Low, p.SymmetricML.Up, p.Agreement, p.DLowML, p.DHighML, p.ToleranceML)
	}
	fmt.Fprintf(b, "Together: %s. %s\n", result.Agreement, result.Rule)
	return nil
}

func points(c *calc.Curve) []float64 {
	all := make([]float64, len(c.Points))
	for i, p := range c.Points {
		all[i] = p.ReadingML
	}
	return all
}
