package ledger

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"strconv"
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

// ParseHeader reads the header of an event's bytes. It is strict about the order of
// keys because the bytes are ours; it does not look into the body.
func ParseHeader(line []byte) (Header, error) {
	s := scan{rest: line}
	h := Header{
		Seq: s.number(`{"seq":`), At: s.text(`,"at":`), OffsetMin: s.number(`,"offset_min":`), RunMS: s.number(`,"run_ms":`),
		Actor: s.text(`,"actor":`), Kind: s.text(`,"kind":`), Subject: s.text(`,"subject":`),
	}
	s.word(`,"body":`)
	if s.failed || h.Kind == "" || h.Actor == "" || !wellFormedTime(h.At) {
		return Header{}, errHeader
	}
	return h, nil
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
	if s.failed {
		return 0
	}
	end := 0
	for end < len(s.rest) && (s.rest[end] == '-' || s.rest[end] >= '0' && s.rest[end] <= '9') {
		end++
	}
	text := string(s.rest[:end])
	n, err := strconv.ParseInt(text, 10, 64)
	if err != nil || strconv.FormatInt(n, 10) != text {
		s.failed = true
		return 0
	}
	s.rest = s.rest[end:]
	return n
}

// text reads a JSON string after the key; one without escapes costs one allocation.
func (s *scan) text(key string) string {
	s.word(key)
	if s.failed || len(s.rest) == 0 || s.rest[0] != '"' {
		s.failed = true
		return ""
	}
	end, escaped := 1, false
	for end < len(s.rest) && s.rest[end] != '"' {
		if s.rest[end] == '\\' {
			escaped = true
			end++
		}
		end++
	}
	if end >= len(s.rest) {
		s.failed = true
		return ""
	}
	quoted := s.rest[:end+1]
	s.rest = s.rest[end+1:]
	if !escaped {
		return string(quoted[1:end])
	}
	var text string
	if json.Unmarshal(quoted, &text) != nil {
		s.failed = true
	}
	return text
}

// timeMask is the form of a time: 0 stands for a digit.
const timeMask = "0000-00-00T00:00:00.000Z"

func wellFormedTime(at string) bool {
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
