package session

import (
	"encoding/json"
	"fmt"
	"strings"
	"time"
)

// Kind names what an event records.
type Kind string

// The kinds of events. Those up to RunSuperseded concern one run and carry its
// name as subject; the later ones concern the house.
const (
	RunOpened     Kind = "run.opened"
	WeightTaken   Kind = "weighing"
	WeightSeen    Kind = "seen"
	ReadingMade   Kind = "reading"
	WaterTempMade Kind = "water_temp"
	AmbientMade   Kind = "ambient"
	FactAmended   Kind = "amended"
	DeliveryVoid  Kind = "voided"
	DoubtAnswered Kind = "answered"
	RunSuspended  Kind = "run.suspended"
	RunResumed    Kind = "run.resumed"
	RunAbandoned  Kind = "run.abandoned"
	RunReopened   Kind = "run.reopened"
	RunFinished   Kind = "run.finished"
	RunReviewed   Kind = "run.reviewed"
	RunPrepared   Kind = "run.prepared" // its documents are made and about to appear in the drop
	RunPublished  Kind = "run.published"
	RunSuperseded Kind = "run.superseded"
	TrailReviewed Kind = "trail.reviewed"

	BuretteRegistered Kind = "burette.registered"
	BuretteChanged    Kind = "burette.changed"
	OperatorAdded     Kind = "operator.added"
	OperatorChanged   Kind = "operator.changed"
	SignedIn          Kind = "sign-in"
	SignInRefused     Kind = "sign-in.refused"
	SignedOut         Kind = "sign-out"
	StationOnline     Kind = "station.online"
	StationOffline    Kind = "station.offline"
	StationTared      Kind = "station.tared"
	LineDiagnosed     Kind = "line.diagnosed"
	LogSample         Kind = "log.sample"
	DaemonStarted     Kind = "daemon.started"
	DaemonStopped     Kind = "daemon.stopped"
	ClockStepped      Kind = "clock.stepped"
	CheckpointMade    Kind = "checkpoint"
	BackupMade        Kind = "backup"
	PublicationFailed Kind = "publication.failed"
)

// TimeForm is the only form in which times are stored: UTC with milliseconds, of
// fixed width, so that it also sorts as text. Order is nevertheless the sequence
// number and never the time.
const TimeForm = "2006-01-02T15:04:05.000Z"

// Time is a moment to the millisecond that travels in TimeForm.
type Time struct{ time.Time }

// At gives t in UTC, cut to milliseconds.
func At(t time.Time) Time { return Time{t.UTC().Truncate(time.Millisecond)} }

// MarshalJSON writes the moment in TimeForm, a missing one as null.
func (t Time) MarshalJSON() ([]byte, error) {
	if t.IsZero() {
		return []byte("null"), nil
	}
	return []byte(`"` + t.UTC().Format(TimeForm) + `"`), nil
}

// UnmarshalJSON reads RFC 3339; null leaves the moment missing.
func (t *Time) UnmarshalJSON(b []byte) error {
	if string(b) == "null" {
		*t = Time{}
		return nil
	}
	parsed, err := time.Parse(`"`+time.RFC3339+`"`, string(b))
	if err != nil {
		return fmt.Errorf("time %s: %w", b, err)
	}
	*t = At(parsed)
	return nil
}

// Actor is who or what caused an event: "operator:NAME", "station:NAME" or "daemon".
type Actor string

// The daemon itself as an actor.
const Daemon Actor = "daemon"

// Operator gives the actor for a person.
func Operator(name string) Actor { return Actor("operator:" + name) }

// Station gives the actor for a balance with its line.
func Station(name string) Actor { return Actor("station:" + name) }

// Name gives the actor without its class: the operator's or station's name.
func (a Actor) Name() string {
	if _, name, found := strings.Cut(string(a), ":"); found {
		return name
	}
	return string(a)
}

// IsOperator says whether a person acted.
func (a Actor) IsOperator() bool { return strings.HasPrefix(string(a), "operator:") }

// Event is one line of the ledger. The order of its fields is the order in which
// they are encoded; the ledger keeps the encoded bytes and hashes those, so an
// event is encoded once and never again.
type Event struct {
	Seq       int64           `json:"seq"`        // number in the ledger, from 0
	At        Time            `json:"at"`         // the daemon's clock, UTC
	OffsetMin int             `json:"offset_min"` // local time minus UTC, minutes
	RunMS     int64           `json:"run_ms"`     // monotonic time since the daemon started, ms
	Actor     Actor           `json:"actor"`
	Kind      Kind            `json:"kind"`
	Subject   string          `json:"subject"` // a run, burette, operator or station; may be empty
	Body      json.RawMessage `json:"body"`
}

// Draft is an event that has been decided but not yet recorded: the desk adds
// number, time and actor.
type Draft struct {
	Kind    Kind
	Subject string
	Body    any
}

// Encode gives the bytes that the ledger stores and hashes: one line of JSON
// without a line break.
func (e Event) Encode() ([]byte, error) {
	b, err := json.Marshal(e)
	if err != nil {
		return nil, fmt.Errorf("encode event %d %s: %w", e.Seq, e.Kind, err)
	}
	return b, nil
}

// DecodeEvent reads what Encode wrote.
func DecodeEvent(b []byte) (Event, error) {
	var e Event
	if err := json.Unmarshal(b, &e); err != nil {
		return Event{}, fmt.Errorf("decode event: %w", err)
	}
	return e, nil
}

// body reads the event's body into a value of the type its kind has.
func body[T any](e Event) (T, error) {
	var v T
	if err := json.Unmarshal(e.Body, &v); err != nil {
		return v, fmt.Errorf("event %d %s: body: %w", e.Seq, e.Kind, err)
	}
	return v, nil
}
