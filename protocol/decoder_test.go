package protocol

import (
	"bytes"
	"encoding/json"
	"strings"
	"testing"

	"tenthmark/calc/decimal"
)

func TestDecodingAllocatesNothing(t *testing.T) {
	for _, tt := range []struct{ name, line string }{
		{"short", "+  45.1234 g  \r\n"},
		{"long", "N     +  45.1234 g  \r\n"},
		{"gross", "G#    -   0.0012 g  \r\n"},
		{"brackets", "N     + 45.123[4]g  \r\n"},
		{"moving", "N     +  45.1234    \r\n"},
		{"unfilled", "N +45.1234 g\r\n"},
		{"counting", "Qnt   +      253 pcs\r\n"},
		{"overload", "Stat        High    \r\n"},
		{"blank", "Stat                \r\n"},
		{"odd parity", string(withParity(OddParity, "N     +  45.1234 g  \r\n"))},
	} {
		d, line, n := NewDecoder(Options{}), []byte(tt.line), 0
		emit := func(f *Frame) {
			if f.Kind != Damaged && f.Kind != Text {
				n++
			}
		}
		if got := testing.AllocsPerRun(1000, func() { d.Feed(line, emit) }); got != 0 || n == 0 {
			t.Errorf("%s: %v allocations for each line, %d frames", tt.name, got, n)
		}
	}
}

func withParity(p Parity, s string) []byte {
	b := []byte(s)
	p.Set(b)
	return b
}

// The byte rows are the parity rule worked out by hand for "+  12.3456 g" CR LF.
func TestParityIsStrippedAndNamed(t *testing.T) {
	for _, tt := range []struct {
		name, bytes, diagnosis string
		is                     Parity
	}{
		{"odd", "\xAB\x20\x20\x31\x32\xAE\xB3\x34\xB5\xB6\x20\x67\x20\x20\x0D\x8A", "looks like 7 data bits, odd parity", OddParity},
		{"even", "\x2B\xA0\xA0\xB1\xB2\x2E\x33\xB4\x35\x36\xA0\xE7\xA0\xA0\x8D\x0A", "looks like 7 data bits, even parity", EvenParity},
		{"mark", "\xAB\xA0\xA0\xB1\xB2\xAE\xB3\xB4\xB5\xB6\xA0\xE7\xA0\xA0\x8D\x8A", "looks like 7 data bits, mark parity", MarkParity},
		{"none", "+  12.3456 g  \r\n", "", NoParity},
	} {
		d, n := NewDecoder(Options{}), 0
		d.Feed(bytes.Repeat([]byte(tt.bytes), 4), func(f *Frame) {
			if f.Text() == "12.3456" && f.Stable && string(f.Raw) == tt.bytes {
				n++
			}
		})
		if n != 4 || d.Diagnosis() != tt.diagnosis || d.Parity() != tt.is {
			t.Errorf("%s: %d of 4 lines, diagnosis %q, parity %s", tt.name, n, d.Diagnosis(), d.Parity())
		}
		if got := withParity(tt.is, "+  12.3456 g  \r\n"); string(got) != tt.bytes {
			t.Errorf("%s: set gives %x", tt.name, got)
		}
	}
	if got := withParity(OddParity, "\x1bP\r\n"); !bytes.Equal(got, []byte{0x9B, 0xD0, 0x0D, 0x8A}) {
		t.Errorf("ESC P with odd parity: %x", got)
	}
}

func TestDiagnosisNamesAWrongSetting(t *testing.T) {
	for _, tt := range []struct{ name, bytes, want string }{
		{"wrong speed", strings.Repeat("\x06\x98\xe6\x00\x1e\xf8\x86\x60", 8), "unreadable bytes (40 of 64 are no text): wrong speed (baud)?"},
		{"parity checked by the line", strings.Repeat("+\x00 4\x00.1\x00\r\n", 8), "24 of 80 bytes came as NUL: the balance sends with another parity than the line expects, or the speed is wrong"},
		{"top bits without order", strings.Repeat("\xb1A\xe2\x63\xf7ab\x8a", 8), "unreadable bytes (32 of 64 have their top bit set and agree on no parity): wrong speed (baud)?"},
		{"too few", "\x00\x00\x00", ""},
		{"a good line", strings.Repeat("+  12.3456 g  \r\n", 8), ""},
		{"good again for long", strings.Repeat("\x00", 100) + strings.Repeat("+  12.3456 g  \r\n", 4000), ""},
	} {
		d := NewDecoder(Options{})
		d.Feed([]byte(tt.bytes), func(*Frame) {})
		if got := d.Diagnosis(); got != tt.want {
			t.Errorf("%s:\n got %q\nwant %q", tt.name, got, tt.want)
		}
	}
}

func TestUnitsShiftToGramsExactly(t *testing.T) {
	for in, want := range map[string]string{
		"+111.25507 mg \r\n": "0.11125507", "+  1.23456 kg \r\n": "1234.56", "+      1.5 kg \r\n": "1500", "-   0.0012 g  \r\n": "-0.0012",
		"+      100 ct \r\n": "", "+  45.1234    \r\n": "45.1234", "+       45 kg \r\n": "45000", "+99999999999999999 kg\r\n": "", "+0.1234567890123456 mg\r\n": "",
	} {
		n := 0
		NewDecoder(Options{}).Feed([]byte(in), func(f *Frame) {
			if n++; f.MassG().String() != want {
				t.Errorf("%q: %q g, want %q", in, f.MassG(), want)
			}
		})
		if n != 1 {
			t.Errorf("%q: %d frames", in, n)
		}
	}
}

func TestAnEndlessLineIsKeptInBoundsAndReportedOnce(t *testing.T) {
	d := NewDecoder(Options{})
	var got []string
	hear := func(f *Frame) {
		if f.Damage == TooLong && (len(f.Raw) != mostRaw || f.Dropped != 100_002-mostRaw) {
			t.Errorf("raw %d, dropped %d", len(f.Raw), f.Dropped)
		}
		got = append(got, meaning(f))
	}
	for range 100 {
		d.Feed(bytes.Repeat([]byte("5"), 1000), hear)
	}
	d.Feed([]byte("\r\n+   123.56 g  \r\n"), hear)
	if want := "damaged too long|weight - +123.56 g stable plain"; strings.Join(got, "|") != want {
		t.Errorf("got %q, want %q", got, want)
	}
}

func TestAFrameAsJSON(t *testing.T) {
	for _, tt := range []struct{ in, want string }{
		{"N     +  123.5[6]g  \r\n", `{"kind":"weight","id":"N","text":"123.56","value":"123.56","sign":"+","unit":"g","stable":true,"plain":true,"unverified_digits":1,"raw":"N     +  123.5[6]g  \r\n"}`},
		{"-   0,0012    \n", `{"kind":"weight","id":"","text":"0.0012","value":"-0.0012","sign":"-","unit":"","stable":false,"plain":true,"unverified_digits":0,"raw":"-   0,0012    \n"}`},
		{"   111.255 g  \r\n", `{"kind":"weight","id":"","text":"111.255","value":"111.255","sign":"","unit":"g","stable":true,"plain":true,"unverified_digits":0,"raw":"   111.255 g  \r\n"}`},
		{"Stat        H       \r\n", `{"kind":"status","status":"overload","raw":"Stat        H       \r\n"}`},
		{"   Err 053    \r\n", `{"kind":"error","code":"053","raw":"   Err 053    \r\n"}`},
		{"\r\n", `{"kind":"blank","raw":"\r\n"}`},
		{"\xff\"\\\t\x7f\r\n", `{"kind":"damaged","damage":"unreadable","raw":"\u00ff\"\\\u0009\u007f\r\n"}`},
		{"\xcf\xcb\r\n", `{"kind":"text","raw":"\u00cf\u00cb\r\n"}`},
	} {
		NewDecoder(Options{}).Feed([]byte(tt.in), func(f *Frame) {
			if got := f.AppendJSON(nil); string(got) != tt.want || !json.Valid(got) {
				t.Errorf("%q:\n got %s\nwant %s", tt.in, got, tt.want)
			}
		})
	}
}

func TestCommandsAreFramed(t *testing.T) {
	for c, want := range map[Command]string{Print: "\x1bP\r\n", Serial: "\x1bx2_\r\n", TareLoad: "\x1bf4_\r\n", PlaceStable: "\x1bL\r\n"} {
		if got := string(c.Bytes()); got != want {
			t.Errorf("%s: %q, want %q", c, got, want)
		}
	}
}

// The rows are the printed byte grids of the manuals.
func TestEncodedLinesFollowTheGrids(t *testing.T) {
	n := decimal.MustParse
	for _, tt := range []struct {
		d    Dialect
		l    Line
		want string
	}{
		{Dialect{}, Line{Value: n("1255.7"), Unit: "g"}, "+   1255.7 g  \r\n"},
		{Dialect{}, Line{Value: n("150.11775")}, "+150.11775    \r\n"},
		{Dialect{HidePlus: true}, Line{Value: n("111.255"), Unit: "g"}, "   111.255 g  \r\n"},
		{Dialect{Long: true}, Line{ID: "G#", Value: n("1255.7"), Unit: "g"}, "G#    +   1255.7 g  \r\n"},
		{Dialect{Long: true}, Line{ID: "N", Value: n("123.56"), Unit: "g", Unverified: 1}, "N     +  123.5[6]g  \r\n"},
		{Dialect{Comma: true}, Line{Value: n("-123.56"), Unit: "g"}, "-   123,56 g  \r\n"},
		{Dialect{}, Line{Value: n("123.56"), LastOff: true}, "+   123.5     \r\n"},
		{Dialect{Long: true, Unfilled: true}, Line{ID: "N", Value: n("123.56"), Unit: "g"}, "N +123.56 g\r\n"},
		{Dialect{}, Line{Status: "--"}, "      --      \r\n"},
		{Dialect{}, Line{Status: "High"}, "      High    \r\n"},
		{Dialect{}, Line{Status: "Cal.Ext."}, "     Cal.Ext. \r\n"},
		{Dialect{}, Line{Status: "Err  12"}, "   Err  12    \r\n"},
		{Dialect{}, Line{Status: "E 123"}, "     E 123    \r\n"},
		{Dialect{Long: true}, Line{Status: "H"}, "Stat        H       \r\n"},
		{Dialect{Long: true}, Line{Status: "ERR 123"}, "Stat     ERR 123    \r\n"},
		{Dialect{Long: true}, Line{Status: "APP.ERR"}, "Stat     APP.ERR    \r\n"},
		{Dialect{Long: true}, Line{}, "Stat                \r\n"},
	} {
		if got, err := tt.d.Append(nil, tt.l); err != nil || string(got) != tt.want {
			t.Errorf("%+v: %q, %v; want %q", tt.l, got, err, tt.want)
		}
	}
	for _, l := range []Line{{Value: n("1234567.890"), Unit: "g"}, {Value: n("1"), Unit: "gram"}, {Value: n("1.5"), Unverified: 2}, {Value: n("1"), Unverified: 1}, {ID: "toolong", Value: n("1")}} {
		if got, err := (Dialect{Long: true}).Append([]byte("x"), l); err == nil || string(got) != "x" {
			t.Errorf("%+v: %q, want an error", l, got)
		}
	}
}

func TestAnEncodedReportIsRead(t *testing.T) {
	d := Dialect{Long: true}
	line := encoded(t, d, Line{ID: "N", Value: decimal.MustParse("45.1234"), Unit: "g"})
	in := d.AppendReport(bytes.Clone(line), Report{Date: "14.01.2011", Time: "09:43", Labels: [][2]string{{"Type", "ABCD"}, {"Ser.no.", "12345678"}}})
	in = append(in, line...)
	in = d.AppendReport(in, Report{Date: "14.01.2011", Time: "09:45", Signature: true})
	in = append(in, line...)
	if got := weightsOf(in); len(got) != 3 {
		t.Errorf("%d weighings, want 3, of\n%s", len(got), in)
	}
}
