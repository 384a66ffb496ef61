package publish

import (
	"fmt"
	"math"

	"tenthmark/calc/decimal"
)

// RoundingRule is how numbers are rounded wherever a person reads them.
const RoundingRule = "Expanded uncertainties are rounded to two significant digits, half away from zero; a value is rounded to the decimal of its uncertainty."

// decimalsOf gives the number of decimals that shows u with two significant digits, 0
// to 9. An uncertainty that rounds up to three digits (0.0996) keeps its two.
func decimalsOf(u float64) int {
	if !(u > 0) {
		return 4
	}
	d := 1 - int(math.Floor(math.Log10(u)))
	if math.Round(u*math.Pow10(d)) >= 100 {
		d--
	}
	return min(max(d, 0), 9)
}

// rounded gives a value and its expanded uncertainty by the RoundingRule.
func rounded(value, expanded float64) (v, u string, err error) {
	d := decimalsOf(expanded)
	if v, err = fixed(value, d); err != nil {
		return "", "", err
	}
	u, err = fixed(expanded, d)
	return v, u, err
}

// signed is rounded with a plus sign for positive values.
func signed(value, expanded float64) (v, u string, err error) {
	v, u, err = rounded(value, expanded)
	if err == nil && value > 0 && v[0] != '-' {
		v = "+" + v
	}
	return v, u, err
}

func fixed(x float64, decimals int) (string, error) {
	n, err := decimal.Round(x, decimals)
	if err != nil {
		return "", fmt.Errorf("print %v: %w", x, err)
	}
	return n.String(), nil
}
