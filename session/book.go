// Package session is the run: its plan, the pairing of facts with it, its events
// and its states. It is pure. Orders come in and are decided into events (Book's
// and Run's methods that return drafts); events come in and change the state
// (Book.Apply). The state is a function of the events and of nothing else, so a
// ledger that is replayed gives the same state again.
//
// Where to look: pairing.go decides whether a settled weight belongs to the awaited
// step, window.go how wide that step's window is, doubt.go whether mass and readings
// agree, orders.go what may be entered, apply.go what an event changes, document.go
// what the finished run looks like to others.
//
// The package knows no clock, no file, no balance and no logger, and it refuses to
// edit: a value that was entered is amended by a later event and stays visible.
package session

import (
	"cmp"
	"fmt"
	"slices"
	"time"
)

// Book is everything the ledger says: the register of burettes and all runs. Every
// run has a summary; the runs themselves are there as long as they are worked on.
// One that is closed can be fetched again from its own events: see Shelve and Fetch.
type Book struct {
	Burettes  map[string]*Entry
	People    map[string]*Member // see people.go
	Runs      map[string]*Run
	Summaries map[string]*Summary
	Checks    map[string]Check // the latest check weighings
	Order     []string         // the runs' names in the order in which they were opened
	Next      int64            // number of the next event
	Unclean   bool             // the daemon started and has not stopped
}

// Entry is a burette in the register with its history of changes.
type Entry struct {
	Burette
	Since   Time     `json:"since"`
	Changes []Change `json:"changes,omitempty"`
}

// NewBook gives an empty book.
func NewBook() *Book {
	return &Book{Burettes: map[string]*Entry{}, People: map[string]*Member{}, Runs: map[string]*Run{}, Summaries: map[string]*Summary{}, Checks: map[string]Check{}}
}

// BuretteBody is the body of the events of the register.
type BuretteBody struct {
	Burette Burette  `json:"burette"`
	Was     *Burette `json:"was,omitempty"`
	Reason  string   `json:"reason,omitempty"`
}

// Apply changes the book by one event, given as the line that the ledger stores.
func (b *Book) Apply(line []byte) error {
	e, err := DecodeEvent(line)
	if err != nil {
		return err
	}
	if e.Seq != b.Next {
		return fmt.Errorf("event %d where %d was expected", e.Seq, b.Next)
	}
	b.Next++
	switch e.Kind {
	case RunOpened:
		return b.applyOpened(e, line)
	case BuretteRegistered, BuretteChanged:
		return b.applyBurette(e)
	case OperatorAdded, OperatorChanged, SignedIn, SignInRefused:
		return b.applyPeople(e)
	case LogSample:
		return b.applySample(e)
	case DaemonStarted, DaemonStopped:
		b.Unclean = e.Kind == DaemonStarted
	}
	if !e.concernsRun() {
		return nil
	}
	return b.applyToRun(e, line)
}

// applyToRun brings a run and its summary in step.
func (b *Book) applyToRun(e Event, line []byte) error {
	summary := b.Summaries[e.Subject]
	if summary == nil {
		return nil // a weight that settled while no run was open
	}
	if run := b.Runs[e.Subject]; run != nil {
		if err := run.apply(e, line); err != nil {
			return err
		}
		*summary = run.Summary()
		return nil
	}
	return summary.apply(e)
}

// concernsRun says whether an event of this kind is part of its subject's run.
func (e Event) concernsRun() bool {
	switch e.Kind {
	case WeightTaken, WeightSeen, ReadingMade, WaterTempMade, AmbientMade, FactAmended, DeliveryVoid, DoubtAnswered,
		RunSuspended, RunResumed, RunAbandoned, RunReopened, RunFinished, RunReviewed, RunPrepared, RunPublished, RunSuperseded,
		TrailReviewed, PublicationFailed:
		return true
	}
	return false
}

func (b *Book) applyOpened(e Event, line []byte) error {
	return with(e, func(body OpenedBody) error {
		run := &Run{
			ID: e.Subject, State: Open, Opening: body, OpenedAt: e.At, OpenedBy: e.Actor, Identity: body.Identity,
			Deliveries: body.Plan.deliveries(), First: e.Seq, Last: e.Seq,
		}
		run.extendHash(line)
		b.Runs[run.ID] = run
		summary := run.Summary()
		b.Summaries[run.ID] = &summary
		b.Order = append(b.Order, run.ID)
		return nil
	})
}

func (b *Book) applyBurette(e Event) error {
	return with(e, func(body BuretteBody) error {
		entry := b.Burettes[body.Burette.Name]
		if entry == nil {
			entry = &Entry{Since: e.At}
			b.Burettes[body.Burette.Name] = entry
		}
		if e.Kind == BuretteChanged {
			entry.Changes = append(entry.Changes, Change{Event: e.Seq, Kind: e.Kind, Reason: body.Reason, By: e.Actor.Name(), At: e.At})
		}
		entry.Burette = body.Burette
		return nil
	})
}

// Register decides on a new burette.
func (b *Book) Register(burette Burette) ([]Draft, error) {
	burette = burette.withDefaults()
	if err := burette.Check(); err != nil {
		return nil, err
	}
	if b.Burettes[burette.Name] != nil {
		return nil, Refuse("burette-exists", fmt.Sprintf("Burette %s is in the register already.", burette.Name), "Change the entry, or choose another name. Names are never given twice.")
	}
	return []Draft{{BuretteRegistered, burette.Name, BuretteBody{Burette: burette}}}, nil
}

// Change decides on a changed register entry. Runs keep the entry they began with.
func (b *Book) Change(burette Burette, reason string) ([]Draft, error) {
	reason, err := CheckReason(reason)
	if err != nil {
		return nil, err
	}
	burette = burette.withDefaults()
	if err := burette.Check(); err != nil {
		return nil, err
	}
	entry := b.Burettes[burette.Name]
	if entry == nil {
		return nil, unknownBurette(burette.Name)
	}
	was := entry.Burette
	return []Draft{{BuretteChanged, burette.Name, BuretteBody{Burette: burette, Was: &was, Reason: reason}}}, nil
}

func unknownBurette(name string) error {
	return Refuse("unknown-burette", fmt.Sprintf("There is no burette %q in the register.", name), "Register it first, or check the name.")
}

// Request is what it takes to open a run.
type Request struct {
	Burette    string
	Station    string
	Plan       Plan
	Supersedes string
	Condition  string
	Ambient    *AmbientBody
}

// OpenRun decides on a new run. setting comes from the configuration, identity
// from the balance, local is the time at the bench, for the run's name.
func (b *Book) OpenRun(q Request, setting Setting, identity Identity, local time.Time) ([]Draft, error) {
	entry := b.Burettes[q.Burette]
	if entry == nil {
		return nil, unknownBurette(q.Burette)
	}
	if entry.Retired {
		return nil, Refuse("burette-retired", fmt.Sprintf("Burette %s is out of service.", q.Burette), "Put it back into service in the register first.")
	}
	if busy := b.OpenRunAt(q.Station); busy != nil {
		return nil, Refuse("station-busy", fmt.Sprintf("Run %s is %s on station %s.", busy.ID, busy.State, q.Station), "Finish, suspend or abandon it first.")
	}
	if err := b.mustBeChecked(q.Station, setting.CheckWeight, local); err != nil {
		return nil, err
	}
	plan := q.Plan.withDefaults(entry.Burette)
	if err := plan.Check(entry.Burette); err != nil {
		return nil, err
	}
	if err := b.checkSupersedes(q); err != nil {
		return nil, err
	}
	setting.Inputs = entry.inputs(setting.Inputs)
	opened := OpenedBody{
		Burette: entry.Burette, Station: q.Station, Identity: identity, Plan: plan,
		Supersedes: q.Supersedes, Condition: q.Condition, Setting: setting,
	}
	id := b.runName(q.Burette, local)
	drafts := []Draft{{RunOpened, id, opened}}
	if q.Ambient == nil {
		return drafts, nil
	}
	if err := checkAmbient(*q.Ambient); err != nil {
		return nil, err
	}
	return append(drafts, Draft{AmbientMade, id, *q.Ambient}), nil
}

func (b *Book) checkSupersedes(q Request) error {
	if q.Supersedes == "" {
		return nil
	}
	old := b.Summaries[q.Supersedes]
	if old == nil || old.State != Published || old.Burette != q.Burette {
		return Refuse("cannot-supersede", fmt.Sprintf("%q is no published run of burette %s.", q.Supersedes, q.Burette), "Name the published run that the new one replaces.")
	}
	if old.SupersededBy != "" {
		return Refuse("cannot-supersede", fmt.Sprintf("Run %s is superseded by %s already.", old.ID, old.SupersededBy), "Supersede that one.")
	}
	return nil
}

// runName counts a burette's runs of one day: B-07-20261201-1.
func (b *Book) runName(burette string, local time.Time) string {
	for n := 1; ; n++ {
		name := fmt.Sprintf("%s-%s-%d", burette, local.Format("20060102"), n)
		if b.Summaries[name] == nil {
			return name
		}
	}
}

// OpenRunAt gives the run that a station's weights belong to: the open one, nil
// when there is none. A suspended run leaves its station free.
func (b *Book) OpenRunAt(station string) *Run {
	for _, run := range b.Runs {
		if run.State == Open && run.Opening.Station == station {
			return run
		}
	}
	return nil
}

// Run gives a run by its name, or says that there is none. One that lies on the shelf
// has to be fetched first.
func (b *Book) Run(id string) (*Run, error) {
	if run := b.Runs[id]; run != nil {
		return run, nil
	}
	if b.Summaries[id] != nil {
		return nil, Refuse("run-closed", fmt.Sprintf("Run %s is %s.", id, b.Summaries[id].State), "Open a new run instead.")
	}
	return nil, Refuse("unknown-run", fmt.Sprintf("There is no run %q.", id), "Check the name, or list the runs.")
}

// BuretteList gives the register's entries by name.
func (b *Book) BuretteList() []*Entry {
	var all []*Entry
	for _, e := range b.Burettes {
		all = append(all, e)
	}
	slices.SortFunc(all, func(x, y *Entry) int { return cmp.Compare(x.Name, y.Name) })
	return all
}

// CurveInForce gives the run whose curve counted for a burette at a moment: the
// latest one finished by then that was published. What was superseded later still
// counted until then.
func (b *Book) CurveInForce(burette string, at time.Time) (*Summary, error) {
	if b.Burettes[burette] == nil {
		return nil, unknownBurette(burette)
	}
	var in *Summary
	for _, id := range b.Order {
		s := b.Summaries[id]
		if s.Burette != burette || s.State != Published || s.FinishedAt.After(at) {
			continue
		}
		if in == nil || !s.FinishedAt.Before(in.FinishedAt.Time) {
			in = s
		}
	}
	if in == nil {
		return nil, Refuse("no-curve-in-force", fmt.Sprintf("Burette %s had no published calibration on %s.", burette, at.Format("2006-01-02")), "Calibrate it first, or give the date of the titration.")
	}
	return in, nil
}
