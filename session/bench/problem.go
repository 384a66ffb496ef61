package bench

import (
	"crypto/rand"
	"encoding/hex"
	"encoding/json"
	"errors"
	"net/http"
	"strings"

	"tenthmark/calc"
	"tenthmark/session"
)

// problem is an RFC 9457 problem document. Detail is for the person at the bench, in
// their words; Hint says what to do next; Code is for programs. An unknown cause has a
// reference that the log line carries too.
type problem struct {
	Type      string `json:"type"`
	Title     string `json:"title"`
	Status    int    `json:"status"`
	Detail    string `json:"detail"`
	Code      string `json:"code"`
	Hint      string `json:"hint"`
	Reference string `json:"reference,omitempty"`
}

// statuses gives the HTTP status of each code that is not covered by a prefix below.
var statuses = map[string]int{
	"who-acts": http.StatusUnauthorized, "sign-in-needed": http.StatusUnauthorized, "wrong-secret": http.StatusUnauthorized,
	"own-run": http.StatusForbidden, "not-allowed": http.StatusForbidden, "other-site": http.StatusForbidden, "other-host": http.StatusMisdirectedRequest,
	"operator-disabled": http.StatusForbidden, "signer-differs": http.StatusForbidden,
	"no-curve-in-force": http.StatusNotFound, "no-document": http.StatusNotFound, "no-checkpoint": http.StatusNotFound,
	"no-such-call": http.StatusNotFound, "wrong-method": http.StatusMethodNotAllowed,
	"too-large": http.StatusRequestEntityTooLarge, "not-json": http.StatusUnsupportedMediaType,
	"bad-json": http.StatusBadRequest, "bad-query": http.StatusBadRequest,
	"locked-out": http.StatusTooManyRequests, "too-busy": http.StatusTooManyRequests,
	"cannot-tare": http.StatusNotImplemented, "no-backup": http.StatusNotImplemented,
	"shutting-down": http.StatusServiceUnavailable,
}

// conflicts are the codes that say: right form, wrong moment.
var conflicts = []string{
	"station-busy", "station-offline", "burette-exists", "burette-retired", "operator-exists", "run-closed", "run-suspended",
	"wrong-state", "run-incomplete", "run-complete", "reading-present", "water-temp-present", "already-void",
	"nothing-to-void", "no-doubt", "answer-first", "no-curve", "cannot-supersede", "another-balance", "not-awaited",
	"last-administrator", "people-exist", "trail-first", "secret-altered",
}

// status gives the HTTP status of a fault. What is not listed is a value that cannot be
// used (422), or, when it has a cause, something that does not work at the moment (503).
func status(f *session.Fault) int {
	if s, listed := statuses[f.Code]; listed {
		return s
	}
	for _, code := range conflicts {
		if f.Code == code {
			return http.StatusConflict
		}
	}
	switch {
	case strings.HasPrefix(f.Code, "unknown-"):
		return http.StatusNotFound
	case f.Err != nil:
		return http.StatusServiceUnavailable
	}
	return http.StatusUnprocessableEntity
}

// asFault gives the fault in an error's chain; a refusal of package calc counts as one.
func asFault(err error) *session.Fault {
	var f *session.Fault
	if errors.As(err, &f) {
		return f
	}
	var r *calc.Refusal
	if errors.As(err, &r) {
		return session.Refuse(r.Code, r.Message, r.Hint)
	}
	return nil
}

// describe turns an error into a problem document. Only an unknown cause, or one that
// the operator can do nothing about, needs the log: then reference is set.
func describe(err error) problem {
	f := asFault(err)
	if f == nil {
		return problem{
			Type: "about:blank", Status: http.StatusInternalServerError, Code: "internal", Reference: newReference(),
			Title: http.StatusText(http.StatusInternalServerError), Detail: "Something went wrong that should not.",
			Hint: "Nothing was recorded unless the run shows it. Look at the run again; if it happens again, pass the reference on with the log.",
		}
	}
	s := status(f)
	p := problem{Type: "about:blank", Title: http.StatusText(s), Status: s, Detail: f.Message, Code: f.Code, Hint: f.Hint}
	if f.Err != nil {
		p.Reference = newReference()
	}
	return p
}

func newReference() string {
	var b [4]byte
	_, _ = rand.Read(b[:]) // never fails: crypto/rand ends the program instead
	return hex.EncodeToString(b[:])
}

// refuse answers a call with a problem document.
func (b *Bench) refuse(w http.ResponseWriter, r *http.Request, err error) {
	p := describe(err)
	if p.Reference != "" {
		b.Log.Error().Err(err).Str("reference", p.Reference).Str("method", r.Method).Str("path", r.URL.Path).Msg("call failed")
	}
	if p.Status == http.StatusTooManyRequests {
		w.Header().Set("Retry-After", "60")
	}
	writeProblem(w, p)
}

func writeProblem(w http.ResponseWriter, p problem) {
	h := w.Header()
	h.Set("Content-Type", "application/problem+json")
	h.Set("Cache-Control", "no-store")
	w.WriteHeader(p.Status)
	_ = json.NewEncoder(w).Encode(p) // whoever asked may have gone
}
