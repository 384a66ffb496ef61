package bench

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"mime"
	"net/http"
	"strconv"

	"tenthmark/calc/decimal"
	"tenthmark/session"
)

// call is one call of the API with who makes it.
type call struct {
	*http.Request
	w   http.ResponseWriter
	who person
}

// Sizes of a call's body: what a person enters, and a table of titrations.
const (
	maxBody  = 64 << 10
	maxTable = 4 << 20
)

// read decodes the call's JSON body. Unknown fields, a second value and digits that are
// no number are refused, each in words of its own.
func read[T any](c *call, limit int64) (T, error) {
	var v T
	kind, _, err := mime.ParseMediaType(c.Header.Get("Content-Type"))
	if err != nil || kind != "application/json" {
		return v, session.Refuse("not-json", "The call's body is not declared as JSON.", "Send it with Content-Type: application/json.")
	}
	d := json.NewDecoder(http.MaxBytesReader(c.w, c.Body, limit))
	d.DisallowUnknownFields()
	if err := d.Decode(&v); err != nil {
		return v, badJSON(err, limit)
	}
	switch _, err := d.Token(); {
	case errors.Is(err, io.EOF):
		return v, nil
	case err == nil:
		return v, session.Refuse("bad-json", "Something follows the JSON object.", "Send one object and nothing after it.")
	default:
		return v, badJSON(err, limit)
	}
}

// badJSON says what is wrong with a body.
func badJSON(err error, limit int64) error {
	var tooLarge *http.MaxBytesError
	var wrongType *json.UnmarshalTypeError
	switch {
	case errors.As(err, &tooLarge):
		return session.Refuse("too-large", fmt.Sprintf("The call is larger than %d bytes.", limit), "Send less at once.")
	case errors.Is(err, decimal.ErrSyntax), errors.Is(err, decimal.ErrRange):
		return session.Refuse("bad-number", fmt.Sprintf("That is no number that can be recorded: %v.", err), "Enter digits with at most one decimal point or comma, for example 10.02.")
	case errors.As(err, &wrongType):
		return session.Refuse("bad-json", fmt.Sprintf("The field %q cannot hold a JSON %s.", wrongType.Field, wrongType.Value), "Look at the form of the call in /api/openapi.json.")
	case errors.Is(err, io.EOF):
		return session.Refuse("bad-json", "The call has no body.", "Send a JSON object; its form is in /api/openapi.json.")
	}
	return session.Refuse("bad-json", fmt.Sprintf("The body cannot be read: %v.", err), "Look at the form of the call in /api/openapi.json.")
}

// reply answers with JSON. What is answered is encoded first, so that a value that
// cannot be encoded is an error and not half an answer.
func (c *call) reply(status int, v any) error {
	b, err := json.Marshal(v)
	if err != nil {
		return fmt.Errorf("encode answer: %w", err)
	}
	c.w.Header().Set("Content-Type", "application/json")
	c.w.WriteHeader(status)
	_, _ = c.w.Write(append(b, '\n')) // whoever asked may have gone
	return nil
}

// number reads an integer from the query, fallback when it is not there.
func (c *call) number(name string, fallback, low, high int64) (int64, error) {
	text := c.URL.Query().Get(name)
	if text == "" {
		return fallback, nil
	}
	n, err := strconv.ParseInt(text, 10, 64)
	if err != nil || n < low || n > high {
		return 0, session.Refuse("bad-query", fmt.Sprintf("%s=%q cannot be used.", name, text), fmt.Sprintf("Give a whole number from %d to %d.", low, high))
	}
	return n, nil
}
