package session

import (
	"encoding/json"
	"fmt"

	"tenthmark/calc/decimal"
)

// Role says which part a weighing or a reading plays in its delivery.
type Role string

// The roles of weighings (before, after) and of readings (start, end).
const (
	Before Role = "before"
	After  Role = "after"
	Start  Role = "start"
	End    Role = "end"
)

// Raw is the bytes of a line exactly as they came. In JSON every byte is one
// character, so that bytes from 0x80 on appear as \u0080 … \u00ff.
type Raw []byte

// MarshalJSON writes every byte as one character.
func (r Raw) MarshalJSON() ([]byte, error) {
	runes := make([]rune, len(r))
	for i, b := range r {
		runes[i] = rune(b)
	}
	return json.Marshal(string(runes))
}

// UnmarshalJSON reads what MarshalJSON wrote.
func (r *Raw) UnmarshalJSON(b []byte) error {
	var s string
	if err := json.Unmarshal(b, &s); err != nil {
		return err
	}
	out := make(Raw, 0, len(s))
	for _, c := range s {
		if c > 0xFF {
			return fmt.Errorf("raw bytes: character %q is no byte", c)
		}
		out = append(out, byte(c))
	}
	*r = out
	return nil
}

// Identity is what a balance says of itself. All of it may be empty: many
// balances do not answer.
type Identity struct {
	Model    string `json:"model,omitempty"`
	Serial   string `json:"serial,omitempty"`
	Firmware string `json:"firmware,omitempty"`
}

// Trace sums up the seconds before a weight was taken.
type Trace struct {
	Frames    int     `json:"frames"`     // frames in the dwell
	DwellMS   int64   `json:"dwell_ms"`   // length of the dwell
	SlopeGS   float64 `json:"slope_g_s"`  // drift: straight line through the dwell, g/s
	NoiseG    float64 `json:"noise_g"`    // spread about that line, standard deviation, g
	WaitingMS int64   `json:"waiting_ms"` // from the load's first movement to the dwell's start
}

// Weight is a settled weight as a station hands it over.
type Weight struct {
	MassG    decimal.Number `json:"mass_g"`
	Raw      Raw            `json:"raw"`
	Mode     string         `json:"mode,omitempty"` // settle, print or poll
	Trace    *Trace         `json:"trace,omitempty"`
	Identity Identity       `json:"identity"`
	Came     Time           `json:"came,omitzero"` // when its line came; the event says when it was recorded
}

// WeighingBody is the body of a WeightTaken event.
type WeighingBody struct {
	Delivery int  `json:"delivery"`
	Role     Role `json:"role"`
	Weight
	Seen   int64  `json:"seen,omitempty"`   // the seen weight it was taken from
	Reason string `json:"reason,omitempty"` // why an unexpected weight was taken
}

// SeenBody is the body of a WeightSeen event: a weight that settled and that the
// plan did not wait for.
type SeenBody struct {
	Weight
	Why string `json:"why"`
}

// ReadingBody is the body of a ReadingMade event.
type ReadingBody struct {
	Delivery  int            `json:"delivery"`
	Role      Role           `json:"role"`
	ReadingML decimal.Number `json:"reading_mL"`
}

// WaterTempBody is the body of a WaterTempMade event.
type WaterTempBody struct {
	Delivery   int            `json:"delivery"`
	WaterTempC decimal.Number `json:"water_temp_C"`
}

// AmbientBody is the body of an AmbientMade event: the air around the balance.
type AmbientBody struct {
	AirTempC    decimal.Number `json:"air_temp_C"`
	PressureHPa decimal.Number `json:"pressure_hPa"`
	HumidityPct decimal.Number `json:"humidity_pct"`
}

// AmendedBody is the body of a FactAmended event. Was and Value are the old and
// the new value as text; for an ambient state Field names the changed quantity.
type AmendedBody struct {
	Fact   int64          `json:"fact"`
	Field  string         `json:"field,omitempty"`
	Was    decimal.Number `json:"was"`
	Value  decimal.Number `json:"value"`
	Reason string         `json:"reason"`
}

// VoidedBody is the body of a DeliveryVoid event.
type VoidedBody struct {
	Delivery    int    `json:"delivery"`
	Replacement int    `json:"replacement"` // number of the delivery the plan grew
	Reason      string `json:"reason"`
}

// AnsweredBody is the body of a DoubtAnswered event: the values stand as entered.
type AnsweredBody struct {
	Delivery int    `json:"delivery"`
	Doubt    string `json:"doubt"`
	Reason   string `json:"reason"`
}

// ReasonBody is the body of events that only need a reason.
type ReasonBody struct {
	Reason string `json:"reason"`
}

// SignedBody is the body of RunFinished and RunReviewed: the statement that was
// signed and what it is bound to.
type SignedBody struct {
	Meaning      string `json:"meaning"`       // performed or reviewed
	Name         string `json:"name"`          // the signer's printed name
	Statement    string `json:"statement"`     // the sentence the signer saw
	RecordSHA256 string `json:"record_sha256"` // of the run's record as it stood, see Run.RecordHash
	SignIn       bool   `json:"sign_in"`       // whether a secret was asked for
}

// PublishedBody is the body of a RunPublished event.
type PublishedBody struct {
	Folder     string            `json:"folder"`
	Files      map[string]string `json:"files"` // name → SHA-256, hexadecimal
	Checkpoint string            `json:"checkpoint"`
}

// SupersededBody is the body of a RunSuperseded event.
type SupersededBody struct {
	By     string `json:"by"`
	Reason string `json:"reason"`
}
