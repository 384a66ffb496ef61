package protocol

import (
	"errors"
	"strings"
	"testing"
)

func TestPatternsAreCheckedWhenTheyAreLoaded(t *testing.T) {
	for _, tt := range []struct{ name, pattern, says string }{
		{"not an expression", `(?P<value>[0-9`, "missing closing ]"},
		{"no value", `(?P<sign>[-+])`, "there is no group (?P<value>…)"},
		{"unknown group", `(?P<value>[0-9]+)(?P<units>g)`, `"units" is none of`},
		{"group twice", `(?P<value>[0-9])(?P<value>[0-9])`, "there twice"},
		{"matches nothing at all", `(?P<value>[0-9]*)`, "empty line"},
		{"both marks in stable", `(?P<stable>[SD])\s+(?P<value>[0-9.]+)`, "only the mark for"},
		{"both words in stable", `(?P<stable>ST|US),(?P<value>[0-9.]+)`, "only the mark for"},
		{"anything in stable", `(?P<stable>.)(?P<value>[0-9.]+)`, "only the mark for"},
	} {
		if p, err := NewPattern(tt.pattern); !errors.Is(err, ErrPattern) || !strings.Contains(err.Error(), tt.says) || p != nil {
			t.Errorf("%s: %v, want %q", tt.name, err, tt.says)
		}
	}
}

func TestPatterns(t *testing.T) {
	const (
		states = `^(?:(?P<stable>ST)|US),(?:GS|NT),(?P<sign>[-+])\s*(?P<value>[0-9]+[.][0-9]+)\s*(?P<unit>k?g)$`
		marked = `(?:(?P<stable> )|[?^v]) (?P<sign>[-+ ]) *(?P<value>[0-9.]+) +(?P<unit>[a-z]+) *$`
		bare   = `(?P<value>[0-9]+[.][0-9]+)`
		unit   = `(?P<value>-?[0-9]+[.,][0-9]+) *(?P<unit>g)?`
		framed = `^\x02(?P<value>[+-]?[0-9]+[.][0-9]+)\t(?P<unit>g)\x03$`
	)
	for _, tt := range []struct{ name, pattern, in, want string }{
		{"stable", states, "ST,GS,+  12.345kg", "weight - +12.345 kg stable plain"},
		{"moving", states, "US,NT,-   0.012 g", "weight - -0.012 g plain"},
		{"another form", states, "OL,GS,+999999999", "text"},
		{"a blank is the mark", marked, "  +  123.4567 g  ", "weight - +123.4567 g stable plain"},
		{"moving by mark", marked, "? +  123.4567 g  ", "weight - +123.4567 g plain"},
		{"hidden plus", marked, "     123.4567 g  ", "weight - 123.4567 g stable plain"},
		{"number alone", bare, "Weight: 12.345", "weight - 12.345 - stable plain"},
		{"a minus left out", bare, "Weight: - 12.345", "text"},
		{"a number cut in two", bare, "1.2345.678", "text"},
		{"a date", bare, "14.01.2011", "text"},
		{"sign inside the value", unit, "-12,345 g", "weight - -12.345 g stable plain"},
		{"no unit", unit, "12.345", "weight - 12.345 - plain"},
		{"control characters asked for", framed, "\x02+12.345\tg\x03", "weight - +12.345 g stable plain"},
		{"control characters not asked for", bare, "12.3\x0745", "damaged unreadable"},
		{"status", bare, "      High    ", "status overload"},
		{"error", bare, "   Err 053    ", "error 053"},
		{"blank", bare, "    ", "blank"},
	} {
		p, err := NewPattern(tt.pattern)
		if err != nil {
			t.Errorf("%s: %v", tt.name, err)
			continue
		}
		NewDecoder(Options{Pattern: p}).Feed([]byte(tt.in+"\r\n"), func(f *Frame) {
			if got := meaning(f); got != tt.want {
				t.Errorf("%s: got %s, want %s", tt.name, got, tt.want)
			}
		})
	}
}
