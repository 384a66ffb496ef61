package calc

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/stat/distuv"
)

// ValidationRule is how the first-order result is compared with the simulation.
const ValidationRule = "JCGM 101:2008, 8.1: the ends of both coverage intervals, the symmetric one by simulation, agree within half a unit of the second significant digit of the standard uncertainty."

// Agreement of the first-order result with the simulation.
const (
	Agrees     = "agrees"
	Differs    = "differs"
	Unresolved = "not resolved" // the difference lies in the noise of so many trials
)

// MonteCarloPoint is one point of the curve by simulation.
type MonteCarloPoint struct {
	ReadingML    float64          `json:"reading_mL"`
	CorrectionML float64          `json:"correction_mL"` // mean of the trials
	UML          float64          `json:"u_mL"`          // standard deviation of the trials
	SymmetricML  CoverageInterval `json:"symmetric_mL"`
	ShortestML   CoverageInterval `json:"shortest_mL"`
	FirstOrder   Point            `json:"first_order"`
	DLowML       float64          `json:"d_low_mL"`  // difference of the lower ends
	DHighML      float64          `json:"d_high_mL"` // of the upper ends
	ToleranceML  float64          `json:"delta_mL"`
	NoiseML      float64          `json:"noise_mL"` // standard uncertainty of an end, from the number of trials
	Agreement    string           `json:"agreement"`
}

// MonteCarloResult is the check of the first-order uncertainty by propagating
// distributions.
type MonteCarloResult struct {
	Trials        int               `json:"trials"`
	Seed          uint64            `json:"seed"`
	Adaptive      bool              `json:"adaptive"`
	Stable        bool              `json:"stable"` // the adaptive run reached its criterion
	Points        []MonteCarloPoint `json:"points"`
	CovarianceML2 [][]float64       `json:"covariance_mL2"`
	Agreement     string            `json:"agreement"` // the worst of the points
	Rule          string            `json:"rule"`
}

// MonteCarlo propagates the distributions of all inputs through the model of the
// curve, JCGM 101:2008. Every trial draws every fact and what the run shares, computes
// each delivery's volume by the full formulas, and applies the weights that the least
// squares solution gave the deliveries. Distributions are those that the budget states; where the
// Birge ratio scaled the random part, its scale is drawn too, so that this part follows
// Student's t. Probability in s is ignored: the inputs state it.
func MonteCarlo(ctx context.Context, in Inputs, pointsML []float64, ds []Delivery, s Simulation) (*MonteCarloResult, error) {
	c, f, err := fit(in, pointsML, ds)
	if err != nil {
		return nil, fmt.Errorf("monte carlo: %w", err)
	}
	s.Probability = in.CoverageProbability
	source, err := newCurveTrial(in, ds, c, f)
	if err != nil {
		return nil, fmt.Errorf("monte carlo: %w", err)
	}
	o, err := Simulate(ctx, len(pointsML), source.trial, s)
	if err != nil {
		return nil, fmt.Errorf("monte carlo: %w", err)
	}
	r := &MonteCarloResult{
		Trials: o.Trials, Seed: s.Seed, Adaptive: s.Trials == 0, Stable: o.Stable, CovarianceML2: o.Covariance,
		Agreement: Agrees, Rule: ValidationRule, Points: make([]MonteCarloPoint, len(pointsML)),
	}
	for i, p := range c.Points {
		r.Points[i] = validatePoint(p, o, i)
		if a := r.Points[i].Agreement; r.Agreement == Agrees || a == Differs {
			r.Agreement = a
		}
	}
	return r, nil
}

// validatePoint applies ValidationRule.
func validatePoint(p Point, o *Outcome, i int) MonteCarloPoint {
	m := MonteCarloPoint{
		ReadingML: p.ReadingML, CorrectionML: o.Mean[i], UML: o.U[i], SymmetricML: o.Symmetric[i], ShortestML: o.Shortest[i],
		FirstOrder: p, ToleranceML: NumericalTolerance(o.U[i]), NoiseML: o.UEnd[i],
	}
	m.DLowML = math.Abs(p.CorrectionML - p.ExpandedML - m.SymmetricML.Low)
	m.DHighML = math.Abs(p.CorrectionML + p.ExpandedML - m.SymmetricML.Up)
	worst := max(m.DLowML, m.DHighML)
	switch {
	case worst <= m.ToleranceML:
		m.Agreement = Agrees
	case worst-3*m.NoiseML <= m.ToleranceML:
		m.Agreement = Unresolved
	default:
		m.Agreement = Differs
	}
	return m
}

// curveTrial is what all trials of one curve share.
type curveTrial struct {
	in        Inputs
	water     func(tempC, pressureHPa float64) (density, byTempC, byHPa float64)
	air       func(a Ambient, co2Fraction float64) float64
	gain      [][]float64 // point by delivery
	facts     []float64   // standard uncertainty of each fact, in its own unit
	ambients  []Ambient
	ds        []trialDelivery
	birge, nu float64
}

// trialDelivery is a delivery with its facts by index.
type trialDelivery struct {
	netG, spanML, waterTempC                  float64
	after, before, start, end, temp, delivery int
	ambient                                   int
}

func newCurveTrial(in Inputs, ds []Delivery, c *Curve, f *influence) (*curveTrial, error) {
	t := &curveTrial{in: in, water: waterFormulas[in.WaterDensity].density, air: airFormulas[in.AirDensity].density, birge: c.Birge, nu: float64(c.Nu)}
	for i := range c.Points {
		t.gain = append(t.gain, f.gain.RawRowView(i))
	}
	index, ambients := map[variable]int{}, map[Ambient]int{}
	var conflict error
	place := func(kind factKind, fact int64, u float64) int {
		v := variable{kind, fact}
		k, ok := index[v]
		if !ok {
			k = len(t.facts)
			index[v] = k
			t.facts = append(t.facts, u)
		} else if t.facts[k] != u {
			conflict = fmt.Errorf("fact %d has two uncertainties, %g and %g", fact, t.facts[k], u)
		}
		return k
	}
	for _, d := range ds {
		a, ok := ambients[d.Ambient]
		if !ok {
			a = len(t.ambients)
			ambients[d.Ambient] = a
			t.ambients = append(t.ambients, d.Ambient)
		}
		t.ds = append(t.ds, trialDelivery{
			netG: d.After.MassG - d.Before.MassG + d.EvaporationG, spanML: d.End.ReadingML - d.Start.ReadingML, waterTempC: d.Water.WaterTempC,
			after: place(weighingFact, d.After.Fact, or(d.After.UMassG, in.UWeighingG)), before: place(weighingFact, d.Before.Fact, or(d.Before.UMassG, in.UWeighingG)),
			start: place(readingFact, d.Start.Fact, or(d.Start.UReadingML, in.UReadingML)), end: place(readingFact, d.End.Fact, or(d.End.UReadingML, in.UReadingML)),
			temp: place(waterTempFact, d.Water.Fact, or(d.Water.UWaterTempC, in.UWaterTempC)), delivery: place(deliveryFact, int64(d.Delivery), in.UDeliveryML),
			ambient: a,
		})
	}
	return t, conflict
}

// draws is one trial's value of what the whole run shares.
type draws struct {
	thermometerC, airTempC, pressureHPa, humidityPct float64
	water, air, expansionPerC, sensitivity, weight   float64
}

// rectangular draws from a rectangular distribution with mean 0 and standard deviation 1.
func rectangular(rng *rand.Rand) float64 { return math.Sqrt(3) * (2*rng.Float64() - 1) }

func (t *curveTrial) drawShared(rng *rand.Rand) draws {
	var z [commonInputs]float64
	for k := range z {
		if commonLines[k].Distribution == Rectangular {
			z[k] = rectangular(rng)
		} else {
			z[k] = rng.NormFloat64()
		}
	}
	in := &t.in
	return draws{
		z[0] * in.UThermometerC, z[1] * in.UAirTempC, z[2] * in.UPressureHPa, z[3] * in.UHumidityPct,
		1 + z[4]*in.UWaterDensityRel, 1 + z[5]*in.UAirDensityRel, in.ExpansionPerC * (1 + z[6]*in.UExpansionRel),
		1 + z[7]*in.USensitivityRel, in.WeightDensityKgM3 + z[8]*in.UWeightDensityKgM3,
	}
}

// scale draws the scale of the random part.
func (t *curveTrial) scale(rng *rand.Rand) float64 {
	if t.birge == 1 {
		return 1
	}
	return t.birge * math.Sqrt(t.nu/distuv.ChiSquared{K: t.nu, Src: rng}.Rand())
}

// trial makes a Trial with memory of its own.
func (t *curveTrial) trial() Trial {
	e, y, air := make([]float64, len(t.facts)), make([]float64, len(t.ds)), make([]float64, len(t.ambients))
	return func(rng *rand.Rand, out []float64) {
		z, scale := t.drawShared(rng), t.scale(rng)
		for k, u := range t.facts {
			e[k] = scale * u * rng.NormFloat64()
		}
		for k, a := range t.ambients {
			a.AirTempC += z.airTempC
			a.PressureHPa += z.pressureHPa
			a.HumidityPct += z.humidityPct
			air[k] = t.air(a, t.in.CO2Fraction) * z.air
		}
		for i := range t.ds {
			d := &t.ds[i]
			tempC := d.waterTempC + z.thermometerC + e[d.temp]
			water, _, _ := t.water(tempC, t.ambients[d.ambient].PressureHPa+z.pressureHPa)
			ra := air[d.ambient]
			volume := (d.netG + e[d.after] - e[d.before]) * z.sensitivity * 1000 * (1 - ra/z.weight) / (water*z.water - ra) *
				(1 - z.expansionPerC*(tempC-t.in.ReferenceTempC))
			y[i] = volume - (d.spanML + e[d.end] - e[d.start]) + e[d.delivery]
		}
		for k, gain := range t.gain {
			out[k] = floats.Dot(gain, y)
		}
	}
}
