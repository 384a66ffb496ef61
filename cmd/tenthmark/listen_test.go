package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"tenthmark/acquire/line"
	"tenthmark/acquire/virtual"
	"tenthmark/calc/decimal"
	"tenthmark/protocol"
)

// listenTo calls listen as the program does.
func listenTo(in string, args ...string) (code int, out, errs string) {
	var o, e bytes.Buffer
	code = runListen(context.Background(), args, stdio{strings.NewReader(in), &o, &e})
	return code, o.String(), e.String()
}

func TestListenPrintsOneObjectForEachLine(t *testing.T) {
	in := "N     +  123.5[6]g  \r\n" + "Stat        H       \r\n" + "   Err 053    \r\n" + "\r\n" + "OK!\r\n" + "\xab  12.3456 g  \r\n" + "+   12"
	want := `{"kind":"weight","id":"N","text":"123.56","value":"123.56","sign":"+","unit":"g","stable":true,"plain":true,"unverified_digits":1,"raw":"N     +  123.5[6]g  \r\n"}
{"kind":"status","status":"overload","raw":"Stat        H       \r\n"}
{"kind":"error","code":"053","raw":"   Err 053    \r\n"}
{"kind":"blank","raw":"\r\n"}
{"kind":"text","raw":"OK!\r\n"}
{"kind":"weight","id":"","text":"12.3456","value":"12.3456","sign":"+","unit":"g","stable":true,"plain":true,"unverified_digits":0,"raw":"\u00ab  12.3456 g  \r\n"}
{"kind":"damaged","damage":"unterminated","raw":"+   12"}
`
	for _, args := range [][]string{{"--json", "-"}, {"-", "--json"}} {
		code, out, errs := listenTo(in, args...)
		if code != exitDone || out != want || errs != "" {
			t.Errorf("%v: code %d\n got %s\nwant %s\n%s", args, code, out, want, errs)
		}
		for _, object := range strings.Split(strings.TrimSpace(out), "\n") {
			if !json.Valid([]byte(object)) {
				t.Errorf("no JSON: %s", object)
			}
		}
	}
}

func TestListenShowsLinesForPeople(t *testing.T) {
	code, out, errs := listenTo("N     +   123.56 g  \r\nNom.  + 200.0000 g  \r\n+  45.134 g  \r\n", "-")
	want := "weight   N          +123.56 g    stable                 N·····+···123.56·g··␍␊\n" +
		"weight   Nom.     +200.0000 g    stable, no weighing    Nom.··+·200.0000·g··␍␊\n" +
		"damaged  the columns do not fit                         +··45.134·g··␍␊\n"
	if code != exitDone || out != want || errs != "1 damaged, 2 weight; 59 bytes\n" {
		t.Errorf("code %d\n got\n%s\nwant\n%s\n%q", code, out, want, errs)
	}
}

func TestListenNamesAWrongSetting(t *testing.T) {
	bytesOf := []byte(strings.Repeat("+  12.3456 g  \r\n", 4))
	protocol.OddParity.Set(bytesOf)
	if _, out, errs := listenTo(string(bytesOf), "-"); !strings.Contains(out, "# looks like 7 data bits, odd parity\n") || !strings.Contains(errs, "--suggest") {
		t.Errorf("out %s\nerr %s", out, errs)
	}
	if _, _, errs := listenTo(strings.Repeat("? +  123.4567 g  \r\n", 5), "-"); !strings.Contains(errs, "--pattern") {
		t.Errorf("another form: %s", errs)
	}
}

func TestListenWithAPattern(t *testing.T) {
	code, out, _ := listenTo("ST,GS,+  12.345kg\r\n", "--json", "--pattern", `^(?:(?P<stable>ST)|US),GS,(?P<sign>[-+])\s*(?P<value>[0-9.]+)(?P<unit>k?g)$`, "-")
	if code != exitDone || !strings.Contains(out, `"value":"12.345","sign":"+","unit":"kg","stable":true,"plain":true`) {
		t.Errorf("code %d: %s", code, out)
	}
}

func TestListenRefusesWrongCalls(t *testing.T) {
	for _, tt := range []struct {
		args []string
		code int
		says string
	}{
		{nil, exitUsage, "name a port"},
		{[]string{"-", "more"}, exitUsage, `not "more" too`},
		{[]string{"--parity", "strange", "/dev/ttyUSB0"}, exitUsage, "parity"},
		{[]string{"--data-bits", "9", "/dev/ttyUSB0"}, exitUsage, "data_bits"},
		{[]string{"--pattern", "(x", "-"}, exitUsage, "missing closing )"},
		{[]string{"--pattern", "x", "-"}, exitUsage, "(?P<value>"},
		{[]string{"--max-line", "3", "-"}, exitUsage, "max-line"},
		{[]string{"--suggest", "-"}, exitUsage, "standard input have none"},
		{[]string{"--suggest", "tcp:127.0.0.1:4001"}, exitUsage, "serial device server"},
		{[]string{"tcp:nowhere"}, exitUsage, "host:port"},
		{[]string{"--strange", "-"}, exitUsage, "strange"},
		{[]string{filepath.Join(t.TempDir(), "no-port")}, exitFailed, "is not there"},
		{[]string{"-h"}, exitDone, "PORT|FILE|-"},
	} {
		if code, out, errs := listenTo("", tt.args...); code != tt.code || !strings.Contains(errs, tt.says) || out != "" {
			t.Errorf("%q: code %d, %s; want %d and %q", tt.args, code, errs, tt.code, tt.says)
		}
	}
}

func TestListenReadsFilesAndRecordings(t *testing.T) {
	folder := t.TempDir()
	for _, tt := range []struct{ name, text, want string }{
		{"bytes", "+   123.56 g  \r\n+   12", "123.56 damaged"},
		{
			"recording", "# tenthmark line 1\n# 2026-12-01T16:28:06.123Z /dev/ttyUSB0 9600 8-N-1\n0.000 open /dev/ttyUSB0\n1.203 < \"+   123.56 g  \\r\\n+  1\"\n" +
				"1.500 > \"\\x1bP\\r\\n\"\n9.100 gone\n10.0 open /dev/ttyUSB0\n10.5 < \"3.45 g  \\r\\n\"\n11.0 < \"+   124.56 g  \\r\\n\"\n", "123.56 damaged 124.56",
		},
	} {
		file := filepath.Join(folder, tt.name)
		if err := os.WriteFile(file, []byte(tt.text), 0o600); err != nil {
			t.Fatal(err)
		}
		code, out, errs := listenTo("", "--json", file)
		if got := summed(t, out); code != exitDone || got != tt.want {
			t.Errorf("%s: code %d, %s, want %s\n%s", tt.name, code, got, tt.want, errs)
		}
	}
}

// summed gives the values of weights and the kinds of all other lines.
func summed(t *testing.T, out string) string {
	t.Helper()
	var words []string
	for d := json.NewDecoder(strings.NewReader(out)); d.More(); {
		var f struct{ Kind, Value string }
		if err := d.Decode(&f); err != nil {
			t.Fatal(err)
		}
		if f.Kind == "weight" {
			f.Kind = f.Value
		}
		words = append(words, f.Kind)
	}
	return strings.Join(words, " ")
}

// syncBuffer ends a test's wait as soon as a text was written.
type syncBuffer struct {
	bytes.Buffer
	until string
	seen  func()
}

func (b *syncBuffer) Write(p []byte) (int, error) {
	n, err := b.Buffer.Write(p)
	if strings.Contains(b.String(), b.until) {
		b.seen()
	}
	return n, err
}

func TestListenToALivePort(t *testing.T) {
	pty, err := virtual.OpenPTY()
	if err != nil {
		t.Skipf("no pseudo-terminal: %v", err)
	}
	balance, err := virtual.New(virtual.Options{Seed: 1, Form: 22, Output: virtual.Auto})
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithTimeout(t.Context(), 20*time.Second)
	served := make(chan error, 1)
	go func() { served <- balance.Serve(ctx, pty) }()
	var errs bytes.Buffer
	heard, stop := context.WithCancel(ctx)
	out := &syncBuffer{until: `"stable":true`, seen: stop}
	if code := runListen(heard, []string{"--json", pty.Path}, stdio{nil, out, &errs}); code != exitDone || ctx.Err() != nil {
		t.Errorf("code %d, %s\n%s", code, errs.String(), out.String())
	}
	stop()
	cancel()
	<-served
}

// slowPort is a balance that prints with one setting; at another speed garbage comes.
type slowPort struct {
	spec   line.Spec
	text   []byte
	closed chan struct{}
}

const printedAt = 1200

func (p *slowPort) Read(b []byte) (int, error) {
	select {
	case <-p.closed:
		return 0, io.ErrClosedPipe
	case <-time.After(time.Millisecond):
	}
	n := copy(b, p.text)
	if p.spec.Baud != printedAt {
		for i := range b[:n] {
			b[i] = b[i]<<3 ^ 0xE6
		}
	}
	return n, nil
}

func (p *slowPort) Close() error {
	select {
	case <-p.closed:
	default:
		close(p.closed)
	}
	return nil
}

func suggestFor(t *testing.T, text []byte, args ...string) (code int, out, errs string) {
	t.Helper()
	var o, e bytes.Buffer
	opt, code, done := listenArguments(append(args, "--suggest", "--wait", "50ms", "/dev/ttyUSB0"), &e)
	if done {
		t.Fatalf("code %d: %s", code, e.String())
	}
	open := func(_ context.Context, spec line.Spec) (port, error) {
		return &slowPort{spec: spec, text: text, closed: make(chan struct{})}, nil
	}
	code = suggest(t.Context(), opt, open, stdio{nil, &o, &e})
	return code, o.String(), e.String()
}

func TestSuggestFindsSpeedAndParity(t *testing.T) {
	for _, parity := range []protocol.Parity{protocol.NoParity, protocol.OddParity, protocol.EvenParity, protocol.MarkParity} {
		text, err := protocol.Dialect{Long: true, Parity: parity}.Append(nil, protocol.Line{ID: "N", Value: decimal.MustParse("45.1234"), Unit: "g"})
		if err != nil {
			t.Fatal(err)
		}
		bits, name := 7, parity.String()
		if parity == protocol.NoParity {
			bits, name = 8, "none"
		}
		want := fmt.Sprintf("\nThis one decodes:\n\nbaud = %d\ndata_bits = %d\nparity = %q\nstop_bits = 1\n", printedAt, bits, name)
		if code, out, errs := suggestFor(t, text); code != exitDone || !strings.HasSuffix(out, want) {
			t.Errorf("%s parity: code %d\n%s%s", parity, code, out, errs)
		}
		if code, out, _ := suggestFor(t, text, "--json"); code != exitDone || !strings.Contains(out, fmt.Sprintf(`{"baud":%d,"data_bits":%d,"parity":%q,"stop_bits":1,`, printedAt, bits, name)) || strings.Count(out, `"decodes":true`) != 1 {
			t.Errorf("%s parity, JSON: code %d\n%s", parity, code, out)
		}
	}
}

func TestSuggestSaysWhenNothingDecodes(t *testing.T) {
	if code, out, errs := suggestFor(t, nil); code != exitFailed || !strings.Contains(errs, "No setting decodes.") {
		t.Errorf("code %d\n%s%s", code, out, errs)
	}
}
