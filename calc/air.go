package calc

import (
	"fmt"
	"math"
)

// airFormula gives the density of moist air in kg/m³.
type airFormula func(a Ambient, co2Fraction float64) float64

var airFormulas = map[string]airFormula{
	"cipm-2007":            cipm2007,
	"oiml-r111-simplified": oimlR111,
}

// AirDensity gives the density of moist air in kg/m³ by a named formula, from 5 to
// 40 °C, 600 to 1100 hPa and 0 to 100 % relative humidity.
func AirDensity(formula string, a Ambient, co2Fraction float64) (float64, error) {
	f, ok := airFormulas[formula]
	switch {
	case !ok:
		return 0, fmt.Errorf("air density: formula %q is not known", formula)
	case !(a.AirTempC >= 5 && a.AirTempC <= 40):
		return 0, fmt.Errorf("air density: %g °C is not between 5 and 40 °C", a.AirTempC)
	case !(a.PressureHPa >= 600 && a.PressureHPa <= 1100):
		return 0, fmt.Errorf("air density: %g hPa is not between 600 and 1100 hPa", a.PressureHPa)
	case !(a.HumidityPct >= 0 && a.HumidityPct <= 100):
		return 0, fmt.Errorf("air density: %g %% humidity is not between 0 and 100 %%", a.HumidityPct)
	}
	return f(a, co2Fraction), nil
}

// cipm2007 is the CIPM-2007 equation, Picard, Davis, Gläser and Fujii, Metrologia 45
// (2008) 149–155: ρ = p·Ma/(Z·R·T)·[1 − xv(1 − Mv/Ma)].
func cipm2007(a Ambient, co2Fraction float64) float64 {
	const (
		r  = 8.314472    // J/(mol·K), the value the equation was published with
		mv = 18.01528e-3 // kg/mol, water
	)
	t, p, h := a.AirTempC, a.PressureHPa*100, a.HumidityPct/100
	tk := t + 273.15
	ma := (28.96546 + 12.011*(co2Fraction-0.0004)) * 1e-3
	psv := math.Exp(1.2378847e-5*tk*tk - 1.9121316e-2*tk + 33.93711047 - 6.3431645e3/tk)
	f := 1.00062 + 3.14e-8*p + 5.6e-7*t*t
	xv := h * f * psv / p
	z := 1 - p/tk*(1.58123e-6-2.9331e-8*t+1.1043e-10*t*t+(5.707e-6-2.051e-8*t)*xv+(1.9898e-4-2.376e-6*t)*xv*xv) +
		p/tk*p/tk*(1.83e-11-0.765e-8*xv*xv)
	return p * ma / (z * r * tk) * (1 - xv*(1-mv/ma))
}

// oimlR111 is the simplified formula of OIML R 111-1:2004 (E.3-1).
func oimlR111(a Ambient, _ float64) float64 {
	return (0.34848*a.PressureHPa - 0.009*a.HumidityPct*math.Exp(0.061*a.AirTempC)) / (273.15 + a.AirTempC)
}

// airSlopes gives the derivatives of the air density by temperature, pressure and
// humidity, kg/m³ per °C, hPa and %, by central differences that are exact to some
// 1e-8 of the slope.
func airSlopes(formula string, a Ambient, co2Fraction float64) (byTempC, byHPa, byPct float64) {
	f := airFormulas[formula]
	slope := func(change func(*Ambient, float64), step float64) float64 {
		up, down := a, a
		change(&up, step)
		change(&down, -step)
		return (f(up, co2Fraction) - f(down, co2Fraction)) / (2 * step)
	}
	byTempC = slope(func(a *Ambient, d float64) { a.AirTempC += d }, 0.01)
	byHPa = slope(func(a *Ambient, d float64) { a.PressureHPa += d }, 0.1)
	byPct = slope(func(a *Ambient, d float64) { a.HumidityPct += d }, 0.1)
	return byTempC, byHPa, byPct
}
