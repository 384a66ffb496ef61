package calc

import (
	"fmt"
	"strings"
)

// sheetExact is up to which difference, mL, sheet and curve count as equal. In the
// classical case (equal replicates at nominal readings) what is left is that the curve
// takes each delivery's own mass and temperature for its uncertainty, which moves the
// weights of replicates in the seventh digit.
const sheetExact = 1e-6

// Text writes the sheet for a reviewer with a pocket calculator. It is calculated with
// all digits and rounded where it is printed, so that a sum may differ from its parts
// in the last digit.
func (w Worksheet) Text() string {
	var b strings.Builder
	b.WriteString("WORKED SHEET\n")
	b.WriteString("correction = net mass × factor − (end − start); it is added to a reading. mL, g, mL/g.\n")
	for _, s := range w.Intervals {
		fmt.Fprintf(&b, "\nFrom %g to %g mL\n", s.FromML, s.ToML)
		fmt.Fprintf(&b, "%10s %9s %9s %11s %10s %10s %11s\n", "delivery", "start", "end", "net mass", "factor", "volume", "correction")
		for _, e := range s.Entries {
			fmt.Fprintf(&b, "%10d %9.3f %9.3f %11.4f %10.6f %10.4f %+11.5f\n", e.Delivery, e.StartML, e.EndML, e.NetMassG, e.FactorMLPerG, e.VolumeML, e.CorrectionML)
		}
		spread := ""
		if len(s.Entries) > 1 {
			spread = fmt.Sprintf("   s = %.5f", s.SML)
		}
		fmt.Fprintf(&b, "%64s %+11.5f%s\n", fmt.Sprintf("mean of %d", len(s.Entries)), s.MeanML, spread)
	}
	w.writeSums(&b)
	return b.String()
}

func (w Worksheet) writeSums(b *strings.Builder) {
	fmt.Fprintf(b, "\nSummed up the scale from %g mL, where the correction is 0\n", w.FirstML)
	fmt.Fprintf(b, "%10s %28s %11s %11s %11s\n", "reading", "sum", "correction", "curve", "difference")
	for _, p := range w.Points {
		fmt.Fprintf(b, "%10g %28s %+11.5f %+11.5f %+11.5f\n", p.ReadingML, p.Steps, p.CorrectionML, p.CurveML, p.DifferenceML)
	}
	if w.PooledNu > 0 {
		fmt.Fprintf(b, "\nPooled standard deviation of a delivery: %.5f mL with %d degrees of freedom.\n", w.PooledSML, w.PooledNu)
	}
	fmt.Fprintf(b, "\n%s\n", w.Verdict())
}

// Verdict says how the sheet and the curve compare.
func (w Worksheet) Verdict() string {
	var s string
	if w.LargestDifference <= sheetExact {
		s = fmt.Sprintf("The curve is this calculation: the largest difference is %.1e mL, less than can be printed.", w.LargestDifference)
	} else {
		s = fmt.Sprintf("The curve lies up to %.5f mL from this calculation.", w.LargestDifference)
		if w.OffMarkML > 0 {
			s += fmt.Sprintf(" Readings lay up to %.3f mL from their marks: the sheet counts them as at the marks, the curve where they were.", w.OffMarkML)
		}
		s += " The curve also weighs deliveries by their uncertainties and knows which readings they share."
	}
	if len(w.Unreached) > 0 {
		s += fmt.Sprintf(" By hand there is no way to %v mL.", w.Unreached)
	}
	return s
}
