package calc

import (
	"errors"
	"fmt"
	"math"
)

// ErrNoWater marks a delivery whose vessel was not heavier afterwards.
var ErrNoWater = errors.New("the vessel is not heavier after the delivery")

// DeliveryVolume gives the volume of one delivery:
//
//	V20 = m · 1/(ρw − ρa) · (1 − ρa/ρb) · (1 − γ(t − tref))
//
// m net mass in g (× 1000 for mL with densities in kg/m³), ρw water at t and the
// air's pressure, ρa moist air, ρb the density of the weights that the balance was
// adjusted with, γ cubic expansion of the glass, tref mostly 20 °C. Source: ISO 4787 and
// EURAMET cg-19 in this form. Weights with a certificate of conventional mass count as
// 8000 kg/m³ whatever they are made of. A vessel that is not heavier is ErrNoWater, a
// value outside a formula's range *OutsideRange.
func DeliveryVolume(in Inputs, d Delivery) (Volume, error) {
	v, _, err := deliver(in, d)
	return v, err
}

// slopes is how the volume at the reference temperature depends on each input, in mL
// per unit of the input; of a relative error, per 1.
type slopes struct {
	mass, waterTemp                       float64
	airTemp, pressure, humidity           float64
	waterRel, airRel, expansionRel, scale float64
	weightDensity                         float64
}

// deliver computes volume and slopes together.
func deliver(in Inputs, d Delivery) (Volume, slopes, error) {
	v := Volume{NetMassG: d.After.MassG - d.Before.MassG + d.EvaporationG}
	fail := func(err error) (Volume, slopes, error) {
		return Volume{}, slopes{}, fmt.Errorf("delivery %d: %w", d.Delivery, err)
	}
	if !(v.NetMassG > 0) {
		return fail(ErrNoWater)
	}
	water, err := findWater(in.WaterDensity, d.Water.WaterTempC, d.Ambient.PressureHPa)
	if err != nil {
		return fail(err)
	}
	air, err := findAir(in.AirDensity, d.Ambient)
	if err != nil {
		return fail(err)
	}
	var waterSlope, airSlope [3]float64
	v.WaterDensityKgM3, waterSlope[0], waterSlope[1] = water(d.Water.WaterTempC, d.Ambient.PressureHPa)
	v.AirDensityKgM3 = air.density(d.Ambient, in.CO2Fraction)
	airSlope[0], airSlope[1], airSlope[2] = air.slopes(d.Ambient, in.CO2Fraction)
	v.VolumeML = v.NetMassG * ZFactor(v.WaterDensityKgM3, v.AirDensityKgM3, in.WeightDensityKgM3)
	v.Volume20ML = v.VolumeML * GlassFactor(in.ExpansionPerC, d.Water.WaterTempC, in.ReferenceTempC)
	v.CorrectionML = v.Volume20ML - (d.End.ReadingML - d.Start.ReadingML)
	if math.IsNaN(v.CorrectionML) || math.IsInf(v.CorrectionML, 0) {
		return fail(errors.New("the volume is not finite"))
	}
	return v, volumeSlopes(in, d, v, waterSlope, airSlope), nil
}

// ZFactor gives the volume, in mL, of the water that the balance shows as 1 g, at the
// temperature of the water: Z = 1000·(1 − ρa/ρb)/(ρw − ρa). Densities in kg/m³; water
// must be denser than air. ISO 8655-6 tabulates it as µL/mg.
func ZFactor(waterKgM3, airKgM3, weightKgM3 float64) float64 {
	return 1000 * (1 - airKgM3/weightKgM3) / (waterKgM3 - airKgM3)
}

// GlassFactor refers a volume at tempC to refTempC: 1 − γ(t − tref). Multiply ZFactor
// by it for the factor with the glass term.
func GlassFactor(expansionPerC, tempC, refTempC float64) float64 {
	return 1 - expansionPerC*(tempC-refTempC)
}

// volumeSlopes differentiates the equation of DeliveryVolume. One thermometer reading
// acts through water and glass, the pressure through air and water.
func volumeSlopes(in Inputs, d Delivery, v Volume, water, air [3]float64) slopes {
	vol, rw, ra, rb := v.Volume20ML, v.WaterDensityKgM3, v.AirDensityKgM3, in.WeightDensityKgM3
	t := d.Water.WaterTempC - in.ReferenceTempC
	glass := GlassFactor(in.ExpansionPerC, d.Water.WaterTempC, in.ReferenceTempC)
	a := 1 / (rw - ra)
	byWater, byAir := -vol*a, vol*(a-1/(rb-ra))
	return slopes{
		mass:          vol / v.NetMassG,
		waterTemp:     byWater*water[0] - vol*in.ExpansionPerC/glass,
		airTemp:       byAir * air[0],
		pressure:      byAir*air[1] + byWater*water[1],
		humidity:      byAir * air[2],
		waterRel:      byWater * rw,
		airRel:        byAir * ra,
		expansionRel:  -vol * t * in.ExpansionPerC / glass,
		scale:         vol,
		weightDensity: vol * ra / (rb * (rb - ra)),
	}
}
