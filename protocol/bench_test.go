package protocol

import (
	"bytes"
	"regexp"
	"testing"
	"time"
)

// The expression does the same for one line as the decoder does for a weight: code,
// sign, number, brackets, unit.
var lineExpression = regexp.MustCompile(`^([A-Za-z*][A-Za-z0-9.#*%/ -]{5}| {6})?([-+ ]) *([0-9]+[.,]?[0-9]*|[.,][0-9]+)(\[[0-9]+\])? *([A-Za-z%/!]{0,3}) *\r?\n$`)

var benchLines = []struct{ name, line string }{
	{"short", "+  45.1234 g  \r\n"},
	{"long", "N     +  45.1234 g  \r\n"},
	{"brackets", "N     + 45.123[4]g  \r\n"},
}

// BenchmarkDecode gives the time for one line, and how many times longer the regular
// expression takes in the same run.
func BenchmarkDecode(b *testing.B) {
	for _, bl := range benchLines {
		b.Run("line="+bl.name, func(b *testing.B) {
			line, n := []byte(bl.line), 0
			d := NewDecoder(Options{})
			emit := func(f *Frame) {
				if f.Plain {
					n++
				}
			}
			b.ReportAllocs()
			for b.Loop() {
				d.Feed(line, emit)
			}
			if n == 0 {
				b.Fatal("no weight")
			}
			decoder := float64(b.Elapsed()) / float64(n)
			b.ReportMetric(perMatch(line)/decoder, "×regexp")
		})
	}
}

func perMatch(line []byte) float64 {
	const rounds = 20_000
	best := time.Duration(1 << 62)
	for range 5 {
		start := time.Now()
		for range rounds {
			if m := lineExpression.FindSubmatchIndex(line); m == nil {
				panic("no match")
			}
		}
		best = min(best, time.Since(start))
	}
	return float64(best) / rounds
}

// BenchmarkStream is a stream in portions as a serial line hands it over.
func BenchmarkStream(b *testing.B) {
	stream := bytes.Repeat([]byte("N     +  45.1234 g  \r\n"), 1000)
	d := NewDecoder(Options{})
	b.SetBytes(int64(len(stream)))
	for b.Loop() {
		for in := stream; len(in) > 0; {
			n := min(33, len(in))
			d.Feed(in[:n], func(*Frame) {})
			in = in[n:]
		}
	}
}
