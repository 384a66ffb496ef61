package calc

import (
	"errors"
	"fmt"
)

// ErrOutsideRange marks a value outside the range of a formula. Nothing is clamped.
var ErrOutsideRange = errors.New("outside the range of the formula")

// OutsideRange says which value lies outside the range of which formula.
type OutsideRange struct {
	Formula string
	Field   string // water_temp_C, air_temp_C, pressure_hPa, humidity_pct
	Value   float64
	Low, Up float64
}

func (e *OutsideRange) Error() string {
	return fmt.Sprintf("%s = %g is not between %g and %g, the range of %s", e.Field, e.Value, e.Low, e.Up, e.Formula)
}

// Unwrap makes every OutsideRange an ErrOutsideRange.
func (e *OutsideRange) Unwrap() error { return ErrOutsideRange }

// limits is the range of one field.
type limits struct {
	field   string
	low, up float64
}

func (l limits) check(formula string, value float64) error {
	if value >= l.low && value <= l.up {
		return nil
	}
	return &OutsideRange{formula, l.field, value, l.low, l.up}
}

// The hard limits for air: a room in which water is weighed. The formulas go a little
// further or less far than that, see Warnings.
var (
	airTempRange  = limits{"air_temp_C", 5, 35}
	pressureRange = limits{"pressure_hPa", 600, 1100}
	humidityRange = limits{"humidity_pct", 0, 100}
)

// recommended is the range that the source of a formula recommends it for.
var recommended = map[string][3]limits{
	// Picard et al. 2008; values from memory.
	"cipm-2007": {{"air_temp_C", 15, 27}, {"pressure_hPa", 600, 1100}, {"humidity_pct", 0, 100}},
	// OIML R 111-1:2004 E.3; values from memory.
	"oiml-r111-simplified": {{"air_temp_C", 10, 30}, {"pressure_hPa", 900, 1100}, {"humidity_pct", 0, 80}},
	// The grid of the table that the formula was published with reaches 25 °C.
	"iso-8655-6": {{"air_temp_C", 5, 25}, {"pressure_hPa", 900, 1050}, {"humidity_pct", 20, 80}},
	// An assumption for an ordinary room near sea level; common practice, no source.
	"fixed-1.2": {{"air_temp_C", 15, 27}, {"pressure_hPa", 980, 1040}, {"humidity_pct", 20, 80}},
}

// Warnings lists what lies inside the hard limits but outside the range that a
// formula is recommended for, and a water temperature that differs from the air's by
// more than 2 °C (JJG 196-2006). The error of a formula outside its recommended range
// is not part of the uncertainty.
func Warnings(in Inputs, d Delivery) []string {
	var all []string
	values := [3]float64{d.Ambient.AirTempC, d.Ambient.PressureHPa, d.Ambient.HumidityPct}
	for i, l := range recommended[in.AirDensity] {
		if values[i] < l.low || values[i] > l.up {
			all = append(all, fmt.Sprintf("%s = %g is outside %g to %g, for which %s is recommended", l.field, values[i], l.low, l.up, in.AirDensity))
		}
	}
	if difference := d.Water.WaterTempC - d.Ambient.AirTempC; difference > 2 || difference < -2 {
		all = append(all, fmt.Sprintf("the water is %+.1f °C off the air: let it stand until both agree within 2 °C", difference))
	}
	return all
}
