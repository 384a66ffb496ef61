package bench

import (
	"context"
	"fmt"
	"net/http"
	"time"

	"tenthmark/session"
)

type signInRequest struct {
	Operator string `json:"operator"`
	Secret   string `json:"secret"`
}

// signInAnswer gives programs the token that the page has as a cookie.
type signInAnswer struct {
	Operator string         `json:"operator"`
	Name     string         `json:"name"`
	Roles    []session.Duty `json:"roles"`
	Token    string         `json:"token"`
	IdleS    int            `json:"idle_s"`
}

func (b *Bench) signIn(c *call) error {
	if !b.SignIn {
		return session.Refuse("sign-in-off", "Sign-in is switched off here.", "Name the operator with each call: header X-Operator.")
	}
	q, err := read[signInRequest](c, maxBody)
	if err != nil {
		return err
	}
	if err := b.checkSecret(c, q.Operator, q.Secret, "sign-in"); err != nil {
		return err
	}
	answer := signInAnswer{Operator: q.Operator, IdleS: int(b.Idle.Seconds())}
	_, err = b.Desk.Do(c.Context(), session.Operator(q.Operator), func(book *session.Book) ([]session.Draft, error) {
		m, err := book.Member(q.Operator)
		if err != nil {
			return nil, err
		}
		answer.Name, answer.Roles = m.PrintedName, m.Duties
		return []session.Draft{{Kind: session.SignedIn, Subject: q.Operator, Body: struct{}{}}}, nil
	})
	if err != nil {
		return err
	}
	answer.Token = b.guests.admit(q.Operator)
	b.setCookie(c.w, answer.Token, int(longestSession.Seconds()))
	return c.reply(http.StatusOK, answer)
}

func (b *Bench) setCookie(w http.ResponseWriter, token string, maxAge int) {
	http.SetCookie(w, &http.Cookie{
		Name: cookieName, Value: token, Path: "/", MaxAge: maxAge, HttpOnly: true, Secure: b.TLS, SameSite: http.SameSiteStrictMode,
	})
}

func (b *Bench) signOut(c *call) error {
	if c.who.token != "" {
		b.guests.leave(c.who.token)
		b.setCookie(c.w, "", -1)
		_, err := b.do(c, func(*session.Book) ([]session.Draft, error) {
			return []session.Draft{{Kind: session.SignedOut, Subject: c.who.name, Body: session.SignedOutBody{Why: "asked"}}}, nil
		})
		if err != nil {
			return err
		}
	}
	return c.reply(http.StatusOK, map[string]any{})
}

// checkSecret checks a person's secret. A wrong one is recorded, several lock the name.
// A name that is not in the list gets the same answer after the same time.
func (b *Bench) checkSecret(c *call, name, secret, purpose string) error {
	binding := ""
	err := b.view(c.Context(), func(book *session.Book) error {
		m := book.People[name]
		if m == nil {
			return nil
		}
		binding = m.SecretSHA256
		return m.MaySignIn(b.Now())
	})
	if err != nil {
		return err
	}
	right, err := b.Secrets.Matches(binding, secret)
	if err != nil && session.FaultCode(err) != "secret-altered" {
		return err
	}
	if right {
		return nil
	}
	why := purpose + ": wrong secret"
	if err != nil {
		why = purpose + ": the stored secret is not the one that the ledger knows"
	}
	refusal := b.recordWrong(c, name, why)
	if err != nil && session.FaultCode(refusal) == "wrong-secret" {
		return err
	}
	return refusal
}

// recordWrong records a refusal and gives the answer to it. An unknown name is not
// written down: people type their secret into the wrong field.
func (b *Bench) recordWrong(c *call, name, why string) error {
	var lockedUntil session.Time
	_, err := b.Desk.Do(context.WithoutCancel(c.Context()), session.Daemon, func(book *session.Book) ([]session.Draft, error) {
		m := book.People[name]
		if m == nil {
			if !b.guests.strangerCounts() {
				return nil, nil
			}
			return []session.Draft{{Kind: session.SignInRefused, Body: session.RefusedBody{Why: "a name that is not in the list"}}}, nil
		}
		drafts := m.WrongSecret(b.Now(), why)
		if body, is := drafts[0].Body.(session.RefusedBody); is {
			lockedUntil = body.LockedUntil
		}
		return drafts, nil
	})
	if err != nil {
		return err
	}
	if !lockedUntil.IsZero() {
		b.Log.Warn().Str("operator", name).Time("until", lockedUntil.Time).Msg("name locked after wrong secrets")
		return session.Refuse("locked-out", fmt.Sprintf("Too many wrong secrets: %s is locked until %s UTC.", name, lockedUntil.UTC().Format("15:04")), "Wait, or have an administrator unlock the name. If it was not you, tell them.")
	}
	return session.Refuse("wrong-secret", "Name and secret do not belong together.", "Try again; after several wrong secrets in a row the name is locked for a while.")
}

// strangersEvery bounds how many refusals of unknown names are recorded: one in so
// long stands for all of them, so that nobody can fill the ledger from outside.
const strangersEvery = 10 * time.Second

func (g *guests) strangerCounts() bool {
	g.mu.Lock()
	defer g.mu.Unlock()
	now := g.now()
	if now.Sub(g.stranger) < strangersEvery {
		return false
	}
	g.stranger = now
	return true
}

// me says who the caller is to the daemon.
func (b *Bench) me(c *call) error {
	who, err := b.identify(c.Request, session.ActLook)
	if code := session.FaultCode(err); err != nil && code != "sign-in-needed" && code != "operator-disabled" && code != "unknown-operator" {
		return err
	}
	answer := struct {
		SignIn   bool           `json:"sign_in"`
		Operator string         `json:"operator"` // empty: nobody
		Name     string         `json:"name,omitempty"`
		Roles    []session.Duty `json:"roles"`
		// What a signature of each meaning says, for whoever is about to sign.
		Statements map[string]string `json:"statements"`
	}{b.SignIn, who.name, "", []session.Duty{}, statements()}
	err = b.view(c.Context(), func(book *session.Book) error {
		if m := book.People[who.name]; m != nil {
			answer.Name, answer.Roles = m.PrintedName, m.Duties
		}
		return nil
	})
	if err != nil {
		return err
	}
	return c.reply(http.StatusOK, answer)
}

func statements() map[string]string {
	all := map[string]string{}
	for _, meaning := range []string{session.MeaningPerformed, session.MeaningReviewed, session.MeaningTrail} {
		all[meaning] = session.Statement(meaning)
	}
	return all
}

// memberAnswer is somebody in the list as others see them: without the binding of the
// secret.
type memberAnswer struct {
	Operator    string           `json:"operator"`
	Name        string           `json:"name"`
	Roles       []session.Duty   `json:"roles"`
	Disabled    bool             `json:"disabled"`
	HasSecret   bool             `json:"has_secret"`
	Locked      bool             `json:"locked"`
	LockedUntil session.Time     `json:"locked_until"`
	Wrong       int              `json:"wrong_secrets"`
	Since       session.Time     `json:"since"`
	Changes     []session.Change `json:"changes"`
}

func (b *Bench) describeMember(m *session.Member) memberAnswer {
	return memberAnswer{
		m.Name, m.PrintedName, m.Duties, m.Disabled, m.SecretSHA256 != "", b.Now().Before(m.LockedUntil.Time), m.LockedUntil,
		m.Wrong, m.Since, append([]session.Change{}, m.Changes...),
	}
}

func (b *Bench) operators(c *call) error {
	list := []memberAnswer{}
	err := b.view(c.Context(), func(book *session.Book) error {
		for _, m := range book.Members() {
			list = append(list, b.describeMember(m))
		}
		return nil
	})
	if err != nil {
		return err
	}
	return c.reply(http.StatusOK, map[string]any{"operators": list})
}

// operatorRequest registers or changes somebody. In a change, a secret that is left out
// stays; any change unlocks the name.
type operatorRequest struct {
	Operator string         `json:"operator"`
	Name     string         `json:"name"`
	Roles    []session.Duty `json:"roles"`
	Secret   string         `json:"secret"`
	Disabled bool           `json:"disabled"`
	Reason   string         `json:"reason"`
}

func (q operatorRequest) person() session.Person {
	return session.Person{Name: q.Operator, PrintedName: q.Name, Duties: q.Roles, Disabled: q.Disabled}
}

func (b *Bench) addOperator(c *call) error {
	q, err := read[operatorRequest](c, maxBody)
	if err != nil {
		return err
	}
	p := q.person()
	check := func(book *session.Book) error { _, err := book.Enrol(p); return err }
	if err := b.view(c.Context(), check); err != nil {
		return err
	}
	if p.SecretSHA256, err = b.keepSecret(q.Secret, b.SignIn); err != nil {
		return err
	}
	if _, err := b.do(c, func(book *session.Book) ([]session.Draft, error) { return book.Enrol(p) }); err != nil {
		return err
	}
	return b.replyMember(c, http.StatusCreated, p.Name)
}

// keepSecret stores a secret and gives what binds it; without one there is nothing to
// bind, which is allowed unless one is needed.
func (b *Bench) keepSecret(secret string, needed bool) (string, error) {
	if secret == "" && !needed {
		return "", nil
	}
	if b.Secrets == nil {
		return "", session.Refuse("sign-in-off", "There is no file of secrets here.", "Leave the secret out, or switch sign-in on in the configuration.")
	}
	return b.Secrets.Keep(secret)
}

func (b *Bench) changeOperator(c *call) error {
	q, err := read[operatorRequest](c, maxBody)
	if err != nil {
		return err
	}
	name := c.PathValue("operator")
	if q.Operator != "" && q.Operator != name {
		return session.Refuse("bad-operator", fmt.Sprintf("The entry names %s, the path %s.", q.Operator, name), "A name is kept for ever.")
	}
	q.Operator = name
	p := q.person()
	err = b.view(c.Context(), func(book *session.Book) error {
		if _, err := book.ChangePerson(p, q.Reason); err != nil {
			return err
		}
		p.SecretSHA256 = book.People[name].SecretSHA256
		return nil
	})
	if err != nil {
		return err
	}
	if q.Secret != "" {
		if p.SecretSHA256, err = b.keepSecret(q.Secret, true); err != nil {
			return err
		}
	}
	if _, err := b.do(c, func(book *session.Book) ([]session.Draft, error) { return book.ChangePerson(p, q.Reason) }); err != nil {
		return err
	}
	b.guests.leaveAll(name)
	return b.replyMember(c, http.StatusOK, name)
}

func (b *Bench) replyMember(c *call, status int, name string) error {
	var answer memberAnswer
	err := b.view(c.Context(), func(book *session.Book) error {
		m, err := book.Member(name)
		if err == nil {
			answer = b.describeMember(m)
		}
		return err
	})
	if err != nil {
		return err
	}
	return c.reply(status, answer)
}
