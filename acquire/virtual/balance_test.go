package virtual

import (
	"bytes"
	"fmt"
	"math"
	"regexp"
	"strings"
	"testing"
	"time"

	"tenthmark/protocol"
)

// run steps a balance for so long and gives what it sent.
func run(b *Balance, d time.Duration) string {
	var out bytes.Buffer
	for ; d > 0; d -= b.opt.update() {
		out.Write(b.Step(b.opt.update()))
	}
	return out.String()
}

func newBalance(t *testing.T, opt Options) *Balance {
	t.Helper()
	b, err := New(opt)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

func lastLine(s string) string {
	lines := strings.SplitAfter(s, "\r\n")
	return lines[max(0, len(lines)-2)]
}

// The columns are those of the operating manuals: code, sign, nine columns of number, a
// separator, three columns of unit.
func TestLinesOfAllForms(t *testing.T) {
	none := -1.0
	tests := []struct {
		name string
		opt  Options
		load float64
		want string
	}{
		{"22", Options{}, 123.56, "N     + 123.5600 g  \r\n"},
		{"16", Options{Form: 16}, 123.56, "+ 123.5600 g  \r\n"},
		{"five decimals", Options{Form: 16, ReadabilityG: 0.00001}, 150.11775, "+150.11775 g  \r\n"},
		{"one decimal", Options{ReadabilityG: 0.1, CapacityG: 6000, ID: "G#"}, 1255.7, "G#    +   1255.7 g  \r\n"},
		{"brackets", Options{Form: 16, ReadabilityG: 0.01, Dialect: Dialect{Unverified: 1}}, 123.56, "+  123.5[6]g  \r\n"},
		{"hidden plus", Options{Form: 16, ReadabilityG: 0.001, Dialect: Dialect{HidePlus: true}}, 111.255, "   111.255 g  \r\n"},
		{"comma", Options{Form: 16, Dialect: Dialect{Comma: true}}, 1.5, "+   1,5000 g  \r\n"},
		{"unit never sent", Options{Form: 16, ReadabilityG: 0.00001, Dialect: Dialect{NeverUnit: true}}, 150.11775, "+150.11775    \r\n"},
		{"overload", Options{}, 250, "Stat        H       \r\n"},
		{"overload in a word", Options{Dialect: Dialect{Words: true}}, 250, "Stat        High    \r\n"},
		{"underload", Options{Form: 16}, -50, "      L       \r\n"},
		{"below zero", Options{Form: 16}, -1.5, "-   1.5000 g  \r\n"},
	}
	for _, tt := range tests {
		tt.opt.RepeatabilityG = none
		b := newBalance(t, tt.opt)
		b.SetLoad(tt.load)
		if got := lastLine(run(b, 10*time.Second)); got != tt.want {
			t.Errorf("%s: %q, want %q", tt.name, got, tt.want)
		}
	}
}

// While the value moves the unit is dark, and every line has its full length.
func TestMovingValueHidesItsUnit(t *testing.T) {
	b := newBalance(t, Options{Seed: 1, Dialect: Dialect{BlankLastDigit: true}})
	run(b, 5*time.Second)
	b.SetLoad(45)
	sent := run(b, 10*time.Second)
	moving, still := 0, 0
	for line := range strings.SplitAfterSeq(strings.TrimSuffix(sent, "\r\n"), "\r\n") {
		switch {
		case len(strings.TrimSuffix(line, "\r\n")) != 20:
			t.Fatalf("line %q has not 20 columns", line)
		case strings.Contains(line, " g  "):
			still++
		case regexp.MustCompile(`^N     [+-] *\d+\.\d{3}     `).MatchString(line):
			moving++
			if still > 0 {
				t.Error("the unit went dark again although nothing moved")
			}
		}
	}
	if moving < 5 || still < 50 {
		t.Errorf("%d lines moving, %d still", moving, still)
	}
}

func TestSameSeedSameLines(t *testing.T) {
	play := func(seed uint64) string {
		b := newBalance(t, Options{Seed: seed, Flicker: true, DraughtG: 0.0001})
		out := run(b, 2*time.Second)
		b.SetLoad(45)
		out += run(b, 5*time.Second)
		b.Bump(1)
		b.Touch(20, time.Second)
		return out + run(b, 5*time.Second)
	}
	first := play(1)
	if again := play(1); again != first {
		t.Error("the same seed gave other lines")
	}
	if play(2) == first {
		t.Error("another seed gave the same lines")
	}
}

// What is shown at rest must not depend on when it is looked at: the demo's numbers
// rest on it.
func TestRestingDisplayIsHeld(t *testing.T) {
	var first string
	for _, wait := range []time.Duration{4 * time.Second, 7 * time.Second, 61 * time.Second} {
		b := newBalance(t, Options{Seed: 5})
		run(b, wait)
		var shown []string
		for _, load := range []float64{45.12345, 0, 55.00005, 0.00005} {
			b.SetLoad(load)
			run(b, wait)
			shown = append(shown, lastLine(run(b, 5*time.Second)))
		}
		if got := fmt.Sprint(shown); first == "" {
			first = got
		} else if got != first {
			t.Errorf("after %v: %s, want %s", wait, got, first)
		}
	}
}

func TestCommands(t *testing.T) {
	b := newBalance(t, Options{Output: OnRequest, Form: 16, RepeatabilityG: -1})
	b.SetLoad(45)
	run(b, 5*time.Second)
	tests := []struct{ send, want string }{
		{"\x1bP\r\n", "+  45.0000 g  \r\n"},
		{"\x1bP", "+  45.0000 g  \r\n"}, // CR LF are optional
		{"\x1bkP_", "+  45.0000 g  \r\n"},
		{"\x1bx1_\r\n", "VB-220\r\n"},
		{"\x1bx2_\r\n", "0021600412\r\n"},
		{"\x1bx3_\r\n", "00-42-01\r\n"},
		{"\x1bq\r\n", ""}, // unknown ones are swallowed
		{"\x1bx1\r\n", ""},
		{"P\r\n", ""},
		{"\x9b\xd0\x0d\x8a", "+  45.0000 g  \r\n"}, // with odd parity in bit 7
		{"\x1bT\r\n\x1bP", "+   0.0000 g  \r\n"},
		{"\x1bV\r\n\x1bP", "+   0.0000 g  \r\n"},
	}
	for _, tt := range tests {
		b.Command([]byte(tt.send))
		if got := run(b, time.Second); got != tt.want {
			t.Errorf("%q: %q, want %q", tt.send, got, tt.want)
		}
	}
}

// ESC P with print at stability: the answer comes when the load has come to rest.
func TestPrintWaitsForStability(t *testing.T) {
	b := newBalance(t, Options{Output: OnRequest})
	run(b, 5*time.Second)
	b.SetLoad(45)
	b.Touch(10, 3*time.Second)
	b.Command([]byte("\x1bP\r\n"))
	if got := run(b, 3*time.Second); got != "" {
		t.Errorf("while a hand is on the pan it answered %q", got)
	}
	if got := run(b, 10*time.Second); strings.Count(got, "\r\n") != 1 || !strings.Contains(got, " g  ") {
		t.Errorf("afterwards it answered %q, want one stable line", got)
	}
}

func TestOutputModes(t *testing.T) {
	for _, tt := range []struct {
		output   Output
		low, top int // lines in 20 s with one change of load
	}{{Auto, 200, 200}, {AutoStable, 100, 195}, {OnChange, 1, 1}, {OnInterval, 10, 10}, {OnRequest, 0, 0}} {
		b := newBalance(t, Options{Output: tt.output, IntervalS: 2})
		run(b, 5*time.Second)
		b.SetLoad(45)
		if n := strings.Count(run(b, 20*time.Second), "\r\n"); n < tt.low || n > tt.top {
			t.Errorf("%s: %d lines, want %d to %d", tt.output, n, tt.low, tt.top)
		}
	}
}

func TestPrintTogglesAutoPrint(t *testing.T) {
	b := newBalance(t, Options{Dialect: Dialect{AutoToggles: true}})
	run(b, time.Second)
	b.PressPrint()
	if got := run(b, time.Second); got != "" {
		t.Errorf("after PRINT it still printed %q", got)
	}
	b.PressPrint()
	if got := run(b, time.Second); got == "" {
		t.Error("after the second PRINT it did not print again")
	}
}

func TestEvaporationIsSeen(t *testing.T) {
	b := newBalance(t, Options{RepeatabilityG: -1})
	b.SetLoad(45)
	b.Evaporate(0.00002)
	first := b.Truth()
	run(b, 100*time.Second)
	if lost := first - b.Truth(); math.Abs(lost-0.002) > 1e-9 {
		t.Errorf("lost %g g in 100 s, want 0.002", lost)
	}
	if got := lastLine(run(b, time.Second)); !strings.Contains(got, "44.9980") && !strings.Contains(got, "44.9979") && !strings.Contains(got, "44.9981") {
		t.Errorf("shown %q, want 44.9980 within a digit", got)
	}
}

// Where loads come to rest scatters as the data sheet says: 400 placements, whose
// standard deviation is within an eighth of the true one in 999 cases of 1000.
func TestRepeatability(t *testing.T) {
	b := newBalance(t, Options{Seed: 9, RepeatabilityG: 0.001})
	var sum, squares float64
	const n = 400
	for range n {
		b.SetLoad(50)
		d := b.Truth() - 50
		sum, squares = sum+d, squares+d*d
	}
	if s := math.Sqrt((squares - sum*sum/n) / (n - 1)); math.Abs(s-0.001) > 0.000125 {
		t.Errorf("standard deviation %g g, want 0.001", s)
	}
}

// Everything that the balance prints is understood by the decoder as what it is.
func TestDecoderUnderstandsTheBalance(t *testing.T) {
	for _, form := range []int{16, 22} {
		b := newBalance(t, Options{Form: form, Seed: 2})
		d := protocol.NewDecoder(protocol.Options{})
		kinds := map[protocol.Kind]int{}
		plainInReport := 0
		see := func(s string) {
			d.Feed([]byte(s), func(f *protocol.Frame) {
				kinds[f.Kind]++
				if f.InReport && f.Plain {
					plainInReport++
				}
			})
		}
		b.SetLoad(45)
		see(run(b, 5*time.Second))
		b.PressTare()
		b.Command([]byte("\x1bZ\r\n"))
		see(run(b, 5*time.Second))
		b.SetLoad(500)
		see(run(b, 5*time.Second))
		if kinds[protocol.Damaged] > 0 || kinds[protocol.Weight] < 100 || kinds[protocol.Status] < 20 || kinds[protocol.Blank] == 0 || kinds[protocol.Text] < 5 || plainInReport > 0 {
			t.Errorf("form %d: %v, %d plain weights in a report", form, kinds, plainInReport)
		}
	}
}

func TestOptionsAreChecked(t *testing.T) {
	for name, opt := range map[string]Options{
		"form":        {Form: 14},
		"readability": {ReadabilityG: 0.0002},
		"capacity":    {CapacityG: 1e6, ReadabilityG: 1e-5},
		"rate":        {RateHz: 1e6},
		"output":      {Output: "sometimes"},
		"code":        {ID: "toolong"},
		"brackets":    {Dialect: Dialect{Unverified: 3}},
	} {
		if _, err := New(opt); err == nil {
			t.Errorf("%s: no error", name)
		}
	}
}

func BenchmarkStep(b *testing.B) {
	bal, err := New(Options{})
	if err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		bal.Step(bal.opt.update())
	}
}
