package calc

import (
	"errors"
	"math"
	"strconv"
	"testing"

	"pgregory.net/rapid"
)

// num reads a number of a fixture.
func num(t *testing.T, s string) float64 {
	t.Helper()
	x, err := strconv.ParseFloat(s, 64)
	if err != nil {
		t.Fatal(err)
	}
	return x
}

// water gives the density at 101 325 Pa.
func water(t *testing.T, formula string, tempC float64) float64 {
	t.Helper()
	rho, err := WaterDensity(formula, tempC, normalHPa)
	if err != nil {
		t.Fatal(err)
	}
	return rho
}

func TestTanakaCheckValues(t *testing.T) {
	for _, c := range []struct {
		tempC     float64
		want      float64
		tolerance float64
	}{
		{20, 998.2067455596167, 1e-9}, // a public tutorial on water, with all digits
		// a public R package's documentation, to four decimals
		{0, 999.8428, 5e-5},
		{10, 999.7027, 5e-5},
		{15, 999.1026, 5e-5},
		{20, 998.2067, 5e-5},
		{30, 995.6488, 5e-5},
		{3.983035, 999.974950, 1e-9}, // the maximum, coefficient a5
		// computed with an independent Python program
		{25, 997.04702, 5e-6},
		{35, 994.03260, 5e-6},
		{40, 992.21521, 5e-6},
	} {
		if got := water(t, "tanaka-2001", c.tempC); math.Abs(got-c.want) > c.tolerance {
			t.Errorf("%g °C: %.10f, want %.10f", c.tempC, got, c.want)
		}
	}
	// with dissolved air, computed with an independent Python program
	if got := water(t, "tanaka-2001-air-saturated", 20); math.Abs(got-998.2042536) > 5e-8 {
		t.Errorf("air-saturated at 20 °C: %.7f", got)
	}
	// its slopes, likewise, kg/(m³·K)
	for i, want := range []float64{-0.015978, -0.087936, -0.150781, -0.206496, -0.256552, -0.302057, -0.343864} {
		_, byTempC, _ := tanaka(float64(5+5*i), normalHPa)
		if math.Abs(byTempC-want) > 5.1e-7 {
			t.Errorf("slope at %d °C: %.7f, want %.6f", 5+5*i, byTempC, want)
		}
	}
	// at 850 hPa and 20 °C the compressibility takes off 0.00748 kg/m³
	low, err := WaterDensity("tanaka-2001", 20, 850)
	if err != nil || math.Abs(low-998.2067456+0.00748) > 5e-6 {
		t.Errorf("at 850 hPa: %.6f, %v", low, err)
	}
}

// Against general equations of state, computed with general-purpose libraries that the
// fixtures name.
func TestWaterAgainstEquationsOfState(t *testing.T) {
	for _, c := range []struct {
		file, formula string
		addKgM3       float64
		tolerance     float64
		lowC, upC     float64
	}{
		{"water_iapws95.csv", "tanaka-2001", 0, 1.2e-3, 0, 40},
		{"water_iapws95.csv", "tanaka-2001", 0, 7e-4, 5, 30},
		{"water_teos10.csv", "tanaka-2001", 0, 1.2e-3, 0, 40},
		{"water_iapws_sr6.csv", "tanaka-2001", 6.1e-4, 1.2e-3, 0, 40}, // from 0.1 MPa to 101 325 Pa
		{"water_iapws95.csv", "iapws-95", 0, 1.5e-6, 0, 40},
		{"water_teos10.csv", "iapws-95", 0, 4e-5, 0, 40},
		{"water_iapws95.csv", "iso-8655-6", 0, 4.9e-3, 5, 35},
	} {
		for _, r := range csvRows(t, c.file) {
			tempC := num(t, r[0])
			if tempC < c.lowC || tempC > c.upC {
				continue
			}
			if got, want := water(t, c.formula, tempC), num(t, r[1])+c.addKgM3; math.Abs(got-want) > c.tolerance {
				t.Errorf("%s at %g °C: %.6f, %s has %.6f", c.formula, tempC, got, c.file, want)
			}
		}
	}
	for _, r := range csvRows(t, "water_compressibility_iapws95.csv") {
		tempC, want := num(t, r[0]), num(t, r[2])
		for formula, tolerance := range map[string]float64{"tanaka-2001": 5e-3, "iapws-95": 2e-5, "jones-harris-1992": 4e-4} {
			f := waterFormulas[formula]
			if f.valid.check(formula, tempC) != nil {
				continue
			}
			rho, _, byHPa := f.density(tempC, normalHPa)
			if got := byHPa / rho / 100; !within(got, want, tolerance) {
				t.Errorf("compressibility by %s at %g °C: %.5g, want %.5g 1/Pa", formula, tempC, got, want)
			}
		}
	}
}

// CRC Handbook of Chemistry and Physics, 53rd edition, p. F4: older values, 2e-6 to 4e-6
// g/mL below Tanaka.
func TestWaterAgainstHandbook(t *testing.T) {
	for _, r := range csvRows(t, "water_crc.csv") {
		if got := water(t, "tanaka-2001", num(t, r[0])) / 1000; math.Abs(got-num(t, r[1])) > 4.5e-6 {
			t.Errorf("%s °C: %.6f, handbook %s g/mL", r[0], got, r[1])
		}
	}
}

// The polynomial of the volumetric standards, computed with an independent Python
// program; the coefficients are those of ISO/TR 20461 with Cor.1:2008.
func TestJonesHarris(t *testing.T) {
	for tempC, want := range map[float64]float64{5: 999.96477, 15: 999.09925, 20: 998.20325, 25: 997.04304, 30: 995.64487, 40: 992.21117} {
		if got := water(t, "iso-8655-6", tempC); math.Abs(got-want) > 5.1e-6 {
			t.Errorf("%g °C: %.6f, want %.5f", tempC, got, want)
		}
		if d := water(t, "iso-8655-6", tempC) - water(t, "tanaka-2001", tempC); tempC <= 35 && math.Abs(d) > 4.1e-3 {
			t.Errorf("%g °C: %.4f from Tanaka", tempC, d)
		}
	}
	// dissolved air: two independent sources of its effect agree within 2e-5 kg/m³
	for tempC := 5.0; tempC <= 40; tempC++ {
		harris := water(t, "jones-harris-1992", tempC) - water(t, "iso-8655-6", tempC)
		tanaka := water(t, "tanaka-2001-air-saturated", tempC) - water(t, "tanaka-2001", tempC)
		if math.Abs(harris-tanaka) > 2e-5 {
			t.Errorf("dissolved air at %g °C: %.6f and %.6f", tempC, harris, tanaka)
		}
	}
}

func TestWaterRefuses(t *testing.T) {
	for _, c := range []struct {
		name, formula string
		tempC, hPa    float64
		field         string
	}{
		{"too cold", "tanaka-2001", -0.1, 1000, "water_temp_C"},
		{"too warm", "tanaka-2001-air-saturated", 40.1, 1000, "water_temp_C"},
		{"below the polynomial", "iso-8655-6", 4.9, 1000, "water_temp_C"},
		{"not a number", "tanaka-2001", math.NaN(), 1000, "water_temp_C"},
		{"no air", "tanaka-2001", 20, 599, "pressure_hPa"},
		{"infinite pressure", "iapws-95", 20, math.Inf(1), "pressure_hPa"},
	} {
		_, err := WaterDensity(c.formula, c.tempC, c.hPa)
		var out *OutsideRange
		if !errors.As(err, &out) || out.Field != c.field || !errors.Is(err, ErrOutsideRange) {
			t.Errorf("%s: %v", c.name, err)
		}
	}
	if _, err := WaterDensity("kell", 20, 1000); err == nil {
		t.Error("an unknown formula passed")
	}
}

// Every slope agrees with a central difference.
func TestWaterSlopes(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		formula := rapid.SampledFrom(WaterFormulas()).Draw(t, "formula")
		tempC, hPa := rapid.Float64Range(5.1, 39.9).Draw(t, "tempC"), rapid.Float64Range(601, 1099).Draw(t, "hPa")
		f := waterFormulas[formula].density
		_, byTempC, byHPa := f(tempC, hPa)
		value := func(tempC, hPa float64) float64 { rho, _, _ := f(tempC, hPa); return rho }
		if want := (value(tempC+1e-3, hPa) - value(tempC-1e-3, hPa)) / 2e-3; math.Abs(byTempC-want) > 1e-8 {
			t.Errorf("by temperature %.10g, difference %.10g", byTempC, want)
		}
		if want := (value(tempC, hPa+10) - value(tempC, hPa-10)) / 20; math.Abs(byHPa-want) > 1e-12*1000 {
			t.Errorf("by pressure %.10g, difference %.10g", byHPa, want)
		}
	})
}
