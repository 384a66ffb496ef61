package protocol

import (
	"bytes"
	"fmt"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"tenthmark/calc/decimal"
)

// plainLine draws a weighing that fits nine columns, in any dialect.
func plainLine(t *rapid.T) (Line, Dialect) {
	decimals := rapid.IntRange(0, 7).Draw(t, "decimals")
	most := int64(99_999_999)
	l := Line{
		Value: decimal.New(rapid.Int64Range(-most, most).Draw(t, "unscaled"), decimals),
		Unit:  rapid.SampledFrom([]string{"g", "mg", "kg", ""}).Draw(t, "unit"),
	}
	d := Dialect{
		Long: rapid.Bool().Draw(t, "long"), Unfilled: rapid.IntRange(0, 3).Draw(t, "filling") == 0,
		Comma: rapid.Bool().Draw(t, "comma"), HidePlus: rapid.Bool().Draw(t, "hide plus"),
		End:    rapid.SampledFrom([]string{"\r\n", "\n", "\r"}).Draw(t, "end"),
		Parity: rapid.SampledFrom([]Parity{NoParity, OddParity, EvenParity, MarkParity}).Draw(t, "parity"),
	}
	if d.Long {
		l.ID = rapid.SampledFrom([]string{"N", "N1", "G#", ""}).Draw(t, "id")
	}
	if !d.Unfilled && len(strings.Trim(l.Value.String(), "-")) < 9 && decimals > 0 {
		l.Unverified = rapid.IntRange(0, 1).Draw(t, "unverified")
	}
	return l, d
}

func encoded(t interface{ Fatalf(string, ...any) }, d Dialect, l Line) []byte {
	line, err := d.Append(nil, l)
	if err != nil {
		t.Fatalf("%v", err)
	}
	return line
}

func TestWhatIsEncodedComesBack(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		l, d := plainLine(t)
		line := encoded(t, d, l)
		checkPortions(t, line, []int{1}) // the short way and the long way agree
		n := 0
		hear := func(f *Frame) {
			n++
			unscaled, decimals := f.Scaled()
			switch {
			case f.Kind != Weight, f.Value() != l.Value, f.ID != l.ID, f.Unit != l.Unit, f.Stable != (l.Unit != ""), !f.Plain:
				t.Fatalf("%q comes back as %s, value %s", line, meaning(f), f.Value())
			case f.UnverifiedDigits != l.Unverified, unscaled != l.Value.Unscaled(), decimals != l.Value.Decimals(), !bytes.Equal(f.Raw, line):
				t.Fatalf("%q comes back as %s from %q", line, meaning(f), f.Raw)
			}
		}
		dec := NewDecoder(Options{})
		dec.Feed(line, hear)
		dec.End(hear)
		if n != 1 {
			t.Fatalf("%q comes back as %d frames", line, n)
		}
	})
}

// weightsOf gives the weights that may serve as a weighing, in words.
func weightsOf(in []byte) (got []string) {
	d := NewDecoder(Options{})
	hear := func(f *Frame) {
		if f.Kind == Weight && f.Plain && f.Stable {
			got = append(got, f.MassG().String())
		}
	}
	d.Feed(in, hear)
	d.End(hear)
	return got
}

// A line that is cut off anywhere is no weight, and one that a stray terminator cuts
// is none that differs from what the balance showed.
func TestNoPrefixOfALineIsAWeight(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		l, d := plainLine(t)
		d.End = "\r\n"
		line := encoded(t, d, l)
		whole := weightsOf(line)
		for cut := range len(line) - 1 {
			for _, got := range decode(line[:cut]) {
				if got != "damaged unterminated" {
					t.Fatalf("%q is taken for %s", line[:cut], got)
				}
			}
			stray := weightsOf(append(line[:cut:cut], '\n'))
			if len(stray) > 0 && (len(whole) == 0 || stray[0] != whole[0]) {
				t.Fatalf("%q, cut by a stray LF, is taken for %s g", line[:cut], stray)
			}
		}
	})
}

// A filled line in which one character was lost or added, or came as another that
// moves nothing but is no digit, is never another weight.
func TestALostOrAddedCharacterIsNeverAnotherWeight(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		l, d := plainLine(t)
		d.Unfilled, d.End, d.Parity = false, "\r\n", NoParity
		line := encoded(t, d, l)
		whole := strings.Join(weightsOf(line), " ")
		at := rapid.IntRange(0, len(line)-3).Draw(t, "at")
		lost := append(bytes.Clone(line[:at]), line[at+1:]...)
		added := append(append(bytes.Clone(line[:at]), rapid.SampledFrom([]byte(" 0519.,+-gkm[]\x00\r\n")).Draw(t, "added")), line[at:]...)
		for _, in := range [][]byte{lost, added} {
			for _, got := range weightsOf(in) {
				if got != whole {
					t.Fatalf("%q, from %q, is taken for %s g", in, line, got)
				}
			}
		}
	})
}

// Every byte is in the Raw of one frame, in order, whatever comes.
func checkEveryByte(t interface{ Fatalf(string, ...any) }, in []byte) {
	var raw []byte
	d := NewDecoder(Options{})
	hear := func(f *Frame) {
		raw = append(raw, f.Raw...)
		if f.Dropped > 0 {
			raw = append(raw, in[len(raw):len(raw)+f.Dropped]...)
		}
	}
	d.Feed(in, hear)
	d.End(hear)
	if !bytes.HasPrefix(in, raw) {
		t.Fatalf("%q: the frames hold %q", in, raw)
	}
	for _, rest := range in[len(raw):] {
		if c := rest & 0x7F; c != xon && c != xoff && c != '\r' {
			t.Fatalf("%q: %q is in no frame", in, in[len(raw):])
		}
	}
}

// checkPortions compares feeding at once with feeding in the given portions.
func checkPortions(t interface{ Fatalf(string, ...any) }, in []byte, portions []int) {
	whole, parts := framesIn(in, []int{len(in) + 1}), framesIn(in, portions)
	if whole != parts {
		t.Fatalf("%q in portions of %v:\n%s\nat once:\n%s", in, portions, parts, whole)
	}
}

func framesIn(in []byte, portions []int) string {
	var out []byte
	d := NewDecoder(Options{})
	hear := func(f *Frame) { out = append(f.AppendJSON(out), '\n') }
	for i := 0; len(in) > 0; i++ {
		n := min(max(portions[i%len(portions)], 1), len(in))
		d.Feed(in[:n], hear)
		in = in[n:]
	}
	d.End(hear)
	return fmt.Sprintf("%s%+v", out, d.Traffic())
}

func TestAnyPortionsGiveTheSameFrames(t *testing.T) {
	var all []byte
	for _, r := range readTable(t, tables+"rule_lines.tsv", true) {
		all = append(all, r.bytes...)
	}
	checkEveryByte(t, all)
	for portion := 1; portion < 50; portion++ {
		checkPortions(t, all, []int{portion})
	}
	rapid.Check(t, func(t *rapid.T) {
		checkPortions(t, all, rapid.SliceOfN(rapid.IntRange(1, 40), 1, 20).Draw(t, "portions"))
	})
}

// Bits that flip on a line whose parity came along are noticed.
func TestAFlippedBitShowsInTheParity(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		d := Dialect{Long: true, Parity: rapid.SampledFrom([]Parity{OddParity, EvenParity}).Draw(t, "parity")}
		line := encoded(t, d, Line{ID: "N", Value: decimal.MustParse("45.1234"), Unit: "g"})
		stream := bytes.Repeat(line, agreeingLines)
		bad := bytes.Clone(line)
		bad[rapid.IntRange(0, len(line)-3).Draw(t, "at")] ^= 1 << rapid.IntRange(0, 7).Draw(t, "bit")
		got := weightsOf(append(append(stream, bad...), line...))
		if strings.Join(got, " ") != strings.TrimSpace(strings.Repeat("45.1234 ", agreeingLines+1)) {
			t.Fatalf("%q is taken: %v", bad, got)
		}
	})
}
