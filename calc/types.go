// Package calc holds the numbers of a burette calibration by weighing water: the
// density of water and of moist air, the volume of a delivery, the correction curve
// with its full covariance, conformity with a class, and the use of the curve for a
// titration. It is pure: numbers in, numbers out.
//
// It returns an error instead of NaN, Inf or an extrapolation, and it removes no
// value: what scatters is flagged and shows in the uncertainty.
//
// Units are in the names: g, mL, °C, hPa, %, kg/m³. Corrections are true minus
// indicated and are added to a reading.
package calc

import (
	"encoding/json"
	"math"
)

// Weighing is one settled weight in air, against the weights the balance was
// adjusted with.
type Weighing struct {
	Fact   int64   // its identity: shared weighings are one variable
	MassG  float64 // g
	UMassG float64 // standard uncertainty, g; 0: Inputs.UWeighingG
}

// Reading is one burette reading.
type Reading struct {
	Fact       int64
	ReadingML  float64 // mL
	UReadingML float64 // standard uncertainty, mL; 0: Inputs.UReadingML
}

// WaterTemp is the water's temperature at one delivery.
type WaterTemp struct {
	Fact        int64
	WaterTempC  float64 // °C
	UWaterTempC float64 // standard uncertainty, °C; 0: Inputs.UWaterTempC
}

// Ambient is the state of the air around the balance.
type Ambient struct {
	Fact        int64
	AirTempC    float64 // °C
	PressureHPa float64 // hPa
	HumidityPct float64 // relative humidity, %
}

// Delivery is everything that the volume of one delivery is computed from.
type Delivery struct {
	Delivery      int
	PointML       float64 // where the plan has it end, mL
	Replicate     int
	Before, After Weighing
	Start, End    Reading
	Water         WaterTemp
	Ambient       Ambient
	EvaporationG  float64 // what evaporated before the after-weighing, added to the net mass, g
}

// Volume is what one delivery comes to.
type Volume struct {
	NetMassG         float64 // after minus before, plus evaporation, g
	AirDensityKgM3   float64
	WaterDensityKgM3 float64
	VolumeML         float64 // at the temperature of delivery, without the glass term, mL
	Volume20ML       float64 // at the reference temperature, mL
	CorrectionML     float64 // Volume20ML minus the difference of the readings, mL
}

// DegreesOfFreedom is a count of degrees of freedom, +Inf where a variance counts as
// exactly known. In JSON an infinite one is null.
type DegreesOfFreedom float64

// MarshalJSON writes infinity as null.
func (nu DegreesOfFreedom) MarshalJSON() ([]byte, error) {
	if math.IsInf(float64(nu), 1) {
		return []byte("null"), nil
	}
	return json.Marshal(float64(nu))
}

// UnmarshalJSON reads null as infinity.
func (nu *DegreesOfFreedom) UnmarshalJSON(b []byte) error {
	if string(b) == "null" {
		*nu = DegreesOfFreedom(math.Inf(1))
		return nil
	}
	return json.Unmarshal(b, (*float64)(nu))
}

// Point is the correction at one reading with its uncertainty.
type Point struct {
	ReadingML    float64          `json:"reading_mL"`
	CorrectionML float64          `json:"correction_mL"` // true minus indicated, mL
	UML          float64          `json:"u_mL"`          // standard uncertainty, mL
	NuEff        DegreesOfFreedom `json:"nu_eff"`        // Welch–Satterthwaite
	K            float64          `json:"k"`             // coverage factor
	ExpandedML   float64          `json:"U_mL"`          // K × UML, mL
}
