package protocol

import (
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

const tables = "../testdata/protocol/"

// meaning writes a frame as the tables do:
//
//	weight ID ±NUMBER UNIT stable plain unverified=N
func meaning(f *Frame) string {
	words := []string{f.Kind.String()}
	switch f.Kind {
	case Weight:
		sign := ""
		if f.Sign != 0 {
			sign = string(rune(f.Sign))
		}
		words = append(words, orHyphen(f.ID), sign+f.Text(), orHyphen(f.Unit))
		if f.Stable {
			words = append(words, "stable")
		}
		if f.Plain {
			words = append(words, "plain")
		}
		if f.UnverifiedDigits > 0 {
			words = append(words, fmt.Sprintf("unverified=%d", f.UnverifiedDigits))
		}
	case Status:
		words = append(words, f.Condition.String())
	case Error:
		words = append(words, f.Code)
	case Damaged:
		words = append(words, f.Damage.String())
	}
	return strings.Join(words, " ")
}

func orHyphen(s string) string {
	if s == "" {
		return "-"
	}
	return s
}

// row is one line of a table: bytes and what is said of them.
type row struct {
	file  string
	line  int
	bytes []byte
	cells []string
}

func (r row) String() string { return fmt.Sprintf("%s:%d %q", r.file, r.line, r.bytes) }

// readTable reads a table of tab-separated cells; bytes are written with \r, \n and \xNN.
func readTable(t testing.TB, file string, header bool) []row {
	t.Helper()
	text, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	var rows []row
	for i, line := range strings.Split(strings.TrimSuffix(string(text), "\n"), "\n") {
		if strings.HasPrefix(line, "# ") {
			continue
		}
		if header {
			header = false
			continue
		}
		cells := strings.Split(line, "\t")
		rows = append(rows, row{filepath.Base(file), i + 1, unescape(t, cells[0]), cells})
	}
	return rows
}

func unescape(t testing.TB, s string) []byte {
	t.Helper()
	text, err := strconv.Unquote(`"` + strings.ReplaceAll(s, `"`, `\"`) + `"`)
	if err != nil {
		t.Fatalf("%q: %v", s, err)
	}
	return []byte(text)
}

// decode gives what the bytes mean when they come at once.
func decode(in []byte) []string { return decodeIn(in, len(in)+1) }

// decodeIn feeds the bytes in portions of the given size.
func decodeIn(in []byte, portion int) []string {
	var got []string
	d := NewDecoder(Options{})
	keep := func(f *Frame) { got = append(got, meaning(f)) }
	for len(in) > 0 {
		n := min(portion, len(in))
		d.Feed(in[:n], keep)
		in = in[n:]
	}
	d.End(keep)
	return got
}

// Sources: interface chapters of balance operating manuals; the form tells a printed
// byte grid from a line whose blanks were restored.
func TestLinesOfTheManuals(t *testing.T) {
	rows := readTable(t, tables+"manual_lines.tsv", true)
	if len(rows) < 44 {
		t.Fatalf("%d rows", len(rows))
	}
	checkRows(t, rows)
}

func TestLinesBuiltOnTheSameRules(t *testing.T) {
	checkRows(t, readTable(t, tables+"rule_lines.tsv", true))
}

func checkRows(t *testing.T, rows []row) {
	for _, r := range rows {
		if got := strings.Join(decode(r.bytes), " | "); got != r.cells[1] {
			t.Errorf("%v\n got %s\nwant %s", r, got, r.cells[1])
		}
		if got := strings.Join(decodeIn(r.bytes, 1), " | "); got != r.cells[1] {
			t.Errorf("%v byte by byte\n got %s\nwant %s", r, got, r.cells[1])
		}
	}
}

// The files hold one line each, in order, with what it was taken for: kind, then
// plain, report and reply where they hold. "!" begins what the caller does.
func TestStreams(t *testing.T) {
	files, err := filepath.Glob(tables + "streams/*.tsv")
	if err != nil || len(files) == 0 {
		t.Fatalf("no streams: %v", err)
	}
	for _, file := range files {
		t.Run(strings.TrimSuffix(filepath.Base(file), ".tsv"), func(t *testing.T) {
			d := NewDecoder(Options{})
			for _, r := range readTable(t, file, false) {
				want := ""
				if len(r.cells) > 1 {
					want = r.cells[1]
				}
				if got := play(d, r); got != want {
					t.Errorf("%v: got %q, want %q", r, got, want)
				}
			}
		})
	}
}

func play(d *Decoder, r row) string {
	var got []string
	hear := func(f *Frame) { got = append(got, role(f)) }
	order, rest, _ := strings.Cut(string(r.bytes), " ")
	switch order {
	case "!resync":
		d.Resync()
	case "!gap":
		d.Gap(hear)
	case "!end":
		d.EndReport()
	case "!expect":
		d.Expect(int(rest[0] - '0'))
	case "!part":
		d.Feed([]byte(rest), hear)
	default:
		d.Feed(append(r.bytes, '\r', '\n'), hear)
	}
	return strings.Join(got, " | ")
}

func role(f *Frame) string {
	s := f.Kind.String()
	for _, mark := range []struct {
		is   bool
		name string
	}{{f.Plain, "plain"}, {f.InReport, "report"}, {f.Reply, "reply"}} {
		if mark.is {
			s += " " + mark.name
		}
	}
	return s
}
