package protocol

import (
	"bytes"
	"regexp"
	"strings"
	"testing"
	"time"
)

// lineExpression does what the decoder does for one line: it tells weights, status
// lines, errors and blank displays apart and takes a weight to pieces.
var lineExpression = regexp.MustCompile(`^(?:` +
	`(?P<id>[A-Za-z*][A-Za-z0-9.#*%/ -]{5}| {6})?(?P<sign>[-+ ]) *(?P<number>[0-9]+[.,]?[0-9]*|[.,][0-9]+)(?:\[(?P<bracket>[0-9]+)\])? *(?P<unit>[A-Za-z%/!]{0,3})` +
	`|(?:Stat)? *(?P<status>(?i:HH?|High|LL?|Low|C|Cal\. ?Ext\.?|Cal\. ?Int\.?|--))` +
	`|(?:Stat)? *(?P<error>(?i:E(?:rr)? *[0-9#XYZ]{2,3}|(?:APP|DIS|PRT)\.ERR?))` +
	`|(?P<blank>(?:Stat)?)` +
	`) *$`)

var groups = func() map[string]int {
	m := map[string]int{}
	for i, name := range lineExpression.SubexpNames() {
		m[name] = 2 * i
	}
	return m
}()

// expressionDecoder is the same work with the regular expression: cut at the
// terminator, strip bit 7, match, and fill the frame.
type expressionDecoder struct {
	line   []byte
	digits []byte
	frame  Frame
}

func (d *expressionDecoder) feed(chunk []byte, emit func(*Frame)) {
	for {
		end := bytes.IndexByte(chunk, '\n')
		if end < 0 {
			return
		}
		d.line = d.line[:0]
		for _, b := range bytes.TrimSuffix(chunk[:end], []byte("\r")) {
			d.line = append(d.line, b&0x7F)
		}
		d.frame.begin(chunk[:end+1], d.line)
		d.understand(&d.frame)
		emit(&d.frame)
		chunk = chunk[end+1:]
	}
}

func (d *expressionDecoder) understand(f *Frame) {
	f.noNumber()
	m := lineExpression.FindSubmatchIndex(f.line)
	group := func(name string) []byte {
		if i := groups[name]; m[i] >= 0 {
			return f.line[m[i]:m[i+1]]
		}
		return nil
	}
	switch {
	case m == nil:
		f.Kind = Text
	case m[groups["number"]] >= 0:
		f.Kind, f.ID = Weight, intern(bytes.TrimSpace(group("id")))
		if sign := group("sign"); sign[0] != ' ' {
			f.Sign = sign[0]
		}
		d.digits = append(append(d.digits[:0], group("number")...), group("bracket")...)
		f.digits, f.UnverifiedDigits = d.digits, len(group("bracket"))
		for i, c := range f.digits {
			if c == ',' {
				f.digits[i] = '.'
			}
		}
		f.setUnit(group("unit"))
		f.Plain = isPlainID(f.ID) && isGrams(f.Unit)
	case m[groups["status"]] >= 0:
		f.parseCondition(group("status"))
	case m[groups["error"]] >= 0:
		f.parseError(group("error"))
	default:
		f.Kind = Blank
	}
}

// The comparison is fair: the expression understands every line of the manuals as the
// decoder does.
func TestTheExpressionDoesTheSame(t *testing.T) {
	for _, r := range readTable(t, tables+"manual_lines.tsv", true) {
		(&expressionDecoder{}).feed(r.bytes, func(f *Frame) {
			if got := meaning(f); got != r.cells[1] {
				t.Errorf("%v: the expression gives %s", r, got)
			}
		})
	}
}

// BenchmarkDecode gives the time for one line, and in the same run, batch by batch,
// how many times longer the same takes with the regular expression. The best batch of
// each counts, because others work on the machine too.
func BenchmarkDecode(b *testing.B) {
	for _, bl := range []struct{ name, line string }{
		{"short", "+  45.1234 g  \r\n"},
		{"long", "N     +  45.1234 g  \r\n"},
		{"moving", "N     +  45.1234    \r\n"},
		{"brackets", "N     + 45.123[4]g  \r\n"},
		{"overload", "Stat        High    \r\n"},
	} {
		b.Run("line="+bl.name, func(b *testing.B) {
			line := []byte(bl.line)
			d, e := NewDecoder(Options{}), &expressionDecoder{}
			n := 0
			emit := func(*Frame) { n++ }
			b.ReportAllocs()
			for b.Loop() {
				d.Feed(line, emit)
			}
			ours, theirs := time.Duration(1<<62), time.Duration(1<<62)
			for range 300 {
				ours = min(ours, batch(func() { d.Feed(line, emit) }))
				theirs = min(theirs, batch(func() { e.feed(line, emit) }))
			}
			b.ReportMetric(float64(ours)/batchSize, "best-ns/line")
			b.ReportMetric(float64(theirs)/float64(ours), "×regexp")
		})
	}
}

const batchSize = 200

func batch(f func()) time.Duration {
	start := time.Now()
	for range batchSize {
		f()
	}
	return time.Since(start)
}

// BenchmarkStream is a stream in portions as a serial line hands it over, clean and
// with parity in bit 7.
func BenchmarkStream(b *testing.B) {
	for _, parity := range []Parity{NoParity, OddParity} {
		b.Run("parity="+parity.String(), func(b *testing.B) {
			stream := []byte(strings.Repeat("N     +  45.1234 g  \r\n", 1000))
			parity.Set(stream)
			d := NewDecoder(Options{})
			b.SetBytes(int64(len(stream)))
			for b.Loop() {
				for in := stream; len(in) > 0; {
					n := min(33, len(in))
					d.Feed(in[:n], func(*Frame) {})
					in = in[n:]
				}
			}
		})
	}
}
