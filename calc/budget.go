package calc

import (
	"fmt"
	"math"
)

// Distribution is the distribution that stands behind a standard uncertainty.
type Distribution string

// Distributions.
const (
	Normal      Distribution = "normal"
	Rectangular Distribution = "rectangular"
)

// BudgetLine is one input of the uncertainty budget of a point.
type BudgetLine struct {
	Input        string           `json:"input"` // key of the uncertainty in the inputs block
	What         string           `json:"what"`
	Unit         string           `json:"unit"`
	Count        int              `json:"count"` // of independent variables that this line sums up
	Value        float64          `json:"value"` // an error's is 0; of air and water the mean of the deliveries
	U            float64          `json:"u"`     // standard uncertainty; of facts with their own, the quadratic mean
	Distribution Distribution     `json:"distribution"`
	Sensitivity  float64          `json:"sensitivity"`     // mL per unit; for several variables the root of the sum of squares
	Contribution float64          `json:"contribution_mL"` // Sensitivity × U, with the Birge ratio
	Nu           DegreesOfFreedom `json:"nu"`
	SharePct     float64          `json:"share_pct"` // of the variance
}

// Budget gives the uncertainty budget of point i of the curve, 0 ≤ i < len(Points).
// The squares of the contributions add up to the square of u of the point.
func (c *Curve) Budget(i int) ([]BudgetLine, error) {
	if i < 0 || i >= len(c.Budgets) {
		return nil, fmt.Errorf("budget: the curve has no point number %d", i)
	}
	return c.Budgets[i], nil
}

// factLines describes the lines for facts, by kind.
var factLines = [factKinds]BudgetLine{
	weighingFact:  {Input: "u_weighing_g", What: "each weighing", Unit: "g", Distribution: Normal},
	readingFact:   {Input: "u_reading_mL", What: "each burette reading", Unit: "mL", Distribution: Normal},
	waterTempFact: {Input: "u_water_temp_C", What: "each water temperature", Unit: "°C", Distribution: Normal},
	deliveryFact:  {Input: "u_delivery_mL", What: "each delivery", Unit: "mL", Distribution: Normal},
}

// commonLines describes the lines for what the whole run shares. A rectangular
// distribution stands where tables and certificates give limits.
var commonLines = [commonInputs]BudgetLine{
	{Input: "u_thermometer_C", What: "water thermometer", Unit: "°C", Distribution: Normal},
	{Input: "u_air_temp_C", What: "air temperature", Unit: "°C", Distribution: Normal},
	{Input: "u_pressure_hPa", What: "air pressure", Unit: "hPa", Distribution: Normal},
	{Input: "u_humidity_pct", What: "relative humidity", Unit: "%", Distribution: Normal},
	{Input: "u_water_density_rel", What: "water density, relative", Unit: "1", Distribution: Normal},
	{Input: "u_air_density_rel", What: "air density formula, relative", Unit: "1", Distribution: Normal},
	{Input: "u_expansion_rel", What: "cubic expansion of the glass", Unit: "1/°C", Distribution: Rectangular},
	{Input: "u_sensitivity_rel", What: "balance sensitivity, relative", Unit: "1", Distribution: Normal},
	{Input: "u_weight_density_kg_m3", What: "density of the adjustment weights", Unit: "kg/m³", Distribution: Rectangular},
}

func (c *Curve) takeBudgets(m *model, f *influence, common [][commonInputs]float64) {
	values, us := commonValues(m)
	counts, factU := m.factUncertainties()
	c.Budgets = make([][]BudgetLine, len(c.Points))
	for i := range c.Points {
		sums := f.factVariances(m, i)
		lines := make([]BudgetLine, 0, int(factKinds)+commonInputs)
		for kind, line := range factLines {
			line.Count, line.U, line.Nu = counts[kind], factU[kind], DegreesOfFreedom(math.Inf(1))
			if c.Birge > 1 {
				line.Nu = DegreesOfFreedom(c.Nu)
			}
			lines = append(lines, line.contributing(c.Birge*math.Sqrt(sums[kind])))
		}
		for k, line := range commonLines {
			line.Count, line.Value, line.U, line.Nu = 1, values[k], us[k], DegreesOfFreedom(math.Inf(1))
			lines = append(lines, line.contributing(common[i][k]))
		}
		c.Budgets[i] = shares(lines)
	}
}

// contributing completes a line with its contribution, mL.
func (l BudgetLine) contributing(contributionML float64) BudgetLine {
	l.Contribution = contributionML
	if l.U > 0 {
		l.Sensitivity = contributionML / l.U
	}
	return l
}

// shares fills in each line's share of the variance.
func shares(lines []BudgetLine) []BudgetLine {
	sum := 0.0
	for _, l := range lines {
		sum += l.Contribution * l.Contribution
	}
	for i, l := range lines {
		if sum > 0 {
			lines[i].SharePct = 100 * l.Contribution * l.Contribution / sum
		}
	}
	return lines
}

// factVariances gives the variance of point i, mL², from the facts of each kind,
// without the Birge ratio.
func (f *influence) factVariances(m *model, i int) (sums [factKinds]float64) {
	gain := f.gain.RawRowView(i)
	for k, shares := range m.shares {
		contribution := 0.0
		for _, sh := range shares {
			contribution += gain[sh.row] * sh.contributionML
		}
		sums[m.vars[k].kind] += contribution * contribution
	}
	return sums
}

// factUncertainties counts the facts of each kind and gives the quadratic mean of
// their standard uncertainties.
func (m *model) factUncertainties() (counts [factKinds]int, us [factKinds]float64) {
	seen := make(map[variable]bool, len(m.vars))
	add := func(kind factKind, fact int64, u float64) {
		if v := (variable{kind, fact}); !seen[v] {
			seen[v] = true
			counts[kind]++
			us[kind] += u * u
		}
	}
	for _, d := range m.ds {
		for _, w := range [2]Weighing{d.Before, d.After} {
			add(weighingFact, w.Fact, or(w.UMassG, m.in.UWeighingG))
		}
		for _, r := range [2]Reading{d.Start, d.End} {
			add(readingFact, r.Fact, or(r.UReadingML, m.in.UReadingML))
		}
		add(waterTempFact, d.Water.Fact, or(d.Water.UWaterTempC, m.in.UWaterTempC))
		add(deliveryFact, int64(d.Delivery), m.in.UDeliveryML)
	}
	for k := range us {
		us[k] = math.Sqrt(us[k] / float64(counts[k]))
	}
	return counts, us
}

// commonValues gives value and standard uncertainty of what the whole run shares.
func commonValues(m *model) (values, us [commonInputs]float64) {
	in, n := m.in, float64(len(m.ds))
	var airTempC, pressureHPa, humidityPct float64
	for _, d := range m.ds {
		airTempC += d.Ambient.AirTempC / n
		pressureHPa += d.Ambient.PressureHPa / n
		humidityPct += d.Ambient.HumidityPct / n
	}
	values = [commonInputs]float64{0, airTempC, pressureHPa, humidityPct, 0, 0, in.ExpansionPerC, 0, in.WeightDensityKgM3}
	us = [commonInputs]float64{
		in.UThermometerC, in.UAirTempC, in.UPressureHPa, in.UHumidityPct, in.UWaterDensityRel,
		in.UAirDensityRel, in.UExpansionRel * in.ExpansionPerC, in.USensitivityRel, in.UWeightDensityKgM3,
	}
	return values, us
}
