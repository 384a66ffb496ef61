package bench

import (
	"context"
	"io/fs"

	"tenthmark/session"
)

// Stations is the balances as the page needs them.
type Stations interface {
	List() []Station
}

// Tarer is a Stations that can also tare a balance.
type Tarer interface {
	Tare(ctx context.Context, station string) error
}

// States of a station.
const (
	Online  = "online"
	Offline = "offline"
)

// Station is one balance with its line, as it is now.
type Station struct {
	Name         string           `json:"name"`
	State        string           `json:"state"`            // online or offline
	Reason       string           `json:"reason,omitempty"` // why it is offline, in the operator's words
	Hint         string           `json:"hint,omitempty"`   // and what to do
	Identity     session.Identity `json:"identity"`
	Live         *Live            `json:"live"`          // null when there is none
	LastWeighing *LastWeighing    `json:"last_weighing"` // null when there was none
}

// Live is the newest value that a balance sent.
type Live struct {
	Text     string  `json:"text"` // digits as sent
	Unit     string  `json:"unit"` // empty while the value moves
	Stable   bool    `json:"stable"`
	AgeMS    int64   `json:"age_ms"`
	Progress float64 `json:"progress"`         // of settling, 0 to 1
	Status   string  `json:"status,omitempty"` // overload, underload, adjusting …, instead of a value
}

// LastWeighing is the weight that settled last on a station.
type LastWeighing struct {
	MassG string       `json:"mass_g"`
	At    session.Time `json:"at"`
}

// Query chooses lines of the ledger; empty fields choose all.
type Query struct {
	After            int64 // only events with a greater number; -1 from the first one on
	Limit            int
	Run, Kind, Actor string
}

// Line is one event as it is stored.
type Line struct {
	Seq  int64
	Line []byte
}

// Records is the ledger as others may read it.
type Records interface {
	Events(ctx context.Context, q Query) ([]Line, error)
	Size(ctx context.Context) (int64, error)
	Checkpoint(ctx context.Context) (string, error) // "" when there is none yet
}

// Documents is what was published, and what waits to be.
type Documents interface {
	// Open gives a file of a published run's folder; fs.ErrNotExist when there is none.
	Open(run, name string) (fs.File, error)
	// Waiting lists the runs that are signed and could not be published yet.
	Waiting() []Waiting
}

// Waiting is a run in the outbox.
type Waiting struct {
	Run    string       `json:"run"`
	Since  session.Time `json:"since"`
	Reason string       `json:"reason"`
	Hint   string       `json:"hint,omitempty"`
}

// Backup copies the ledger while it is in use and gives what it found in the copy, for
// the answer.
type Backup func(ctx context.Context, file string) (report any, err error)
