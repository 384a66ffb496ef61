package bench

import (
	"crypto/rand"
	"crypto/sha256"
	"encoding/base64"
	"fmt"
	"net/http"
	"strings"
	"sync"
	"time"

	"tenthmark/session"
)

// person is who makes a call. The zero person is nobody.
type person struct {
	name  string
	token string // of the session; empty without sign-in
}

func (p person) actor() session.Actor { return session.Operator(p.name) }

// Header that names who acts where sign-in is off, and the cookie where it is on.
const (
	operatorHeader = "X-Operator"
	cookieName     = "tenthmark_session"
)

// longestSession: after this somebody signs in again, however busy they were.
const longestSession = 12 * time.Hour

// identify finds out who makes a call and whether they may do it. Where sign-in is off
// the name is taken at its word and the record says so; a name that is in the list and
// disabled acts nowhere.
func (b *Bench) identify(r *http.Request, act session.Action) (person, error) {
	if act == "" {
		return person{}, nil
	}
	if b.SignIn {
		return b.identifyGuest(r, act)
	}
	name := strings.TrimSpace(r.Header.Get(operatorHeader))
	if name == "" {
		if act == session.ActLook || act == session.ActCorrect {
			return person{}, nil
		}
		return person{}, session.Refuse("who-acts", "It is not said who acts.", "Name the operator: on the page in the field at the top, in a call with the header X-Operator.")
	}
	if err := session.CheckName("operator", name); err != nil {
		return person{}, err
	}
	return person{name: name}, b.view(r.Context(), func(book *session.Book) error {
		if m := book.People[name]; m != nil && m.Disabled {
			return session.Refuse("operator-disabled", fmt.Sprintf("%s is disabled.", name), "Use your own name.")
		}
		return nil
	})
}

func (b *Bench) identifyGuest(r *http.Request, act session.Action) (person, error) {
	token := tokenOf(r)
	name, ended := b.guests.who(token)
	if ended {
		b.recordEnd(r, name)
	}
	if name == "" || ended {
		return person{}, session.Refuse("sign-in-needed", "You are not signed in.", "Sign in with your own name and secret; a session ends after a time without use.")
	}
	return person{name, token}, b.view(r.Context(), func(book *session.Book) error {
		m, err := book.Member(name)
		switch {
		case err != nil:
			return err
		case m.Disabled:
			return session.Refuse("operator-disabled", fmt.Sprintf("%s is disabled.", name), "Ask an administrator.")
		case !session.Allows(m.Duties, act):
			return notAllowed(m, act)
		}
		return nil
	})
}

func notAllowed(m *session.Member, act session.Action) error {
	duties := make([]string, len(m.Duties))
	for i, d := range m.Duties {
		duties[i] = string(d)
	}
	return session.Refuse("not-allowed", fmt.Sprintf("%s is registered as %s; that does not include to %s.", m.Name, strings.Join(duties, " and "), actionWords[act]), "Have somebody do it whose role it is.")
}

var actionWords = map[session.Action]string{
	session.ActLook: "read", session.ActCorrect: "correct titrations", session.ActMeasure: "calibrate", session.ActReview: "review",
	session.ActRegister: "change the register of burettes", session.ActPeople: "change the list of operators", session.ActKeep: "make backups",
}

// tokenOf takes a session's token from the header that programs use or from the cookie.
func tokenOf(r *http.Request) string {
	if token, found := strings.CutPrefix(r.Header.Get("Authorization"), "Bearer "); found {
		return token
	}
	if c, err := r.Cookie(cookieName); err == nil {
		return c.Value
	}
	return ""
}

// recordEnd writes down that a session ended for want of use.
func (b *Bench) recordEnd(r *http.Request, name string) {
	_, err := b.Desk.Do(r.Context(), session.Daemon, func(*session.Book) ([]session.Draft, error) {
		return []session.Draft{{Kind: session.SignedOut, Subject: name, Body: session.SignedOutBody{Why: "idle"}}}, nil
	})
	if err != nil {
		b.Log.Warn().Err(err).Str("operator", name).Msg("end of session not recorded")
	}
}

// guests is who is signed in. It lives in memory only: after a restart everybody signs
// in again.
type guests struct {
	idle time.Duration
	now  func() time.Time
	mu   sync.Mutex // guards the fields below
	seat map[[32]byte]*guest

	stranger time.Time // when a name that is not in the list was last written down
}

type guest struct {
	name        string
	since, last time.Time
}

func newGuests(idle time.Duration, now func() time.Time) *guests {
	return &guests{idle: idle, now: now, seat: map[[32]byte]*guest{}}
}

// admit starts a session and gives its token.
func (g *guests) admit(name string) string {
	var raw [32]byte
	_, _ = rand.Read(raw[:]) // never fails: crypto/rand ends the program instead
	token := base64.RawURLEncoding.EncodeToString(raw[:])
	now := g.now()
	g.mu.Lock()
	defer g.mu.Unlock()
	g.seat[sha256.Sum256([]byte(token))] = &guest{name, now, now}
	return token
}

// who gives the name behind a token and notes that it was used. ended says that the
// session was there and is over.
func (g *guests) who(token string) (name string, ended bool) {
	key := sha256.Sum256([]byte(token))
	now := g.now()
	g.mu.Lock()
	defer g.mu.Unlock()
	seat := g.seat[key]
	if seat == nil {
		return "", false
	}
	if now.Sub(seat.last) > g.idle || now.Sub(seat.since) > longestSession {
		delete(g.seat, key)
		return seat.name, true
	}
	seat.last = now
	return seat.name, false
}

// leave ends one session.
func (g *guests) leave(token string) {
	g.mu.Lock()
	defer g.mu.Unlock()
	delete(g.seat, sha256.Sum256([]byte(token)))
}

// leaveAll ends every session of a person: their secret or duties changed.
func (g *guests) leaveAll(name string) {
	g.mu.Lock()
	defer g.mu.Unlock()
	for key, seat := range g.seat {
		if seat.name == name {
			delete(g.seat, key)
		}
	}
}
