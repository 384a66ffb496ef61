package acquire

import (
	"strings"
	"testing"
	"time"

	"tenthmark/acquire/settle"
	"tenthmark/calc/decimal"
	"tenthmark/session"
)

func number(s string) decimal.Number { return decimal.MustParse(s) }

func TestLogAtAnInterval(t *testing.T) {
	l, err := NewLogger(LogConfig{Station: "bench-1", Label: "overnight", EveryS: number("60")})
	if err != nil {
		t.Fatal(err)
	}
	start := time.Date(2026, 12, 1, 22, 0, 30, 0, time.UTC)
	var got []string
	see := func(afterS float64, station, mass string) {
		live := Live{At: start.Add(time.Duration(afterS * float64(time.Second)))}
		if mass != "" {
			live.MassG = number(mass)
		}
		if e, ok := l.Live(station, live); ok {
			got = append(got, strings.Join(e.Record(), ","))
		}
	}
	see(0, "bench-1", "45.1000")  // the first line at all
	see(29, "bench-1", "45.1001") // not yet the full minute
	see(30, "bench-2", "0.0000")  // another station
	see(30.2, "bench-1", "")      // an overload shows no number
	see(30.4, "bench-1", "45.1002")
	see(30.5, "bench-1", "45.1003")
	see(280, "bench-1", "45.1010") // the line was away for over three minutes
	want := []string{
		"2026-12-01T22:00:30.000Z,bench-1,overnight,45.1000,false,0,,",
		"2026-12-01T22:01:00.400Z,bench-1,overnight,45.1002,false,0,,",
		"2026-12-01T22:05:10.000Z,bench-1,overnight,45.1010,false,3,,",
	}
	if strings.Join(got, "\n") != strings.Join(want, "\n") {
		t.Errorf("got\n%s\nwant\n%s", strings.Join(got, "\n"), strings.Join(want, "\n"))
	}
	if len(LogHeader()) != strings.Count(want[0], ",")+1 {
		t.Error("the header has another number of columns")
	}
}

func TestLogOfACheckWeight(t *testing.T) {
	l, err := NewLogger(LogConfig{Station: "bench-1", Label: "check weight 100 g", NominalG: number("100.0000"), ToleranceG: number("0.0005")})
	if err != nil {
		t.Fatal(err)
	}
	tests := []struct {
		mass, deviation string
		verdict         Verdict
		recorded        bool
	}{
		{"100.0003", "0.0003", Passed, true},
		{"100.0005", "0.0005", Passed, true},
		{"99.9994", "-0.0006", Failed, true},
		{"98.2000", "-1.8000", Failed, true}, // a wrong or chipped weight is a failed check
		{"0.0001", "", "", false},            // the empty pan
		{"45.1234", "", "", false},           // a vessel
	}
	for _, tt := range tests {
		e, ok := l.Settled(Settled{Station: "bench-1", Settled: settle.Settled{MassG: number(tt.mass)}})
		if ok != tt.recorded || e.Verdict != tt.verdict || e.DeviationG.String() != tt.deviation {
			t.Errorf("%s g: %v %q %q; want %v %q %q", tt.mass, ok, e.Verdict, e.DeviationG, tt.recorded, tt.verdict, tt.deviation)
		}
	}
	if _, ok := l.Settled(Settled{Station: "bench-2", Settled: settle.Settled{MassG: number("100.0000")}}); ok {
		t.Error("another station's weight was recorded")
	}
}

func TestLogOnEverySettling(t *testing.T) {
	l, err := NewLogger(LogConfig{Station: "bench-1", Label: "all", EveryS: number("0")})
	if err != nil {
		t.Fatal(err)
	}
	if e, ok := l.Settled(Settled{Station: "bench-1", Settled: settle.Settled{MassG: number("0.0001")}}); !ok || e.Verdict != "" {
		t.Errorf("got %+v, %v", e, ok)
	}
	if _, ok := l.Live("bench-1", Live{MassG: number("1"), At: time.Unix(1e9, 0)}); ok {
		t.Error("a line was recorded although only settled weights are")
	}
}

func TestLogConfigNamesWhatIsWrong(t *testing.T) {
	tests := []struct {
		name string
		cfg  LogConfig
		code string
	}{
		{"no station", LogConfig{Label: "x"}, "log-station"},
		{"no label", LogConfig{Station: "s"}, "log-label"},
		{"too often", LogConfig{Station: "s", Label: "x", EveryS: number("0.2")}, "log-every_s"},
		{"negative", LogConfig{Station: "s", Label: "x", EveryS: number("-1")}, "log-every_s"},
		{"no tolerance", LogConfig{Station: "s", Label: "x", NominalG: number("100")}, "log-nominal_g"},
		{"zero tolerance", LogConfig{Station: "s", Label: "x", NominalG: number("100"), ToleranceG: number("0")}, "log-nominal_g"},
		{"check at an interval", LogConfig{Station: "s", Label: "x", NominalG: number("100"), ToleranceG: number("1"), EveryS: number("60")}, "log-every_s"},
	}
	for _, tt := range tests {
		if got := session.FaultCode(tt.cfg.Check()); got != tt.code {
			t.Errorf("%s: code %q, want %q", tt.name, got, tt.code)
		}
	}
}
