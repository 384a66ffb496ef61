package calc

import "fmt"

// Inputs is what enters the numbers beside the facts of a run. Its JSON form is the
// inputs block of run.json. Uncertainties are standard uncertainties.
type Inputs struct {
	WaterDensity      string  `json:"water_density"` // name of the formula, see WaterDensity
	AirDensity        string  `json:"air_density"`   // name of the formula, see AirDensity
	CO2Fraction       float64 `json:"co2_fraction"`  // mole fraction in the air
	ReferenceTempC    float64 `json:"reference_temp_C"`
	ExpansionPerC     float64 `json:"expansion_per_C"`      // cubic expansion of the glass, 1/°C
	WeightDensityKgM3 float64 `json:"weight_density_kg_m3"` // of the weights the balance was adjusted with

	// One independent variable for each fact, or each delivery.
	UWeighingG  float64 `json:"u_weighing_g"`
	UReadingML  float64 `json:"u_reading_mL"`
	UWaterTempC float64 `json:"u_water_temp_C"`
	UDeliveryML float64 `json:"u_delivery_mL"`

	// One variable for the whole run.
	UThermometerC       float64 `json:"u_thermometer_C"`
	UAirTempC           float64 `json:"u_air_temp_C"`
	UPressureHPa        float64 `json:"u_pressure_hPa"`
	UHumidityPct        float64 `json:"u_humidity_pct"`
	UWaterDensityRel    float64 `json:"u_water_density_rel"`
	UAirDensityRel      float64 `json:"u_air_density_rel"`
	UExpansionRel       float64 `json:"u_expansion_rel"`
	USensitivityRel     float64 `json:"u_sensitivity_rel"`
	UWeightDensityKgM3  float64 `json:"u_weight_density_kg_m3"`
	CoverageProbability float64 `json:"coverage_probability"`
}

// DefaultInputs gives formulas and uncertainties for a 0.1 mg balance, a 50 mL
// burette with 0.1 mL subdivision of borosilicate glass 3.3 and ordinary room
// instruments. The uncertainties are common practice, no source; a laboratory
// replaces them with its own.
func DefaultInputs() Inputs {
	return Inputs{
		WaterDensity: "tanaka-2001-air-saturated", AirDensity: "cipm-2007", CO2Fraction: 0.0004,
		ReferenceTempC: 20, ExpansionPerC: 9.9e-6, WeightDensityKgM3: 8000,
		UWeighingG: 1e-4, UReadingML: 0.006, UWaterTempC: 0.03, UDeliveryML: 0.003,
		UThermometerC: 0.05, UAirTempC: 0.3, UPressureHPa: 1.0, UHumidityPct: 3,
		UWaterDensityRel: 5e-6, UAirDensityRel: 2e-4, UExpansionRel: 0.05, USensitivityRel: 2e-6,
		UWeightDensityKgM3: 30, CoverageProbability: 0.9545,
	}
}

// Check says what is out of range, by the key's name.
func (in Inputs) Check() error {
	for _, c := range []struct {
		key            string
		value, low, up float64
	}{
		{"co2_fraction", in.CO2Fraction, 0, 0.01},
		{"reference_temp_C", in.ReferenceTempC, 15, 30},
		{"expansion_per_C", in.ExpansionPerC, 0, 1e-3},
		{"weight_density_kg_m3", in.WeightDensityKgM3, 1000, 22000},
		{"u_weighing_g", in.UWeighingG, 1e-9, 1},
		{"u_reading_mL", in.UReadingML, 1e-9, 10},
		{"u_water_temp_C", in.UWaterTempC, 0, 10},
		{"u_delivery_mL", in.UDeliveryML, 0, 10},
		{"u_thermometer_C", in.UThermometerC, 0, 10},
		{"u_air_temp_C", in.UAirTempC, 0, 20},
		{"u_pressure_hPa", in.UPressureHPa, 0, 200},
		{"u_humidity_pct", in.UHumidityPct, 0, 50},
		{"u_water_density_rel", in.UWaterDensityRel, 0, 1e-2},
		{"u_air_density_rel", in.UAirDensityRel, 0, 0.2},
		{"u_expansion_rel", in.UExpansionRel, 0, 1},
		{"u_sensitivity_rel", in.USensitivityRel, 0, 1e-2},
		{"u_weight_density_kg_m3", in.UWeightDensityKgM3, 0, 2000},
		{"coverage_probability", in.CoverageProbability, 0.5, 0.9999},
	} {
		if !(c.value >= c.low && c.value <= c.up) {
			return fmt.Errorf("%s = %g is not between %g and %g", c.key, c.value, c.low, c.up)
		}
	}
	return nil
}
