package calc

import (
	"fmt"
	"math"
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
	if w.WeightDensityKgM3 > 0 {
		fmt.Fprintf(&b, "net        = after − before + evaporation, g\n")
		fmt.Fprintf(&b, "factor     = 1000·(1 − ρa/%g)/(ρw − ρa)·(1 − %g·(t − %g)), mL/g, densities in kg/m³, t in °C\n", w.WeightDensityKgM3, w.ExpansionPerC, w.ReferenceTempC)
	}
	b.WriteString("volume     = net × factor, mL\ncorrection = volume − (end − start), mL; it is added to a reading\n")
	for _, s := range w.Intervals {
		s.write(&b)
	}
	w.writeSums(&b)
	return b.String()
}

func (s SheetInterval) write(b *strings.Builder) {
	fmt.Fprintf(b, "\nFrom %g to %g mL\n", s.FromML, s.ToML)
	fmt.Fprintf(b, "%8s %8s %8s %10s %10s %9s %6s %9s %8s %9s %9s %10s\n",
		"delivery", "start", "end", "before", "after", "net", "t", "ρw", "ρa", "factor", "volume", "correction")
	for _, e := range s.Entries {
		fmt.Fprintf(b, "%8d %8.3f %8.3f %10.4f %10.4f %9.4f %6.2f %9.4f %8.5f %9.6f %9.5f %+10.5f\n",
			e.Delivery, e.StartML, e.EndML, e.BeforeG, e.AfterG, e.NetMassG, e.WaterTempC, e.WaterDensityKgM3, e.AirDensityKgM3, e.FactorMLPerG, e.VolumeML, e.CorrectionML)
	}
	spread := ""
	if len(s.Entries) > 1 {
		spread = fmt.Sprintf("   s = %.5f", s.SML)
	}
	fmt.Fprintf(b, "%104s %+10.5f%s\n", fmt.Sprintf("mean of %d", len(s.Entries)), s.MeanML, spread)
}

func (w Worksheet) writeSums(b *strings.Builder) {
	fmt.Fprintf(b, "\nSummed up the scale from %g mL, where the correction is 0\n", w.FirstML)
	fmt.Fprintf(b, "%10s %28s %11s %11s %11s\n", "reading", "sum", "correction", "curve", "difference")
	for _, p := range w.Points {
		fmt.Fprintf(b, "%10g %28s %+11.5f %+11.5f %+11.5f\n", p.ReadingML, p.Steps, p.CorrectionML, p.CurveML, printed(p.DifferenceML))
	}
	if w.PooledNu > 0 {
		fmt.Fprintf(b, "\nPooled standard deviation of a delivery: %.5f mL with %d degrees of freedom.\n", w.PooledSML, w.PooledNu)
	}
	fmt.Fprintf(b, "\n%s\n", w.Verdict())
}

// printed drops the sign of what five decimals print as zero.
func printed(ml float64) float64 {
	if math.Abs(ml) < 5e-6 {
		return 0
	}
	return ml
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
