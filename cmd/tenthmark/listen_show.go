package main

import (
	"bufio"
	"fmt"
	"io"
	"strconv"
	"strings"
	"time"

	"tenthmark/protocol"
)

// listener decodes and shows.
type listener struct {
	decoder *protocol.Decoder
	json    bool
	out     *bufio.Writer
	buf     []byte

	began, now time.Time // of a live line, else zero
	counts     [protocol.Text + 1]int
	misaligned int
	bytes      int
	told       string // the last diagnosis
	warned     bool   // that nothing comes
}

func newListener(opt listenOptions, out *bufio.Writer) *listener {
	return &listener{
		decoder: protocol.NewDecoder(protocol.Options{Pattern: opt.pattern, MaxLine: opt.maxLine}),
		json:    opt.json, out: out,
	}
}

// live says that the line was just opened, perhaps in the middle of a line.
func (l *listener) live(now time.Time) {
	l.began, l.now = now, now
	l.decoder.Resync()
}

func (l *listener) at(now time.Time) { l.now = now }

func (l *listener) take(chunk []byte) {
	l.bytes += len(chunk)
	l.decoder.Feed(chunk, l.show)
	l.diagnose()
	l.out.Flush()
}

// longSilence ends a printed report, which comes in one go.
const longSilence = 5 * time.Second

func (l *listener) quiet(d time.Duration) {
	l.decoder.Gap(l.show)
	if d >= longSilence {
		l.decoder.EndReport()
	}
	if l.bytes == 0 && d >= 2*longSilence && !l.warned {
		l.warned = true
		l.note("nothing came yet: press PRINT on the balance; then check its data output, the cable, and the line settings with --suggest")
	}
	l.out.Flush()
}

// lost says that the line went away in the middle of whatever it was.
func (l *listener) lost() {
	l.decoder.End(l.show)
	l.decoder.Resync()
}

func (l *listener) finish() {
	l.decoder.End(l.show)
	l.diagnose()
}

// diagnose tells a wrong setting once, and again only when it changes.
func (l *listener) diagnose() {
	if d := l.decoder.Diagnosis(); d != l.told && kindOfDiagnosis(d) != kindOfDiagnosis(l.told) {
		l.told = d
		if d != "" {
			l.note(d)
		}
	}
}

// kindOfDiagnosis drops the counts, which change with each byte.
func kindOfDiagnosis(d string) string {
	return strings.Map(func(r rune) rune {
		if r >= '0' && r <= '9' {
			return -1
		}
		return r
	}, d)
}

// note is a remark between the lines; JSON output has none, it ends up in the summary.
func (l *listener) note(text string) {
	if !l.json {
		fmt.Fprintf(l.out, "# %s\n", text)
	}
}

func (l *listener) show(f *protocol.Frame) {
	l.counts[f.Kind]++
	if f.Damage == protocol.Misaligned {
		l.misaligned++
	}
	if l.json {
		l.buf = append(f.AppendJSON(l.buf[:0]), '\n')
		l.out.Write(l.buf)
		return
	}
	if !l.began.IsZero() {
		fmt.Fprintf(l.out, "%8.1f s  ", l.now.Sub(l.began).Seconds())
	}
	fmt.Fprintf(l.out, "%-8s %-46s %s\n", f.Kind, understood(f), visible(f.Raw))
}

// understood says in words what a line was taken for.
func understood(f *protocol.Frame) string {
	var text string
	switch f.Kind {
	case protocol.Weight:
		text = fmt.Sprintf("%-6s %11s %-3s  %s", f.ID, signed(f), f.Unit, weightRole(f))
	case protocol.Status:
		text = f.Condition.String()
	case protocol.Error:
		text = "code " + f.Code
	case protocol.Damaged:
		text = damageWords[f.Damage]
	case protocol.Text:
		text = textRole(f)
	}
	if f.InReport && f.Kind != protocol.Text {
		text += " (in a report)"
	}
	return text
}

func textRole(f *protocol.Frame) string {
	if f.InReport {
		return "in a report"
	}
	return "not a form that is known"
}

func signed(f *protocol.Frame) string {
	if f.Sign == 0 {
		return f.Text()
	}
	return string(rune(f.Sign)) + f.Text()
}

func weightRole(f *protocol.Frame) string {
	words := []string{"not stable"}
	if f.Stable {
		words[0] = "stable"
	}
	if !f.Plain {
		words = append(words, "no weighing")
	}
	if f.UnverifiedDigits > 0 {
		words = append(words, strconv.Itoa(f.UnverifiedDigits)+" in brackets")
	}
	return strings.Join(words, ", ")
}

var damageWords = map[protocol.Damage]string{
	protocol.NulByte:      "a byte was lost (NUL)",
	protocol.TooLong:      "longer than any line",
	protocol.Unterminated: "cut off",
	protocol.Unreadable:   "control characters",
	protocol.WrongParity:  "a byte has the wrong parity",
	protocol.Misaligned:   "the columns do not fit",
}

// visible shows raw bytes: a blank as a raised dot, the ends as CR and LF signs, what
// is beyond ASCII as \xNN.
func visible(raw []byte) string {
	var b strings.Builder
	for _, c := range raw {
		switch {
		case c == ' ':
			b.WriteRune('·')
		case c == '\r':
			b.WriteRune('␍')
		case c == '\n':
			b.WriteRune('␊')
		case c == '\\':
			b.WriteString(`\\`)
		case c < 0x20 || c >= 0x7F:
			fmt.Fprintf(&b, `\x%02X`, c)
		default:
			b.WriteByte(c)
		}
	}
	return b.String()
}

// summary tells at the end how much was understood, and what to try.
func (l *listener) summary(w io.Writer) {
	d := l.decoder.Diagnosis()
	if !l.json {
		var parts []string
		for kind, n := range l.counts {
			if n > 0 {
				parts = append(parts, fmt.Sprintf("%d %s", n, protocol.Kind(kind)))
			}
		}
		if len(parts) == 0 {
			parts = []string{"no line"}
		}
		fmt.Fprintf(w, "%s; %d bytes\n", strings.Join(parts, ", "), l.bytes)
	}
	if d != "" {
		fmt.Fprintf(w, "%s\n    Try --suggest.\n", d)
	}
	if l.misaligned > 2 && l.counts[protocol.Weight] == 0 || l.counts[protocol.Text] > 4 && l.counts[protocol.Weight] == 0 {
		fmt.Fprintln(w, "No line was understood as a weight. If all lines look like these, the balance prints another form: describe it with --pattern.")
	}
}
