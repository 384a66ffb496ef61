// Package decimal holds a number as it was written: its text, its exact value
// and its number of decimals.
//
// It is the only way by which digits from outside (a balance, a person, a file)
// enter the program. "24.9750" stays "24.9750": the trailing zero says how well
// the instrument resolves. The package refuses whatever is not a plain decimal
// number (no exponent, no NaN, no hexadecimal, no digit grouping) and it never
// turns a missing number into zero: the zero Number is "not there", and asking it
// for a value is a programmer's mistake that Float answers with NaN.
package decimal

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
)

// MaxDigits is the largest count of digits that a Number holds; 18 digits fit
// exactly in the 64-bit integer that carries the value.
const MaxDigits = 18

// ErrSyntax marks a text that is not a plain decimal number.
var ErrSyntax = errors.New("not a decimal number")

// ErrRange marks a number with more than MaxDigits digits.
var ErrRange = errors.New("more digits than can be held exactly")

// Number is a decimal number as it was written. The zero Number is absent.
// Numbers are comparable with ==, which compares the text, so that 1.0 and 1.00
// differ; Cmp compares values.
type Number struct {
	text     string
	unscaled int64
	decimals int
}

// Parse reads the form that instruments and files use: an optional sign, digits,
// and at most one decimal point with digits on both sides or on one. The text is
// kept without a leading plus.
func Parse(s string) (Number, error) {
	unscaled, decimals, err := scan(s)
	if err != nil {
		return Number{}, err
	}
	return Number{text: strings.TrimPrefix(s, "+"), unscaled: unscaled, decimals: decimals}, nil
}

// ParseTyped reads what a person types: as Parse, with surrounding blanks dropped
// and a comma accepted as the decimal mark. The text is kept with a point.
func ParseTyped(s string) (Number, error) {
	t := strings.TrimSpace(s)
	if strings.Count(t, ",") == 1 && !strings.Contains(t, ".") {
		t = strings.Replace(t, ",", ".", 1)
	}
	n, err := Parse(t)
	if err != nil {
		return Number{}, fmt.Errorf("%q: %w", s, errors.Unwrap(err))
	}
	return n, nil
}

// MustParse is Parse for constants in the program text. It panics on an error.
func MustParse(s string) Number {
	n, err := Parse(s)
	if err != nil {
		panic(err)
	}
	return n
}

// New gives the number unscaled × 10^-decimals, written with exactly that many
// decimals. decimals is 0 … MaxDigits.
func New(unscaled int64, decimals int) Number {
	if decimals < 0 || decimals > MaxDigits {
		panic(fmt.Sprintf("decimal.New: %d decimals", decimals))
	}
	return Number{text: format(unscaled, decimals), unscaled: unscaled, decimals: decimals}
}

// Round gives x rounded to the given number of decimals, half away from zero on
// the exact decimal expansion of the float. It is the one place where a computed
// value becomes digits again; x that is no finite number, or too large, is an error.
func Round(x float64, decimals int) (Number, error) {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return Number{}, fmt.Errorf("decimal.Round: %v is not finite", x)
	}
	scaled := math.Round(x * math.Pow10(decimals))
	if math.Abs(scaled) >= 1e15 {
		return Number{}, fmt.Errorf("decimal.Round %v: %w", x, ErrRange)
	}
	return New(int64(scaled), decimals), nil
}

// scan checks the grammar and gives the digits as an integer.
func scan(s string) (unscaled int64, decimals int, err error) {
	digits, seenMark, negative := 0, false, false
	for i := 0; i < len(s); i++ {
		c := s[i]
		switch {
		case i == 0 && (c == '+' || c == '-'):
			negative = c == '-'
		case c == '.' && !seenMark:
			seenMark = true
		case c >= '0' && c <= '9':
			if digits++; digits > MaxDigits {
				return 0, 0, fmt.Errorf("%q: %w", s, ErrRange)
			}
			unscaled = unscaled*10 + int64(c-'0')
			if seenMark {
				decimals++
			}
		default:
			return 0, 0, fmt.Errorf("%q: %w", s, ErrSyntax)
		}
	}
	if digits == 0 {
		return 0, 0, fmt.Errorf("%q: %w", s, ErrSyntax)
	}
	if negative {
		unscaled = -unscaled
	}
	return unscaled, decimals, nil
}

// format writes unscaled × 10^-decimals in full.
func format(unscaled int64, decimals int) string {
	sign := ""
	if unscaled < 0 {
		sign = "-"
	}
	digits := strings.TrimPrefix(strconv.FormatInt(unscaled, 10), "-")
	if decimals == 0 {
		return sign + digits
	}
	if pad := decimals + 1 - len(digits); pad > 0 {
		digits = strings.Repeat("0", pad) + digits
	}
	cut := len(digits) - decimals
	return sign + digits[:cut] + "." + digits[cut:]
}

// IsSet says whether there is a number at all.
func (n Number) IsSet() bool { return n.text != "" }

// String gives the number as it was written, "" when it is absent.
func (n Number) String() string { return n.text }

// Decimals gives the count of digits after the decimal mark.
func (n Number) Decimals() int { return n.decimals }

// Unscaled gives the digits as an integer: the value is Unscaled × 10^-Decimals.
func (n Number) Unscaled() int64 { return n.unscaled }

// Float gives the nearest float, NaN when the number is absent.
func (n Number) Float() float64 {
	if !n.IsSet() {
		return math.NaN()
	}
	if abs := max(n.unscaled, -n.unscaled); abs < 1<<53 && n.decimals <= 22 {
		return float64(n.unscaled) / math.Pow10(n.decimals) // both exact, one rounding
	}
	f, err := strconv.ParseFloat(n.text, 64) // the grammar was checked by scan
	if err != nil {
		return math.NaN()
	}
	return f
}

// Cmp compares the values exactly: -1, 0 or +1. Both must be present.
func (n Number) Cmp(m Number) int {
	d := n.Sub(m)
	switch {
	case d.unscaled < 0:
		return -1
	case d.unscaled > 0:
		return 1
	}
	return 0
}

// Sub gives n − m exactly, with the larger number of decimals of the two. It
// panics when one is absent or when the result does not fit.
func (n Number) Sub(m Number) Number {
	if !n.IsSet() || !m.IsSet() {
		panic("decimal.Sub: absent number")
	}
	d := max(n.decimals, m.decimals)
	a, okA := scaleUp(n.unscaled, d-n.decimals)
	b, okB := scaleUp(m.unscaled, d-m.decimals)
	r := a - b
	if !okA || !okB || (a >= 0) != (b >= 0) && (r >= 0) != (a >= 0) {
		panic(fmt.Sprintf("decimal.Sub %s - %s: %v", n, m, ErrRange))
	}
	return New(r, d)
}

// scaleUp gives v × 10^by, and whether it fits.
func scaleUp(v int64, by int) (int64, bool) {
	for range by {
		if v > math.MaxInt64/10 || v < math.MinInt64/10 {
			return 0, false
		}
		v *= 10
	}
	return v, true
}

// MarshalJSON writes the text as a JSON string, an absent number as null.
func (n Number) MarshalJSON() ([]byte, error) {
	if !n.IsSet() {
		return []byte("null"), nil
	}
	return json.Marshal(n.text)
}

// UnmarshalJSON reads a JSON string or a JSON number, taking the digits as they
// stand; null leaves the number absent. Exponents are refused.
func (n *Number) UnmarshalJSON(b []byte) error {
	text := string(b)
	if text == "null" {
		*n = Number{}
		return nil
	}
	if strings.HasPrefix(text, `"`) {
		if err := json.Unmarshal(b, &text); err != nil {
			return err
		}
	}
	parsed, err := ParseTyped(text)
	if err != nil {
		return err
	}
	*n = parsed
	return nil
}

// ParseScientific is ParseTyped with a power of ten allowed, as uncertainties are
// often written: 2e-6 is 0.000002. The number must fit in MaxDigits digits.
func ParseScientific(s string) (Number, error) {
	mantissa, power, found := strings.Cut(strings.ToLower(strings.TrimSpace(s)), "e")
	n, err := ParseTyped(mantissa)
	if err != nil || !found {
		return n, err
	}
	e, err := strconv.Atoi(power)
	if err != nil || e < -MaxDigits || e > MaxDigits {
		return Number{}, fmt.Errorf("%q: %w", s, ErrSyntax)
	}
	if decimals := n.decimals - e; decimals >= 0 && decimals <= MaxDigits {
		return New(n.unscaled, decimals), nil
	}
	if up, ok := scaleUp(n.unscaled, e-n.decimals); ok && up < 1e18 && up > -1e18 {
		return New(up, 0), nil
	}
	return Number{}, fmt.Errorf("%q: %w", s, ErrRange)
}

// UnmarshalText reads what ParseScientific reads, for flags.
func (n *Number) UnmarshalText(b []byte) error {
	parsed, err := ParseScientific(string(b))
	if err != nil {
		return err
	}
	*n = parsed
	return nil
}

// UnmarshalTOML reads a TOML string, integer or float. A float is taken as the
// shortest decimal that means it, so 0.006 stays 0.006.
func (n *Number) UnmarshalTOML(v any) error {
	switch v := v.(type) {
	case string:
		return n.UnmarshalText([]byte(v))
	case int64:
		return n.UnmarshalText([]byte(strconv.FormatInt(v, 10)))
	case float64:
		return n.UnmarshalText([]byte(strconv.FormatFloat(v, 'g', -1, 64)))
	}
	return fmt.Errorf("%v: %w", v, ErrSyntax)
}

// MarshalText writes the number as it was written.
func (n Number) MarshalText() ([]byte, error) { return []byte(n.text), nil }
