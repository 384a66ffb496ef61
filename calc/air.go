package calc

import (
	"fmt"
	"math"
	"strings"
)

// airFormula is one formula for the density of moist air, in kg/m³, with its
// derivatives by temperature, pressure and humidity, kg/m³ per °C, hPa and %.
type airFormula struct {
	density func(a Ambient, co2Fraction float64) float64
	slopes  func(a Ambient, co2Fraction float64) (byTempC, byHPa, byPct float64)
}

// airFormulas are the formulas by the name that inputs carry.
var airFormulas = map[string]airFormula{
	"cipm-2007":            {cipm2007, cipm2007Slopes},
	"oiml-r111-simplified": {oimlR111, oimlR111Slopes},
	"iso-8655-6":           {isoAir, isoAirSlopes},
	"fixed-1.2":            {fixedAir, fixedAirSlopes},
}

// AirFormulas gives the names that AirDensity knows, sorted.
func AirFormulas() []string { return sortedNames(airFormulas) }

// AirDensity gives the density of moist air in kg/m³ by a named formula, from 5 to
// 35 °C, 600 to 1100 hPa and 0 to 100 % relative humidity; outside is *OutsideRange.
// Warnings tells of values outside the range that a formula is recommended for.
//
//   - cipm-2007: the equation of the CIPM, relative uncertainty of the equation 22e-6
//   - oiml-r111-simplified: OIML R 111-1:2004 (E.3-1), within 1.4e-4 of it
//   - iso-8655-6: the form of ISO 8655-6 and ISO/TR 20461, within 1.3e-3 of it
//   - fixed-1.2: 1.2 kg/m³ whatever the air
func AirDensity(formula string, a Ambient, co2Fraction float64) (float64, error) {
	f, err := findAir(formula, a)
	if err != nil {
		return 0, fmt.Errorf("air density: %w", err)
	}
	return f.density(a, co2Fraction), nil
}

func findAir(formula string, a Ambient) (airFormula, error) {
	f, ok := airFormulas[formula]
	if !ok {
		return f, fmt.Errorf("formula %q is none of %s", formula, strings.Join(AirFormulas(), ", "))
	}
	if err := airTempRange.check(formula, a.AirTempC); err != nil {
		return f, err
	}
	if err := pressureRange.check(formula, a.PressureHPa); err != nil {
		return f, err
	}
	return f, humidityRange.check(formula, a.HumidityPct)
}

// The CIPM-2007 equation, Picard, Davis, Gläser and Fujii, Metrologia 45 (2008)
// 149–155, with the gas constant it was published with.
const (
	gasConstant = 8.314472    // J/(mol·K)
	waterMolar  = 18.01528e-3 // kg/mol
)

// moist holds the intermediate quantities of the CIPM-2007 equation.
type moist struct {
	tk, p           float64 // K, Pa
	psv, f, xv, z   float64 // saturation pressure in Pa, enhancement factor, mole fraction of water, compressibility
	air, virialX, m float64 // molar mass of dry air in kg/mol, 1 − xv·m, m = 1 − Mv/Ma
}

func newMoist(a Ambient, co2Fraction float64) moist {
	t, p, h := a.AirTempC, a.PressureHPa*100, a.HumidityPct/100
	q := moist{tk: t + 273.15, p: p, air: (28.96546 + 12.011*(co2Fraction-0.0004)) * 1e-3}
	q.psv = math.Exp(1.2378847e-5*q.tk*q.tk - 1.9121316e-2*q.tk + 33.93711047 - 6.3431645e3/q.tk)
	q.f = 1.00062 + 3.14e-8*p + 5.6e-7*t*t
	q.xv = h * q.f * q.psv / p
	x, s := q.xv, p/q.tk
	q.z = 1 - s*virial(t, x) + s*s*(1.83e-11-0.765e-8*x*x)
	q.m = 1 - waterMolar/q.air
	q.virialX = 1 - x*q.m
	return q
}

// virial is the bracket a0 + a1·t + a2·t² + (b0 + b1·t)·x + (c0 + c1·t)·x² of Z.
func virial(t, x float64) float64 {
	return 1.58123e-6 - 2.9331e-8*t + 1.1043e-10*t*t + (5.707e-6-2.051e-8*t)*x + (1.9898e-4-2.376e-6*t)*x*x
}

// cipm2007: ρ = p·Ma/(Z·R·T)·[1 − xv(1 − Mv/Ma)].
func cipm2007(a Ambient, co2Fraction float64) float64 {
	q := newMoist(a, co2Fraction)
	return q.p * q.air / (q.z * gasConstant * q.tk) * q.virialX
}

// cipm2007Slopes differentiates the logarithm of the equation term by term.
func cipm2007Slopes(a Ambient, co2Fraction float64) (byTempC, byHPa, byPct float64) {
	q := newMoist(a, co2Fraction)
	t, x, s := a.AirTempC, q.xv, q.p/q.tk
	rho := q.p * q.air / (q.z * gasConstant * q.tk) * q.virialX
	zByS := -virial(t, x) + 2*s*(1.83e-11-0.765e-8*x*x)
	zByX := -s*(5.707e-6-2.051e-8*t+2*(1.9898e-4-2.376e-6*t)*x) - 2*s*s*0.765e-8*x
	zByT := -s * (-2.9331e-8 + 2*1.1043e-10*t - 2.051e-8*x - 2.376e-6*x*x)
	logRho := func(direct, dx, ds, dt float64) float64 {
		return rho * (direct - (zByS*ds+zByX*dx+zByT*dt)/q.z - q.m*dx/q.virialX)
	}
	psvByT := 2*1.2378847e-5*q.tk - 1.9121316e-2 + 6.3431645e3/(q.tk*q.tk) // of the logarithm
	xByT := x * (psvByT + 2*5.6e-7*t/q.f)
	xByP := x * (3.14e-8/q.f - 1/q.p)
	xByH := q.f * q.psv / q.p
	return logRho(-1/q.tk, xByT, -s/q.tk, 1), 100 * logRho(1/q.p, xByP, 1/q.tk, 0), logRho(0, xByH, 0, 0) / 100
}

// oimlR111 is the simplified formula of OIML R 111-1:2004 (E.3-1), also that of
// EURAMET cg-18: ρ = (0.34848 p − 0.009 h exp(0.061 t))/(273.15 + t), p in hPa, h in %.
func oimlR111(a Ambient, _ float64) float64 {
	return (0.34848*a.PressureHPa - 0.009*a.HumidityPct*math.Exp(0.061*a.AirTempC)) / (273.15 + a.AirTempC)
}

func oimlR111Slopes(a Ambient, _ float64) (byTempC, byHPa, byPct float64) {
	tk, e := 273.15+a.AirTempC, 0.009*math.Exp(0.061*a.AirTempC)
	byTempC = -0.061*a.HumidityPct*e/tk - (0.34848*a.PressureHPa-a.HumidityPct*e)/(tk*tk)
	return byTempC, 0.34848 / tk, -e / tk
}

// Coefficients of the form that ISO 8655-6:2002, ISO/TR 20461 and ISO 4787 use
// (Spieweck and Bettin): ρ = [k1·p + φ(k2·t + k3)]/(t + 273.15), p in hPa, φ in %.
const (
	isoAirK1 = 0.34844  // kg·K/(m³·hPa)
	isoAirK2 = -0.00252 // kg/m³ for each %
	isoAirK3 = 0.020582 // kg·K/m³ for each %
)

func isoAir(a Ambient, _ float64) float64 {
	return (isoAirK1*a.PressureHPa + a.HumidityPct*(isoAirK2*a.AirTempC+isoAirK3)) / (a.AirTempC + 273.15)
}

func isoAirSlopes(a Ambient, _ float64) (byTempC, byHPa, byPct float64) {
	tk := a.AirTempC + 273.15
	return (isoAirK2*a.HumidityPct - isoAir(a, 0)) / tk, isoAirK1 / tk, (isoAirK2*a.AirTempC + isoAirK3) / tk
}

func fixedAir(Ambient, float64) float64 { return 1.2 }

func fixedAirSlopes(Ambient, float64) (byTempC, byHPa, byPct float64) { return 0, 0, 0 }
