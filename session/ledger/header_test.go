package ledger

import (
	"encoding/json"
	"strings"
	"testing"
)

func TestParseHeader(t *testing.T) {
	good := `{"seq":12,"at":"2026-12-01T15:04:05.123Z","offset_min":-90,"run_ms":0,"actor":"operator:anna","kind":"reading","subject":"B-07 \"old\"","body":{"x":1}}`
	want := Header{12, "2026-12-01T15:04:05.123Z", -90, 0, "operator:anna", "reading", `B-07 "old"`}
	if got, err := ParseHeader([]byte(good)); err != nil || got != want {
		t.Fatalf("got %+v (%v), want %+v", got, err, want)
	}
	for _, tt := range []struct{ name, from, to string }{
		{"keys in another order", `"at"`, `"actor"`},
		{"a number with a zero before it", `"seq":12`, `"seq":012`},
		{"a number with a sign", `"seq":12`, `"seq":+12`},
		{"minus zero", `"run_ms":0`, `"run_ms":-0`},
		{"a number as text", `"seq":12`, `"seq":"12"`},
		{"a number that is too large", `"seq":12`, `"seq":12345678901234567890`},
		{"a fraction", `"seq":12`, `"seq":1.2`},
		{"a blank", `"seq":12`, `"seq": 12`},
		{"a time without milliseconds", `05.123Z`, `05Z`},
		{"a time with a zone", `05.123Z`, `05.123+01:00`},
		{"no actor", `operator:anna`, ``},
		{"no kind", `"reading"`, `""`},
		{"no body", `"body"`, `"content"`},
		{"a text that does not end", `"body":{"x":1}}`, ``},
		{"a bad escape", `\"old\"`, `\xold`},
	} {
		t.Run(tt.name, func(t *testing.T) {
			bad := strings.Replace(good, tt.from, tt.to, 1)
			if h, err := ParseHeader([]byte(bad)); err == nil {
				t.Errorf("%s was read as %+v", bad, h)
			}
		})
	}
}

// FuzzParseHeader compares our reader with encoding/json on every line that may be stored.
func FuzzParseHeader(f *testing.F) {
	f.Add(string(line(1, "daemon", "x", "", nil)))
	f.Add(string(line(7, "operator:\"anna\"", "reading", "B-07 \u00e9", map[string]int{"n": 1})))
	f.Add(`{"seq":0,"at":"2026-12-01T00:00:00.000Z","offset_min":-0,"run_ms":1e3,"actor":"\ud83d\ude00","kind":"k","subject":"s","body":0}`)
	f.Fuzz(func(t *testing.T, text string) {
		h, err := ParseHeader([]byte(text))
		if err != nil || checkLine([]byte(text)) != nil {
			return
		}
		var want struct {
			Seq       int64  `json:"seq"`
			At        string `json:"at"`
			OffsetMin int64  `json:"offset_min"`
			RunMS     int64  `json:"run_ms"`
			Actor     string `json:"actor"`
			Kind      string `json:"kind"`
			Subject   string `json:"subject"`
		}
		// The library matches keys whatever their case and takes the last of two, so only
		// the part before the body is compared.
		head, _, _ := strings.Cut(text, `,"body":`)
		if json.Unmarshal([]byte(head+"}"), &want) != nil {
			return
		}
		if got := Header(want); h != got {
			t.Errorf("%q\n got %+v\nwant %+v", text, h, got)
		}
	})
}

// FuzzReadCheckpoint demands that nothing but what the key signed is ever accepted.
func FuzzReadCheckpoint(f *testing.F) {
	_, key, err := newKey(testOrigin)
	if err != nil {
		f.Fatal(err)
	}
	f.Add("waterworks.example/burettes\n1\nAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAA=\n\n\u2014 waterworks.example/burettes nSyKHgAA\n")
	f.Add("x\n0\n\n\n")
	f.Fuzz(func(t *testing.T, text string) {
		if head, err := ReadCheckpoint([]byte(text), key); err == nil {
			t.Errorf("accepted %+v", head)
		}
		if head, err := readUnsigned([]byte(text)); err == nil && !strings.HasPrefix(text, head.text()) {
			t.Errorf("%q was read as %q", text, head.text())
		}
	})
}
