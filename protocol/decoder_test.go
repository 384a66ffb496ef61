package protocol

import (
	"bytes"
	"os"
	"strings"
	"testing"

	"tenthmark/calc/decimal"
)

// decodeAll feeds the bytes in portions of the given size and gives a line of JSON for
// each frame.
func decodeAll(in []byte, portion int) []string {
	var out []string
	d := NewDecoder(Options{})
	keep := func(f *Frame) { out = append(out, string(f.AppendJSON(nil))) }
	for len(in) > 0 {
		n := min(portion, len(in))
		d.Feed(in[:n], keep)
		in = in[n:]
	}
	d.End(keep)
	return out
}

// The lines and their meaning are from the interface chapters of balance operating
// manuals; the file names the form each comes from.
func TestManualExamples(t *testing.T) {
	text, err := os.ReadFile("../testdata/protocol/manual_lines.tsv")
	if err != nil {
		t.Fatal(err)
	}
	for _, row := range strings.Split(strings.TrimSpace(string(text)), "\n")[1:] {
		cells := strings.Split(row, "\t")
		in := strings.NewReplacer(`\r`, "\r", `\n`, "\n").Replace(cells[0])
		got := decodeAll([]byte(in), len(in))
		if len(got) != 1 || !strings.HasPrefix(got[0], cells[1]) {
			t.Errorf("%q: got %s, want %s…", in, got, cells[1])
		}
	}
}

func TestAnyPortionsGiveTheSameFrames(t *testing.T) {
	in := []byte("N     +  45.1234 g  \r\n+   123.5[6]g  \n\x13+  -  \x00 g\r\n-------------------\r\nNom.  + 200.0000 g  \r\n-------------------\r\n+   12,345 g  \r+   1.00")
	want := decodeAll(in, len(in))
	for portion := 1; portion < len(in); portion++ {
		if got := decodeAll(in, portion); strings.Join(got, "\n") != strings.Join(want, "\n") {
			t.Fatalf("portions of %d:\n%s\nwant\n%s", portion, strings.Join(got, "\n"), strings.Join(want, "\n"))
		}
	}
}

func TestNothingInsideAReportIsAWeighing(t *testing.T) {
	in := "-------------------\r\nSer.no.    12345678\r\n+ 200.0000 g  \r\n-------------------\r\n+  45.1234 g  \r\n"
	var plain []string
	NewDecoder(Options{}).Feed([]byte(in), func(f *Frame) {
		if f.Kind == Weight && f.Plain {
			plain = append(plain, f.Text())
		}
	})
	if len(plain) != 1 || plain[0] != "45.1234" {
		t.Errorf("plain weights %v, want 45.1234 alone", plain)
	}
}

func TestAfterResyncTheFirstTailIsDropped(t *testing.T) {
	d := NewDecoder(Options{})
	d.Resync()
	var got []string
	d.Feed([]byte("5.1234 g  \r\n+  45.1234 g  \r\n"), func(f *Frame) { got = append(got, f.Text()) })
	if len(got) != 1 || got[0] != "45.1234" {
		t.Errorf("got %v, want the whole line alone", got)
	}
}

func TestNoPrefixOfALineIsAWeight(t *testing.T) {
	for _, line := range []string{"N     +  45.1234 g  \r\n", "+150.11775 g  \r\n", "   111.255 g  \r\n"} {
		for cut := 1; cut < len(line)-1; cut++ {
			for _, got := range decodeAll([]byte(line[:cut]), 1) {
				if strings.Contains(got, `"kind":"weight"`) {
					t.Errorf("%q is taken for a weight: %s", line[:cut], got)
				}
			}
		}
	}
}

// The byte rows of a 7-bit line read as 8 bits, from the parity rule itself.
func TestParityIsStrippedAndNamed(t *testing.T) {
	for _, parity := range []struct {
		name string
		odd  bool
	}{{"odd parity", true}, {"even parity", false}} {
		var in []byte
		for _, c := range bytes.Repeat([]byte("+  12.3456 g  \r\n"), 4) {
			ones := 0
			for b := c; b > 0; b &= b - 1 {
				ones++
			}
			if (ones%2 == 0) == parity.odd {
				c |= 0x80
			}
			in = append(in, c)
		}
		d := NewDecoder(Options{})
		n := 0
		d.Feed(in, func(f *Frame) {
			if f.Text() == "12.3456" && f.Stable {
				n++
			}
		})
		if n != 4 || !strings.Contains(d.Diagnosis(), parity.name) {
			t.Errorf("%d of 4 lines, diagnosis %q; want %s", n, d.Diagnosis(), parity.name)
		}
	}
}

func TestDecodingAWeightAllocatesNothing(t *testing.T) {
	d := NewDecoder(Options{})
	line := []byte("N     +  45.1234 g  \r\n")
	n := 0
	emit := func(f *Frame) {
		if f.Kind == Weight {
			n++
		}
	}
	if got := testing.AllocsPerRun(1000, func() { d.Feed(line, emit) }); got != 0 || n == 0 {
		t.Errorf("%v allocations for each line, %d weights", got, n)
	}
}

func TestUnitsShiftToGramsExactly(t *testing.T) {
	for in, want := range map[string]string{
		"+111.25507 mg \r\n": "0.11125507", "+  1.23456 kg \r\n": "1234.56", "+      1.5 kg \r\n": "1500", "-   0.0012 g  \r\n": "-0.0012", "+      100 ct \r\n": "",
	} {
		NewDecoder(Options{}).Feed([]byte(in), func(f *Frame) {
			if got := f.MassG().String(); got != want {
				t.Errorf("%q: %q g, want %q", in, got, want)
			}
		})
	}
}

func FuzzPortions(f *testing.F) {
	f.Add([]byte("N     +  45.1234 g  \r\n+ 1"), 3)
	f.Fuzz(func(t *testing.T, in []byte, portion int) {
		if portion < 1 {
			portion = 1
		}
		whole, parts := decodeAll(in, max(len(in), 1)), decodeAll(in, portion)
		if strings.Join(whole, "\n") != strings.Join(parts, "\n") {
			t.Errorf("%q in portions of %d: %v, whole %v", in, portion, parts, whole)
		}
	})
}

func FuzzRoundTrip(f *testing.F) {
	f.Add(int64(451234), 4, true)
	f.Fuzz(func(t *testing.T, unscaled int64, decimals int, long bool) {
		if decimals < 0 || decimals > 7 || unscaled > 99999999 || unscaled < -99999999 {
			t.Skip("does not fit nine columns")
		}
		value := decimal.New(unscaled, decimals)
		line, err := Encode(nil, Line{ID: "N", Value: value, Unit: "g"}, long)
		if err != nil {
			t.Fatal(err)
		}
		NewDecoder(Options{}).Feed(line, func(f *Frame) {
			if f.Kind != Weight || f.Value().Cmp(value) != 0 || f.Value().Decimals() != decimals || !f.Plain {
				t.Errorf("%q comes back as %s", line, f.AppendJSON(nil))
			}
		})
	})
}
