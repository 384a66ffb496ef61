package protocol

import (
	"bytes"
	"path/filepath"
	"testing"

	"tenthmark/calc/decimal"
)

// seeds gives the bytes of every table and every stream.
func seeds(f *testing.F) (all [][]byte) {
	for _, r := range append(readTable(f, tables+"manual_lines.tsv", true), readTable(f, tables+"rule_lines.tsv", true)...) {
		all = append(all, r.bytes)
	}
	files, err := filepath.Glob(tables + "streams/*.tsv")
	if err != nil {
		f.Fatal(err)
	}
	for _, file := range files {
		var stream []byte
		for _, r := range readTable(f, file, false) {
			if !bytes.HasPrefix(r.bytes, []byte("!")) {
				stream = append(append(stream, r.bytes...), '\r', '\n')
			}
		}
		all = append(all, stream)
	}
	return all
}

// Any bytes in any portions: the same frames, every byte in one of them.
func FuzzAnyBytes(f *testing.F) {
	for _, s := range seeds(f) {
		f.Add(s, uint8(1), uint8(5))
	}
	f.Fuzz(func(t *testing.T, in []byte, a, b uint8) {
		checkPortions(t, in, []int{int(a), int(b)})
		checkEveryByte(t, in)
	})
}

// A weight that may serve as a weighing has the form of one: sign or blank, digits
// with at most one mark, a unit that shifts to grams; and its number is what its
// digits say.
func FuzzWeightsHaveTheirForm(f *testing.F) {
	for _, s := range seeds(f) {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, in []byte) {
		NewDecoder(Options{}).Feed(in, func(f *Frame) {
			if f.Kind != Weight {
				if f.Plain || f.Stable || f.Text() != "" || f.Value().IsSet() {
					t.Fatalf("%q: %s with a number", f.Raw, f.Kind)
				}
				return
			}
			unscaled, decimals := f.Scaled()
			v, err := decimal.Parse(f.Text())
			switch {
			case err != nil:
				t.Fatalf("%q: %v", f.Raw, err)
			case !f.Value().IsSet(), f.Value().Unscaled() != unscaled, v.Decimals() != decimals, v.Unscaled() != max(unscaled, -unscaled):
				t.Fatalf("%q: %s, scaled %d, %d", f.Raw, f.Value(), unscaled, decimals)
			case f.Plain && !f.MassG().IsSet() && v.Unscaled() < 1e14:
				t.Fatalf("%q: plain without a mass", f.Raw)
			}
		})
	})
}

func FuzzRoundTrip(f *testing.F) {
	f.Add(int64(451234), 4, "N", "g", true, false, false)
	f.Add(int64(-12), 4, "", "mg", false, true, true)
	f.Fuzz(func(t *testing.T, unscaled int64, decimals int, id, unit string, long, comma, hidePlus bool) {
		if decimals < 0 || decimals > decimal.MaxDigits || unscaled > 1e17 || unscaled < -1e17 {
			t.Skip("no number to show")
		}
		l := Line{ID: id, Value: decimal.New(unscaled, decimals), Unit: unit}
		line, err := Dialect{Long: long, Comma: comma, HidePlus: hidePlus}.Append(nil, l)
		if err != nil || !isIdentification([]byte(id)) || !isUnit([]byte(unit)) {
			t.Skip("not a line")
		}
		NewDecoder(Options{}).Feed(line, func(f *Frame) {
			if f.Kind != Weight || f.Value() != l.Value || f.Unit != unit {
				t.Errorf("%q comes back as %s", line, meaning(f))
			}
		})
	})
}

// A pattern never makes a weight of a part of a number.
func FuzzPatternLines(f *testing.F) {
	p, err := NewPattern(`(?P<sign>[-+]?)\s*(?P<value>[0-9]+[.,]?[0-9]*)\s*(?P<unit>k?g)?`)
	if err != nil {
		f.Fatal(err)
	}
	f.Add([]byte("G.W.:  +12.345 kg\r\n"))
	f.Add([]byte("1.2.3 g\r\n"))
	f.Fuzz(func(t *testing.T, in []byte) {
		NewDecoder(Options{Pattern: p}).Feed(in, func(f *Frame) {
			if f.Kind != Weight {
				return
			}
			digits := f.Text()
			at := bytes.Index(bytes.ReplaceAll(f.line, []byte(","), []byte(".")), []byte(digits))
			if at < 0 {
				t.Fatalf("%q: %s is not there", f.Raw, digits)
			}
		})
	})
}
