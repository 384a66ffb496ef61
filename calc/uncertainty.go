package calc

import (
	"fmt"
	"math"
)

// Standard uncertainties of the usual cases, JCGM 100:2008 4.3.7, 4.3.9 and F.2.2.1. All
// take limits or steps in the unit of the quantity.

// RectangularU is for limits ±a between which every value is as likely.
func RectangularU(a float64) float64 { return a / math.Sqrt(3) }

// TriangularU is for limits ±a with values near the middle more likely.
func TriangularU(a float64) float64 { return a / math.Sqrt(6) }

// ResolutionU is for a display with steps d.
func ResolutionU(d float64) float64 { return d / math.Sqrt(12) }

// MeniscusU is for setting or reading a meniscus with a standard uncertainty of the
// height, mm, in a bore, mm: height × cross section, mL. (Common practice, no source.)
func MeniscusU(uHeightMM, boreMM float64) float64 {
	return uHeightMM * math.Pi / 4 * boreMM * boreMM / 1000
}

// JudgedNu gives the degrees of freedom of an uncertainty that was judged to be right
// within a relative uncertainty: ½·relative⁻², JCGM 100:2008 (G.3).
func JudgedNu(relative float64) (DegreesOfFreedom, error) {
	if !(relative >= 0) {
		return 0, fmt.Errorf("degrees of freedom: a relative uncertainty of %g makes no sense", relative)
	}
	return DegreesOfFreedom(0.5 / (relative * relative)), nil
}

// TypeA is what repeated observations come to, JCGM 100:2008 4.2.
type TypeA struct {
	Mean float64
	S    float64 // experimental standard deviation of one observation
	U    float64 // of the mean
	Nu   DegreesOfFreedom
}

// Repeated evaluates at least two repeated observations.
func Repeated(values []float64) (TypeA, error) {
	n := float64(len(values))
	if len(values) < 2 {
		return TypeA{}, fmt.Errorf("repeated observations: %d are fewer than 2", len(values))
	}
	sum, squares := 0.0, 0.0
	for _, v := range values {
		sum += v
	}
	mean := sum / n
	for _, v := range values {
		squares += (v - mean) * (v - mean)
	}
	s := math.Sqrt(squares / (n - 1))
	if math.IsNaN(s) || math.IsInf(s, 0) {
		return TypeA{}, fmt.Errorf("repeated observations: a value is not finite")
	}
	return TypeA{mean, s, s / math.Sqrt(n), DegreesOfFreedom(n - 1)}, nil
}

// Combined is the outcome of a budget, in the unit of the result.
type Combined struct {
	U        float64          `json:"u"`
	NuEff    DegreesOfFreedom `json:"nu_eff"`
	K        float64          `json:"k"`
	Expanded float64          `json:"U"`
}

// Combine adds up the contributions of independent inputs, JCGM 100:2008 (10), with
// effective degrees of freedom by Welch and Satterthwaite (G.2b) and the coverage
// factor for a probability. A Nu of 0 is an error: infinite is +Inf.
func Combine(lines []BudgetLine, probability float64) (Combined, error) {
	variance, sum := 0.0, 0.0
	for _, l := range lines {
		if !(l.Nu > 0) {
			return Combined{}, fmt.Errorf("combine: %s has %g degrees of freedom", l.Input, float64(l.Nu))
		}
		square := l.Contribution * l.Contribution
		variance += square
		sum += square * square / float64(l.Nu)
	}
	c := Combined{U: math.Sqrt(variance), NuEff: DegreesOfFreedom(math.Inf(1))}
	if sum > 0 {
		c.NuEff = DegreesOfFreedom(variance * variance / sum)
	}
	var err error
	if c.K, err = CoverageFactor(probability, float64(c.NuEff)); err != nil {
		return Combined{}, fmt.Errorf("combine: %w", err)
	}
	c.Expanded = c.K * c.U
	return c, nil
}

// VolumeBudget is one volume with its uncertainty.
type VolumeBudget struct {
	Volume
	Combined
	Lines []BudgetLine `json:"budget"`
}

// VolumeWithBudget gives the volume of one delivery at the reference temperature with
// its uncertainty budget, mL. The burette's readings play no part. Errors as in
// DeliveryVolume.
func VolumeWithBudget(in Inputs, d Delivery) (VolumeBudget, error) {
	if err := in.Check(); err != nil {
		return VolumeBudget{}, fmt.Errorf("volume: %w", err)
	}
	v, slope, err := deliver(in, d)
	if err != nil {
		return VolumeBudget{}, fmt.Errorf("volume: %w", err)
	}
	exact := DegreesOfFreedom(math.Inf(1))
	fact := func(kind factKind, what string, value, u, slope float64) BudgetLine {
		l := factLines[kind]
		l.Count, l.What, l.Value, l.U, l.Nu = 1, what, value, u, exact
		return l.contributing(slope * u)
	}
	lines := []BudgetLine{
		fact(weighingFact, "weighing before", d.Before.MassG, or(d.Before.UMassG, in.UWeighingG), -slope.mass),
		fact(weighingFact, "weighing after", d.After.MassG, or(d.After.UMassG, in.UWeighingG), slope.mass),
		fact(waterTempFact, "water temperature", d.Water.WaterTempC, or(d.Water.UWaterTempC, in.UWaterTempC), slope.waterTemp),
		fact(deliveryFact, "delivery", 0, in.UDeliveryML, 1),
	}
	m := &model{in: in, ds: []Delivery{d}}
	values, us := commonValues(m)
	common := commonShares(in, slope)
	for k, l := range commonLines {
		l.Count, l.Value, l.U, l.Nu = 1, values[k], us[k], exact
		lines = append(lines, l.contributing(common[k]))
	}
	lines = shares(lines)
	c, err := Combine(lines, in.CoverageProbability)
	return VolumeBudget{v, c, lines}, err
}
