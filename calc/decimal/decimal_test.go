package decimal

import (
	"encoding/json"
	"errors"
	"math"
	"math/big"
	"testing"

	"pgregory.net/rapid"
)

func TestParseKeepsTheTextAndTheExactValue(t *testing.T) {
	tests := []struct {
		in, text string
		unscaled int64
		decimals int
	}{
		{"24.9750", "24.9750", 249750, 4},
		{"+99.8730", "99.8730", 998730, 4},
		{"-0.0012", "-0.0012", -12, 4},
		{"0", "0", 0, 0},
		{".5", ".5", 5, 1},
		{"5.", "5.", 5, 0},
		{"999999999999999999", "999999999999999999", 999999999999999999, 0},
	}
	for _, tt := range tests {
		n, err := Parse(tt.in)
		if err != nil {
			t.Errorf("Parse(%q): %v", tt.in, err)
			continue
		}
		if n.String() != tt.text || n.Unscaled() != tt.unscaled || n.Decimals() != tt.decimals {
			t.Errorf("Parse(%q) = %q %d %d, want %q %d %d", tt.in, n, n.Unscaled(), n.Decimals(), tt.text, tt.unscaled, tt.decimals)
		}
	}
}

func TestParseRefusesWhatIsNoDecimalNumber(t *testing.T) {
	for _, in := range []string{"", " ", "+", "-", ".", "nan", "inf", "0x1p-2", "1_0", "1e3", "1.2.3", "1,2", "٣", "1 2", "--1"} {
		if n, err := Parse(in); !errors.Is(err, ErrSyntax) || n.IsSet() {
			t.Errorf("Parse(%q) = %q, %v; want ErrSyntax", in, n, err)
		}
	}
	if _, err := Parse("1234567890123456789"); !errors.Is(err, ErrRange) {
		t.Errorf("19 digits: %v, want ErrRange", err)
	}
}

func TestTypedNumbersMayUseACommaAndBlanks(t *testing.T) {
	n, err := ParseTyped(" 10,02 ")
	if err != nil || n.String() != "10.02" {
		t.Errorf("ParseTyped = %q, %v; want 10.02", n, err)
	}
	if _, err := ParseTyped("1.234,5"); !errors.Is(err, ErrSyntax) {
		t.Errorf("point and comma: %v, want ErrSyntax", err)
	}
}

func TestAbsentIsNotZero(t *testing.T) {
	var n Number
	if n.IsSet() || !math.IsNaN(n.Float()) {
		t.Errorf("absent number: set %v, float %v; want false, NaN", n.IsSet(), n.Float())
	}
	if b, err := json.Marshal(n); err != nil || string(b) != "null" {
		t.Errorf("absent number in JSON: %s, %v; want null", b, err)
	}
}

func TestJSONCarriesTheDigits(t *testing.T) {
	var v struct{ A, B Number }
	if err := json.Unmarshal([]byte(`{"A":"10.0120","B":9.90}`), &v); err != nil {
		t.Fatal(err)
	}
	out, err := json.Marshal(v)
	if err != nil || string(out) != `{"A":"10.0120","B":"9.90"}` {
		t.Errorf("round trip: %s, %v", out, err)
	}
	if err := json.Unmarshal([]byte(`{"A":1e3}`), &v); err == nil {
		t.Error("an exponent was accepted")
	}
}

func TestRoundIsHalfAwayFromZero(t *testing.T) {
	for _, tt := range []struct {
		x    float64
		d    int
		want string
	}{{0.125, 2, "0.13"}, {-0.125, 2, "-0.13"}, {9.9999, 3, "10.000"}, {0, 4, "0.0000"}, {-0.00004, 4, "0.0000"}} {
		if n, err := Round(tt.x, tt.d); err != nil || n.String() != tt.want {
			t.Errorf("Round(%v, %d) = %q, %v; want %q", tt.x, tt.d, n, err, tt.want)
		}
	}
	if _, err := Round(math.NaN(), 2); err == nil {
		t.Error("NaN was rounded")
	}
}

// The exact difference is checked against math/big's rational numbers.
func TestSubAgreesWithRationalArithmetic(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		a := New(rapid.Int64Range(-1e12, 1e12).Draw(t, "a"), rapid.IntRange(0, 6).Draw(t, "da"))
		b := New(rapid.Int64Range(-1e12, 1e12).Draw(t, "b"), rapid.IntRange(0, 6).Draw(t, "db"))
		ra, _ := new(big.Rat).SetString(a.String())
		rb, _ := new(big.Rat).SetString(b.String())
		got, _ := new(big.Rat).SetString(a.Sub(b).String())
		if want := new(big.Rat).Sub(ra, rb); got.Cmp(want) != 0 {
			t.Fatalf("%s - %s = %s, want %s", a, b, got, want)
		}
	})
}

// The nearest float is checked against strconv through math/big.
func TestFloatIsTheNearest(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := New(rapid.Int64Range(-999999999999999999, 999999999999999999).Draw(t, "n"), rapid.IntRange(0, 18).Draw(t, "d"))
		r, _ := new(big.Rat).SetString(n.String())
		want, _ := r.Float64()
		if got := n.Float(); got != want {
			t.Fatalf("%s: float %v, want %v", n, got, want)
		}
	})
}

func TestUncertaintiesMayBeWrittenWithAPowerOfTen(t *testing.T) {
	for in, want := range map[string]string{"2e-6": "0.000002", "9.9E-6": "0.0000099", "1.50e1": "15.0", "3e2": "300", "0.0001": "0.0001"} {
		if n, err := ParseScientific(in); err != nil || n.String() != want {
			t.Errorf("ParseScientific(%q) = %q, %v; want %q", in, n, err, want)
		}
	}
	for _, in := range []string{"2e", "e3", "2e-60", "2e1.5", "1e2e3", "9e18"} {
		if n, err := ParseScientific(in); err == nil {
			t.Errorf("ParseScientific(%q) = %q, want an error", in, n)
		}
	}
}

func TestTOMLNumbersKeepTheirDigits(t *testing.T) {
	for _, tt := range []struct {
		in   any
		want string
	}{{"0.0060", "0.0060"}, {5e-7, "0.0000005"}, {int64(8000), "8000"}} {
		var n Number
		if err := n.UnmarshalTOML(tt.in); err != nil || n.String() != tt.want {
			t.Errorf("UnmarshalTOML(%v) = %q, %v; want %q", tt.in, n, err, tt.want)
		}
	}
	var n Number
	if err := n.UnmarshalTOML(true); err == nil {
		t.Error("a boolean was taken for a number")
	}
}
