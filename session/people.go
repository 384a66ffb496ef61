package session

import (
	"cmp"
	"fmt"
	"slices"
	"strings"
	"time"
)

// This file holds the people: who is registered, what their duties let them do, and
// when a name is locked. Secrets are not here and not in the ledger: an event carries
// only the SHA-256 of the hash that a secret is checked against, so that the hash,
// which lies in a file beside the ledger, cannot be exchanged unnoticed, and an
// exported ledger gives nobody anything to guess secrets from.

// Duty is what a person is in the laboratory for.
type Duty string

// The duties.
const (
	Operates    Duty = "operator"
	Reviews     Duty = "reviewer"
	Administers Duty = "administrator"
)

// When a name is locked, and how long a printed name may be.
const (
	lockAfter    = 5                // wrong secrets in a row
	lockedFor    = 15 * time.Minute // unless an administrator unlocks earlier
	longestPrint = 80               // bytes
)

// Action is something that a call may do and that needs a duty.
type Action string

// The actions.
const (
	ActLook     Action = "look"     // read anything
	ActCorrect  Action = "correct"  // apply a curve to titrations
	ActMeasure  Action = "measure"  // open a run, enter, amend, void, sign as performed
	ActReview   Action = "review"   // sign as reviewed
	ActRegister Action = "register" // enter or change a burette
	ActPeople   Action = "people"   // register, change, unlock operators
	ActKeep     Action = "keep"     // make backups
)

// permissions says which duty allows which action. Duties are apart: whoever
// administers can neither measure nor approve.
var permissions = map[Action][]Duty{
	ActLook:     {Operates, Reviews, Administers},
	ActCorrect:  {Operates, Reviews, Administers},
	ActMeasure:  {Operates},
	ActReview:   {Reviews},
	ActRegister: {Reviews, Administers},
	ActPeople:   {Administers},
	ActKeep:     {Administers},
}

// Allows says whether any of the duties allows an action.
func Allows(duties []Duty, a Action) bool {
	return slices.ContainsFunc(permissions[a], func(d Duty) bool { return slices.Contains(duties, d) })
}

// Person is somebody in the list of operators. Names are never given twice and nobody
// is ever removed: who leaves is disabled.
type Person struct {
	Name         string `json:"operator"` // the identifier, unique for ever
	PrintedName  string `json:"name"`
	Duties       []Duty `json:"roles"`
	Disabled     bool   `json:"disabled,omitempty"`
	SecretSHA256 string `json:"secret_sha256,omitempty"` // of what the secret is checked against; empty: cannot sign in
}

// Member is a person with the state of their sign-in.
type Member struct {
	Person
	Since       Time     `json:"since"`
	Wrong       int      `json:"wrong_secrets,omitempty"` // in a row
	LockedUntil Time     `json:"locked_until,omitzero"`
	Changes     []Change `json:"changes,omitempty"`
}

// PersonBody is the body of the events of the list of operators.
type PersonBody struct {
	Person Person  `json:"person"`
	Was    *Person `json:"was,omitempty"`
	Reason string  `json:"reason,omitempty"`
	Unlock bool    `json:"unlock,omitempty"`
}

// RefusedBody is the body of a SignInRefused event.
type RefusedBody struct {
	Why         string `json:"why"`
	Wrong       int    `json:"wrong_secrets,omitempty"`
	LockedUntil Time   `json:"locked_until,omitzero"`
}

// SignedOutBody is the body of a SignedOut event.
type SignedOutBody struct {
	Why string `json:"why"` // asked, idle or ended
}

func (p Person) check() error {
	if err := CheckName("operator", p.Name); err != nil {
		return err
	}
	bad := func(message, hint string) error { return Refuse("bad-operator", message, hint) }
	if strings.TrimSpace(p.PrintedName) == "" || len(p.PrintedName) > longestPrint {
		return bad(fmt.Sprintf("The printed name of %s is missing or longer than %d bytes.", p.Name, longestPrint), "Enter the name as it stands under a certificate.")
	}
	if len(p.Duties) == 0 {
		return bad(fmt.Sprintf("%s has no role.", p.Name), "Give at least one of operator, reviewer, administrator.")
	}
	for _, d := range p.Duties {
		if d != Operates && d != Reviews && d != Administers {
			return bad(fmt.Sprintf("The role %q is not known.", d), "Use operator, reviewer or administrator.")
		}
	}
	if slices.Contains(p.Duties, Administers) && len(p.Duties) > 1 {
		return bad("An administrator neither measures nor reviews.", "Give the other roles to another person.")
	}
	return nil
}

// Enrol decides on a new person.
func (b *Book) Enrol(p Person) ([]Draft, error) {
	slices.Sort(p.Duties)
	p.Duties = slices.Compact(p.Duties)
	if err := p.check(); err != nil {
		return nil, err
	}
	if b.People[p.Name] != nil {
		return nil, Refuse("operator-exists", fmt.Sprintf("The name %s is given already.", p.Name), "Choose another. Names are never given twice, not even when somebody left.")
	}
	return []Draft{{OperatorAdded, p.Name, PersonBody{Person: p}}}, nil
}

// EnrolFirst decides on the first administrator, while there is nobody yet.
func (b *Book) EnrolFirst(p Person) ([]Draft, error) {
	if len(b.People) > 0 {
		return nil, Refuse("people-exist", "There are people in the list already.", "An administrator among them adds others.")
	}
	p.Duties = []Duty{Administers}
	return b.Enrol(p)
}

// ChangePerson decides on changed duties, a new secret, disabling or enabling.
func (b *Book) ChangePerson(p Person, reason string) ([]Draft, error) {
	slices.Sort(p.Duties)
	p.Duties = slices.Compact(p.Duties)
	reason, err := CheckReason(reason)
	if err != nil {
		return nil, err
	}
	if err := p.check(); err != nil {
		return nil, err
	}
	m, err := b.Member(p.Name)
	if err != nil {
		return nil, err
	}
	was := m.Person
	if was.administers() && !p.administers() && b.administrators() == 1 {
		return nil, Refuse("last-administrator", fmt.Sprintf("%s is the only administrator.", p.Name), "Register another one first.")
	}
	return []Draft{{OperatorChanged, p.Name, PersonBody{Person: p, Was: &was, Reason: reason, Unlock: true}}}, nil
}

func (p Person) administers() bool { return !p.Disabled && slices.Contains(p.Duties, Administers) }

func (b *Book) administrators() int {
	n := 0
	for _, m := range b.People {
		if m.administers() {
			n++
		}
	}
	return n
}

// Member gives somebody by name, or says that there is nobody.
func (b *Book) Member(name string) (*Member, error) {
	if m := b.People[name]; m != nil {
		return m, nil
	}
	return nil, Refuse("unknown-operator", fmt.Sprintf("There is no operator %q in the list.", name), "Check the name, or have an administrator register it.")
}

// Members gives everybody by name.
func (b *Book) Members() []*Member {
	var all []*Member
	for _, m := range b.People {
		all = append(all, m)
	}
	slices.SortFunc(all, func(x, y *Member) int { return cmp.Compare(x.Name, y.Name) })
	return all
}

// MaySignIn says whether a person's secret is to be looked at now at all.
func (m *Member) MaySignIn(now time.Time) error {
	switch {
	case m.Disabled:
		return Refuse("operator-disabled", fmt.Sprintf("%s is disabled.", m.Name), "Have an administrator enable the name, or use your own.")
	case now.Before(m.LockedUntil.Time):
		return Refuse("locked-out", fmt.Sprintf("%s is locked until %s UTC after too many wrong secrets.", m.Name, m.LockedUntil.UTC().Format("15:04")), "Wait, or have an administrator unlock the name. If it was not you, tell them.")
	}
	return nil
}

// WrongSecret decides on what a wrong secret leads to: it is recorded, and the name is
// locked after several in a row.
func (m *Member) WrongSecret(now time.Time, why string) []Draft {
	body := RefusedBody{Why: why, Wrong: m.Wrong + 1}
	if body.Wrong >= lockAfter {
		body.LockedUntil = At(now.Add(lockedFor))
	}
	return []Draft{{SignInRefused, m.Name, body}}
}

// applyPeople changes the list by one event.
func (b *Book) applyPeople(e Event) error {
	switch e.Kind {
	case OperatorAdded, OperatorChanged:
		return with(e, func(body PersonBody) error { return b.applyPerson(e, body) })
	case SignedIn:
		if m := b.People[e.Subject]; m != nil {
			m.Wrong, m.LockedUntil = 0, Time{}
		}
	case SignInRefused:
		return with(e, func(body RefusedBody) error {
			if m := b.People[e.Subject]; m != nil {
				m.Wrong, m.LockedUntil = body.Wrong, body.LockedUntil
				if !body.LockedUntil.IsZero() {
					m.Wrong = 0 // the lock counts for those; after it the count begins again
				}
			}
			return nil
		})
	}
	return nil
}

func (b *Book) applyPerson(e Event, body PersonBody) error {
	m := b.People[body.Person.Name]
	if m == nil {
		m = &Member{Since: e.At}
		b.People[body.Person.Name] = m
	}
	if e.Kind == OperatorChanged {
		m.Changes = append(m.Changes, Change{Event: e.Seq, Kind: e.Kind, Reason: body.Reason, By: e.Actor.Name(), At: e.At})
	}
	m.Person = body.Person
	if body.Unlock {
		m.Wrong, m.LockedUntil = 0, Time{}
	}
	return nil
}
