package calc

import "fmt"

// waterFormula gives the density of water in kg/m³ and its derivatives by
// temperature, kg/(m³·°C), and by pressure, kg/(m³·hPa).
type waterFormula func(tempC, pressureHPa float64) (density, byTempC, byHPa float64)

var waterFormulas = map[string]waterFormula{
	"tanaka-2001":               tanaka,
	"tanaka-2001-air-saturated": tanakaAirSaturated,
}

// WaterDensity gives the density of water in kg/m³ by a named formula. tempC is 0 to
// 40 °C; pressureHPa acts through the water's compressibility.
func WaterDensity(formula string, tempC, pressureHPa float64) (float64, error) {
	f, ok := waterFormulas[formula]
	if !ok {
		return 0, fmt.Errorf("water density: formula %q is not known", formula)
	}
	if !(tempC >= 0 && tempC <= 40) {
		return 0, fmt.Errorf("water density: %g °C is not between 0 and 40 °C", tempC)
	}
	density, _, _ := f(tempC, pressureHPa)
	return density, nil
}

// Coefficients of Tanaka et al., Metrologia 38 (2001) 301–309, for air-free standard
// mean ocean water at 101 325 Pa, ITS-90, 0 to 40 °C.
const (
	tanakaA1 = -3.983035  // °C
	tanakaA2 = 301.797    // °C
	tanakaA3 = 522528.9   // °C²
	tanakaA4 = 69.34881   // °C
	tanakaA5 = 999.974950 // kg/m³

	airSaturation0 = -4.612e-3 // kg/m³
	airSaturation1 = 0.106e-3  // kg/(m³·°C)

	compress0 = 50.74e-11   // 1/Pa
	compress1 = -0.326e-11  // 1/(Pa·°C)
	compress2 = 0.00416e-11 // 1/(Pa·°C²)
	normalPa  = 101325.0    // Pa
)

// tanaka: ρ = a5·[1 − (t+a1)²(t+a2) / (a3(t+a4))]·[1 + κ(t)(p − 101325 Pa)], air-free.
func tanaka(tempC, pressureHPa float64) (density, byTempC, byHPa float64) {
	return compressed(tempC, pressureHPa, 0, 0)
}

// tanakaAirSaturated adds the effect of dissolved air, s0 + s1·t, from the same paper.
func tanakaAirSaturated(tempC, pressureHPa float64) (density, byTempC, byHPa float64) {
	return compressed(tempC, pressureHPa, airSaturation0, airSaturation1)
}

func compressed(t, pressureHPa, s0, s1 float64) (density, byTempC, byHPa float64) {
	n := (t + tanakaA1) * (t + tanakaA1) * (t + tanakaA2)
	dn := 2*(t+tanakaA1)*(t+tanakaA2) + (t+tanakaA1)*(t+tanakaA1)
	d := tanakaA3 * (t + tanakaA4)
	rho := tanakaA5*(1-n/d) + s0 + s1*t
	drho := -tanakaA5*(dn*d-n*tanakaA3)/(d*d) + s1
	kappa := compress0 + compress1*t + compress2*t*t
	dkappa := compress1 + 2*compress2*t
	dp := pressureHPa*100 - normalPa
	return rho * (1 + kappa*dp), drho*(1+kappa*dp) + rho*dkappa*dp, rho * kappa * 100
}
