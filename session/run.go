package session

import (
	"crypto/sha256"
	"encoding/hex"

	"tenthmark/calc/decimal"
)

// State is where a run stands.
type State string

// The states of a run.
const (
	Open      State = "open"
	Suspended State = "suspended"
	Finished  State = "finished" // signed as performed
	Reviewed  State = "reviewed" // signed by another person
	Published State = "published"
	Abandoned State = "abandoned"
)

// Run is one calibration of one burette, from opening to publication. It is a
// function of its events and of nothing else: apply is the only thing that changes
// it. Its fields are read by others and written by nobody else.
type Run struct {
	ID           string
	State        State
	Opening      OpenedBody
	OpenedAt     Time
	OpenedBy     Actor
	Identity     Identity // of the balance; kept from its first weight on
	Ambients     []*Ambient
	Deliveries   []*Delivery
	Seen         []*Seen
	Changes      []Change // what was amended, voided, answered, suspended …, in order
	Performed    *Signature
	Review       *Signature
	Trail        *Signature   // the audit-trail review, if one was signed
	Prepared     *Publication // what was last about to appear in the drop
	Publishing   *Publication // what appeared there
	SupersededBy string
	First, Last  int64 // numbers of the run's first and latest event
	FinishedAt   Time
	Hash         [32]byte // chain over the run's event lines, see RecordHash

	results map[int]outcome // of complete deliveries, since the last event
}

// OpenedBody is the body of a RunOpened event: everything the run rests on.
type OpenedBody struct {
	Burette    Burette  `json:"burette"`
	Station    string   `json:"station"`
	Identity   Identity `json:"identity"`
	Plan       Plan     `json:"plan"`
	Supersedes string   `json:"supersedes,omitempty"`
	Condition  string   `json:"condition,omitempty"` // as found, as left: cleaning or repair before the run
	Setting    Setting  `json:"setting"`
}

// Delivery is one portion of water: two readings, two weighings, one temperature.
// Start and Before are nil when they are shared with the delivery before; ask
// Run.StartOf and Run.BeforeOf.
type Delivery struct {
	Number    int
	Replicate int
	FromML    decimal.Number // where the plan has it start
	PointML   decimal.Number // and end
	Replaces  int            // number of the voided delivery it stands for
	Before    *Weighing
	After     *Weighing
	Start     *Reading
	End       *Reading
	Water     *WaterTemp
	Void      *Change
	Answered  *Change // the doubt about it that somebody answered
	Follows   int     // the delivery whose end this one may start from; 0: none
}

// Weighing is one settled weight that was taken.
type Weighing struct {
	Fact int64
	WeighingBody
	At       Time
	By       Actor
	Replaced []*Weighing // earlier zeros of a tared weighing, newest last
}

// Reading is one burette reading.
type Reading struct {
	Fact      int64
	ReadingML decimal.Number
	At        Time
	By        Actor
	Amended   []Change
}

// WaterTemp is the water's temperature at one delivery.
type WaterTemp struct {
	Fact       int64
	WaterTempC decimal.Number
	At         Time
	By         Actor
	Amended    []Change
}

// Ambient is one state of the air around the balance.
type Ambient struct {
	Fact int64
	AmbientBody
	At      Time
	By      Actor
	Amended []Change
}

// Seen is a settled weight that was recorded and not taken.
type Seen struct {
	Fact int64
	SeenBody
	At    Time
	Taken int64 // number of the weighing it became, 0: none
}

// Change is a correction or a step in the run's life, with who, when and why.
type Change struct {
	Event    int64          `json:"event"`
	Kind     Kind           `json:"kind"`
	Fact     int64          `json:"fact,omitempty"`
	Delivery int            `json:"delivery,omitempty"`
	Field    string         `json:"field,omitempty"`
	Was      decimal.Number `json:"was,omitzero"`
	Value    decimal.Number `json:"value,omitzero"`
	Reason   string         `json:"reason"`
	By       string         `json:"by"`
	At       Time           `json:"at"`
}

// Signature is a signed statement about the run.
type Signature struct {
	Event int64
	SignedBody
	By Actor
	At Time
}

// Publication is where the finished run went.
type Publication struct {
	Event int64
	PublishedBody
	At Time
}

// RecordHash gives the hash that signatures are bound to, hexadecimal: H₀ is 32
// zero bytes and Hₙ = SHA-256(Hₙ₋₁ ‖ line n), over the run's event lines as stored.
func (r *Run) RecordHash() string { return hex.EncodeToString(r.Hash[:]) }

func (r *Run) extendHash(line []byte) {
	h := sha256.New()
	h.Write(r.Hash[:])
	h.Write(line)
	h.Sum(r.Hash[:0])
}

// Delivery gives a delivery by its number, nil when there is none.
func (r *Run) Delivery(number int) *Delivery {
	if number < 1 || number > len(r.Deliveries) {
		return nil
	}
	return r.Deliveries[number-1]
}

// StartOf gives the reading a delivery starts from: its own, or in a stepwise run
// the end reading of the delivery before. Nil when it is still to be made.
func (r *Run) StartOf(d *Delivery) *Reading {
	if d.Start == nil && r.sharesStart(d) {
		return r.Delivery(d.Follows).End
	}
	return d.Start
}

// BeforeOf gives the weighing of the vessel before the delivery: its own, or with
// a running vessel the after-weight of the delivery before.
func (r *Run) BeforeOf(d *Delivery) *Weighing {
	if d.Before == nil && r.sharesBefore(d) {
		return r.Delivery(d.Follows).After
	}
	return d.Before
}

// sharesStart: the burette was not refilled in between. After a voided delivery
// that has no end reading the level is unknown, so a new start reading is needed.
func (r *Run) sharesStart(d *Delivery) bool {
	before := r.Delivery(d.Follows)
	return r.Opening.Plan.ReadingPattern == Stepwise && before != nil && (before.Void == nil || before.End != nil)
}

func (r *Run) sharesBefore(d *Delivery) bool {
	before := r.Delivery(d.Follows)
	return r.Opening.Plan.WeighingPattern == Running && before != nil && (before.Void == nil || before.After != nil)
}

// IsComplete says whether a delivery has everything that its volume needs.
func (r *Run) IsComplete(d *Delivery) bool {
	return r.BeforeOf(d) != nil && d.After != nil && r.StartOf(d) != nil && d.End != nil && d.Water != nil && len(r.Ambients) > 0
}

// AmbientOf gives the state of the air that counts for a delivery: the latest one
// entered before the vessel was weighed after it, or else the first of the run.
func (r *Run) AmbientOf(d *Delivery) *Ambient {
	var in *Ambient
	for _, a := range r.Ambients {
		if in == nil || d.After != nil && a.Fact < d.After.Fact {
			in = a
		}
	}
	return in
}

// current gives the delivery the run is at: the first that is not void and either
// incomplete or in doubt. Nil when all are done.
func (r *Run) current() *Delivery { return r.firstUndone(0) }

func (r *Run) firstUndone(after int) *Delivery {
	for _, d := range r.Deliveries[after:] {
		if d.Void == nil && (!r.IsComplete(d) || r.DoubtAbout(d) != nil) {
			return d
		}
	}
	return nil
}

// IsDone says whether every delivery of the plan is complete and beyond doubt.
func (r *Run) IsDone() bool { return r.current() == nil }

// IsClosed says whether the run takes no more facts for good.
func (r *Run) IsClosed() bool {
	return r.State == Published || r.State == Abandoned || r.State == Reviewed
}

// IsDue says whether the run is signed by everybody who has to and not published.
func (r *Run) IsDue() bool {
	return r.Publishing == nil && (r.State == Reviewed || r.State == Finished && !r.Opening.Setting.Review)
}
