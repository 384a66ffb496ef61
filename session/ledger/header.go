package ledger

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"unicode/utf8"
)

// MaxBody is the longest event in bytes; longer ones would not fit an entry bundle
// of the C2SP tlog-tiles form.
const MaxBody = 65535

// Header is the part of an event that the ledger reads. The encoder writes its keys
// in this order and before the body.
type Header struct {
	Seq       int64
	At        string // UTC with milliseconds, fixed width: 2026-12-01T15:04:05.123Z
	OffsetMin int64  // local time minus UTC, minutes
	RunMS     int64  // monotonic time since the daemon started, ms
	Actor     string // "operator:anna", "station:bench-1", "daemon"
	Kind      string
	Subject   string // a run, burette, operator or station; may be empty
}

var errHeader = errors.New("not an event of this ledger: the header is malformed")

// rawHeader is a Header whose texts are still bytes of the line.
type rawHeader struct {
	seq, offsetMin, runMS    int64
	at, actor, kind, subject []byte
}

// ParseHeader reads the header of an event's bytes. It is strict about the order of
// keys because the bytes are ours; it does not look into the body.
func ParseHeader(line []byte) (Header, error) {
	r, err := parseRaw(line)
	if err != nil {
		return Header{}, err
	}
	return Header{r.seq, string(r.at), r.offsetMin, r.runMS, string(r.actor), string(r.kind), string(r.subject)}, nil
}

func parseRaw(line []byte) (rawHeader, error) {
	s := scan{rest: line}
	r := rawHeader{seq: s.number(`{"seq":`), at: s.text(`,"at":`)}
	r.offsetMin, r.runMS = s.number(`,"offset_min":`), s.number(`,"run_ms":`)
	r.actor, r.kind, r.subject = s.text(`,"actor":`), s.text(`,"kind":`), s.text(`,"subject":`)
	s.word(`,"body":`)
	if s.failed || len(r.kind) == 0 || len(r.actor) == 0 || !wellFormedTime(r.at) {
		return rawHeader{}, errHeader
	}
	return r, nil
}

// Fill gives the part of the line behind "body", without the closing brace: the
// event's own content.
func Fill(line []byte) (json.RawMessage, error) {
	var whole struct {
		Body json.RawMessage `json:"body"`
	}
	if err := json.Unmarshal(line, &whole); err != nil {
		return nil, fmt.Errorf("read event: %w", err)
	}
	return whole.Body, nil
}

// scan walks over a line; after the first mismatch it gives zero values.
type scan struct {
	rest   []byte
	failed bool
}

func (s *scan) word(w string) {
	if s.failed || len(s.rest) < len(w) || string(s.rest[:len(w)]) != w {
		s.failed = true
		return
	}
	s.rest = s.rest[len(w):]
}

// number reads a whole number in its shortest form after the key.
func (s *scan) number(key string) int64 {
	s.word(key)
	digits := s.rest
	negative := len(digits) > 0 && digits[0] == '-'
	if negative {
		digits = digits[1:]
	}
	var n int64
	end := 0
	for end < len(digits) && end < 18 && digits[end] >= '0' && digits[end] <= '9' {
		n = 10*n + int64(digits[end]-'0')
		end++
	}
	if s.failed || end == 0 || digits[0] == '0' && (end > 1 || negative) {
		s.failed = true
		return 0
	}
	s.rest = digits[end:]
	if negative {
		return -n
	}
	return n
}

// text reads a JSON string after the key; only one with escapes is copied.
func (s *scan) text(key string) []byte {
	s.word(key)
	if s.failed || len(s.rest) == 0 || s.rest[0] != '"' {
		s.failed = true
		return nil
	}
	end := 1
	for end < len(s.rest) && s.rest[end] != '"' && s.rest[end] != '\\' {
		end++
	}
	if end < len(s.rest) && s.rest[end] == '\\' {
		return s.escaped()
	}
	if end >= len(s.rest) {
		s.failed = true
		return nil
	}
	text := s.rest[1:end]
	s.rest = s.rest[end+1:]
	return text
}

// escaped reads a string with escapes, which begins at the present place.
func (s *scan) escaped() []byte {
	d := json.NewDecoder(bytes.NewReader(s.rest))
	var text string
	if d.Decode(&text) != nil {
		s.failed = true
		return nil
	}
	s.rest = s.rest[d.InputOffset():]
	return []byte(text)
}

// timeMask is the form of a time: 0 stands for a digit.
const timeMask = "0000-00-00T00:00:00.000Z"

func wellFormedTime(at []byte) bool {
	if len(at) != len(timeMask) {
		return false
	}
	for i := range len(timeMask) {
		if timeMask[i] == '0' && (at[i] < '0' || at[i] > '9') || timeMask[i] != '0' && at[i] != timeMask[i] {
			return false
		}
	}
	return true
}

// checkLine refuses bytes that are not one line of UTF-8 JSON of bearable length.
func checkLine(body []byte) error {
	switch {
	case len(body) > MaxBody:
		return fmt.Errorf("event of %d bytes: the limit is %d", len(body), MaxBody)
	case bytes.ContainsAny(body, "\n\r\x00"):
		return errors.New("event contains a line break")
	case !utf8.Valid(body):
		return errors.New("event is not UTF-8")
	case !json.Valid(body):
		return errors.New("event is not JSON")
	}
	return nil
}
