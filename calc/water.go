package calc

import (
	"fmt"
	"sort"
	"strings"
)

// waterFormula is one formula for the density of water, in kg/m³; its derivatives are
// by temperature, kg/(m³·°C), and by pressure, kg/(m³·hPa).
type waterFormula struct {
	valid   limits
	density func(tempC, pressureHPa float64) (density, byTempC, byHPa float64)
}

// waterFormulas are the formulas by the name that inputs carry.
var waterFormulas = map[string]waterFormula{
	"tanaka-2001":               {limits{"water_temp_C", 0, 40}, tanaka},
	"tanaka-2001-air-saturated": {limits{"water_temp_C", 0, 40}, tanakaAirSaturated},
	"iapws-95":                  {limits{"water_temp_C", 0, 40}, iapws95},
	"iso-8655-6":                {limits{"water_temp_C", 5, 40}, iso8655Water},
	"jones-harris-1992":         {limits{"water_temp_C", 5, 40}, jonesHarris},
}

// WaterFormulas gives the names that WaterDensity knows, sorted.
func WaterFormulas() []string { return sortedNames(waterFormulas) }

func sortedNames[F any](table map[string]F) []string {
	names := make([]string, 0, len(table))
	for name := range table {
		names = append(names, name)
	}
	sort.Strings(names)
	return names
}

// WaterDensity gives the density of water in kg/m³ by a named formula. tempC is on
// ITS-90, 0 to 40 °C or what the formula covers; pressureHPa, 600 to 1100 hPa, acts
// through the water's compressibility. Outside is *OutsideRange.
//
//   - tanaka-2001-air-saturated: Tanaka 2001 with dissolved air and compressibility
//   - tanaka-2001: the same without dissolved air
//   - iapws-95: a fit to IAPWS-95 at 101 325 Pa, air-free, with compressibility
//   - iso-8655-6: the polynomial of ISO 8655-6 and ISO/TR 20461, air-free, without
//     compressibility
//   - jones-harris-1992: the same polynomial's air-saturated form with compressibility
func WaterDensity(formula string, tempC, pressureHPa float64) (float64, error) {
	f, err := findWater(formula, tempC, pressureHPa)
	if err != nil {
		return 0, fmt.Errorf("water density: %w", err)
	}
	density, _, _ := f(tempC, pressureHPa)
	return density, nil
}

func findWater(formula string, tempC, pressureHPa float64) (func(tempC, pressureHPa float64) (density, byTempC, byHPa float64), error) {
	f, ok := waterFormulas[formula]
	if !ok {
		return nil, fmt.Errorf("formula %q is none of %s", formula, strings.Join(WaterFormulas(), ", "))
	}
	if err := f.valid.check(formula, tempC); err != nil {
		return nil, err
	}
	return f.density, pressureRange.check(formula, pressureHPa)
}

const normalHPa = 1013.25

// Coefficients of Tanaka et al., Metrologia 38 (2001) 301–309, for air-free standard
// mean ocean water at 101 325 Pa, ITS-90, 0 to 40 °C; that paper's dissolved air is for
// 0 to 25 °C and is used as it is above.
const (
	tanakaA1 = -3.983035  // °C
	tanakaA2 = 301.797    // °C
	tanakaA3 = 522528.9   // °C²
	tanakaA4 = 69.34881   // °C
	tanakaA5 = 999.974950 // kg/m³

	airSaturation0 = -4.612e-3 // kg/m³
	airSaturation1 = 0.106e-3  // kg/(m³·°C)

	tanakaK0 = 50.74e-9   // 1/hPa
	tanakaK1 = -0.326e-9  // 1/(hPa·°C)
	tanakaK2 = 0.00416e-9 // 1/(hPa·°C²)
)

// tanaka: ρ = a5·[1 − (t+a1)²(t+a2) / (a3(t+a4))]·[1 + κ(t)(p − 101325 Pa)], air-free.
func tanaka(tempC, pressureHPa float64) (density, byTempC, byHPa float64) {
	return tanakaWith(tempC, pressureHPa, 0, 0)
}

// tanakaAirSaturated adds the effect of dissolved air, s0 + s1·t, from the same paper.
func tanakaAirSaturated(tempC, pressureHPa float64) (density, byTempC, byHPa float64) {
	return tanakaWith(tempC, pressureHPa, airSaturation0, airSaturation1)
}

func tanakaWith(t, pressureHPa, s0, s1 float64) (density, byTempC, byHPa float64) {
	n := (t + tanakaA1) * (t + tanakaA1) * (t + tanakaA2)
	dn := 2*(t+tanakaA1)*(t+tanakaA2) + (t+tanakaA1)*(t+tanakaA1)
	d := tanakaA3 * (t + tanakaA4)
	rho := tanakaA5*(1-n/d) + s0 + s1*t
	byT := -tanakaA5*(dn*d-n*tanakaA3)/(d*d) + s1
	kappa := tanakaK0 + tanakaK1*t + tanakaK2*t*t
	return compressed(rho, byT, kappa, tanakaK1+2*tanakaK2*t, pressureHPa)
}

// compressed brings a density from 101 325 Pa to another pressure by the
// compressibility kappa, 1/hPa.
func compressed(rho, byT, kappa, kappaByT, pressureHPa float64) (density, byTempC, byHPa float64) {
	dp := pressureHPa - normalHPa
	return rho * (1 + kappa*dp), byT*(1+kappa*dp) + rho*kappaByT*dp, rho * kappa
}

// iapwsDensity and iapwsKappa are least squares fits in x = (t − 20 °C)/20 °C to the
// density, kg/m³, and the isothermal compressibility, 1e-10/Pa, of IAPWS-95 at 101 325 Pa
// in steps of 1 °C from 0 to 40 °C, computed with the Python package iapws 1.5.2. They
// keep those values within 1e-6 kg/m³ and 2e-5 of the compressibility.
var (
	iapwsDensity = []float64{998.20715, -4.12871117, -2.10826153, 0.298900658, -0.0649813259, 0.0152184887, -0.00384174996, 0.00122505941, -0.000346080959}
	iapwsKappa   = []float64{4.58915279, -0.295214202, 0.156079282, -0.033956788, 0.0108434052, -0.00318985469}
)

// iapws95 is the density of pure air-free water by IAPWS R6-95, by fits.
func iapws95(tempC, pressureHPa float64) (density, byTempC, byHPa float64) {
	x := (tempC - 20) / 20
	rho, byX := polynomial(iapwsDensity, x)
	kappa, kappaByX := polynomial(iapwsKappa, x)
	return compressed(rho, byX/20, kappa*1e-8, kappaByX/20*1e-8, pressureHPa)
}

// polynomial gives the value and the derivative; coefficients by rising power.
func polynomial(coefficients []float64, x float64) (value, slope float64) {
	for i := len(coefficients) - 1; i >= 0; i-- {
		slope = slope*x + value
		value = value*x + coefficients[i]
	}
	return value, slope
}

// Jones and Harris, J. Res. Natl. Inst. Stand. Technol. 97 (1992) 335, ITS-90, 5 to
// 40 °C, the polynomial of ISO 8655-6 and ISO/TR 20461 (whose Cor.1:2008 corrects the
// third and fifth coefficient to these). Density in kg/m³, compressibility in 1/kPa.
var (
	isoWater          = []float64{999.85308, 6.32693e-2, -8.523829e-3, 6.943248e-5, -3.821216e-7}
	airSaturatedWater = []float64{999.84847, 6.337563e-2, -8.523829e-3, 6.943248e-5, -3.821216e-7}
	jonesHarrisKappa  = []float64{50.83101e-8, -3.68293e-9, 7.263725e-11, -6.597702e-13, 2.87767e-15}
)

// iso8655Water is the air-free polynomial as the standards use it, at any pressure.
func iso8655Water(tempC, _ float64) (density, byTempC, byHPa float64) {
	density, byTempC = polynomial(isoWater, tempC)
	return density, byTempC, 0
}

// jonesHarris is the air-saturated polynomial with the authors' compressibility.
func jonesHarris(tempC, pressureHPa float64) (density, byTempC, byHPa float64) {
	rho, byT := polynomial(airSaturatedWater, tempC)
	kappa, kappaByT := polynomial(jonesHarrisKappa, tempC)
	return compressed(rho, byT, kappa/10, kappaByT/10, pressureHPa)
}
