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
// air's pressure, ρa moist air, ρb the balance's adjustment weights, γ cubic
// expansion of the glass. Source: ISO 4787 and EURAMET cg-19 in this form.
func DeliveryVolume(in Inputs, d Delivery) (Volume, error) {
	v, _, err := deliver(in, d)
	return v, err
}

// slopes is how the volume at the reference temperature depends on each input, in mL
// per unit of the input.
type slopes struct {
	mass, waterTemp                       float64
	airTemp, pressure, humidity           float64
	waterRel, airRel, expansionRel, scale float64
	weightDensity                         float64
}

// deliver computes volume and slopes together.
func deliver(in Inputs, d Delivery) (Volume, slopes, error) {
	v := Volume{NetMassG: d.After.MassG - d.Before.MassG + d.EvaporationG}
	if !(v.NetMassG > 0) {
		return Volume{}, slopes{}, fmt.Errorf("delivery %d: %w", d.Delivery, ErrNoWater)
	}
	var err error
	if v.WaterDensityKgM3, err = WaterDensity(in.WaterDensity, d.Water.WaterTempC, d.Ambient.PressureHPa); err != nil {
		return Volume{}, slopes{}, fmt.Errorf("delivery %d: %w", d.Delivery, err)
	}
	if v.AirDensityKgM3, err = AirDensity(in.AirDensity, d.Ambient, in.CO2Fraction); err != nil {
		return Volume{}, slopes{}, fmt.Errorf("delivery %d: %w", d.Delivery, err)
	}
	t := d.Water.WaterTempC - in.ReferenceTempC
	glass := 1 - in.ExpansionPerC*t
	v.VolumeML = 1000 * v.NetMassG * ZFactor(v.WaterDensityKgM3, v.AirDensityKgM3, in.WeightDensityKgM3)
	v.Volume20ML = v.VolumeML * glass
	v.CorrectionML = v.Volume20ML - (d.End.ReadingML - d.Start.ReadingML)
	if math.IsNaN(v.CorrectionML) || math.IsInf(v.CorrectionML, 0) {
		return Volume{}, slopes{}, fmt.Errorf("delivery %d: the volume is not finite", d.Delivery)
	}
	return v, volumeSlopes(in, d, v, t, glass), nil
}

// ZFactor gives the volume in L that 1 g (or in mL that 1 mg × 10⁻³) of balance reading
// stands for, in m³/kg·(g/kg): multiply by 1000 for mL/g. All densities in kg/m³.
func ZFactor(waterKgM3, airKgM3, weightKgM3 float64) float64 {
	return (1 - airKgM3/weightKgM3) / (waterKgM3 - airKgM3)
}

func volumeSlopes(in Inputs, d Delivery, v Volume, t, glass float64) slopes {
	vol, rw, ra, rb := v.Volume20ML, v.WaterDensityKgM3, v.AirDensityKgM3, in.WeightDensityKgM3
	a := 1 / (rw - ra)
	byWater, byAir := -vol*a, vol*(a-1/(rb-ra))
	_, waterByTemp, waterByHPa := waterFormulas[in.WaterDensity](d.Water.WaterTempC, d.Ambient.PressureHPa)
	airByTemp, airByHPa, airByPct := airSlopes(in.AirDensity, d.Ambient, in.CO2Fraction)
	return slopes{
		mass:          vol / v.NetMassG,
		waterTemp:     byWater*waterByTemp - vol*in.ExpansionPerC/glass,
		airTemp:       byAir * airByTemp,
		pressure:      byAir*airByHPa + byWater*waterByHPa,
		humidity:      byAir * airByPct,
		waterRel:      byWater * rw,
		airRel:        byAir * ra,
		expansionRel:  -vol * t * in.ExpansionPerC / glass,
		scale:         vol,
		weightDensity: vol * ra / (rb * (rb - ra)),
	}
}
