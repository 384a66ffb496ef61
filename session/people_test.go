package session

import (
	"encoding/json"
	"slices"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"
)

// The whole matrix of duties and actions: whoever administers neither measures nor
// approves, and nobody but them changes the list (21 CFR 11.10(g), EU GMP Annex 11, 12).
func TestDutiesAndActions(t *testing.T) {
	actions := []Action{ActLook, ActCorrect, ActMeasure, ActReview, ActRegister, ActPeople, ActKeep}
	matrix := map[Duty]string{
		Operates:    "look correct measure",
		Reviews:     "look correct review register",
		Administers: "look correct register people keep",
	}
	for duty, allowed := range matrix {
		for _, a := range actions {
			if want, got := slices.Contains(strings.Fields(allowed), string(a)), Allows([]Duty{duty}, a); got != want {
				t.Errorf("%s may %s: %v, want %v", duty, a, got, want)
			}
		}
	}
	if len(permissions) != len(actions) {
		t.Errorf("%d actions have permissions, the matrix has %d", len(permissions), len(actions))
	}
	if Allows(nil, ActLook) || Allows([]Duty{"chief"}, ActLook) || Allows([]Duty{Operates}, "fly") {
		t.Error("somebody without a duty, or an action that is none, is allowed")
	}
}

// ledgerOf is a book with the lines that made it, for replays.
type ledgerOf struct {
	t interface {
		Helper()
		Fatalf(string, ...any)
	}
	book  *Book
	lines [][]byte
}

func (l *ledgerOf) record(drafts []Draft, err error) {
	l.t.Helper()
	if err != nil {
		l.t.Fatalf("refused: %v", err)
	}
	for _, d := range drafts {
		body, err := json.Marshal(d.Body)
		if err != nil {
			l.t.Fatalf("%v", err)
		}
		line, err := Event{Seq: l.book.Next, At: At(time.Unix(int64(len(l.lines)), 0)), Actor: Daemon, Kind: d.Kind, Subject: d.Subject, Body: body}.Encode()
		if err != nil {
			l.t.Fatalf("%v", err)
		}
		if err := l.book.Apply(line); err != nil {
			l.t.Fatalf("%v", err)
		}
		l.lines = append(l.lines, line)
	}
}

func somebody(name string, duties ...Duty) Person {
	return Person{Name: name, PrintedName: "N. " + name, Duties: duties, SecretSHA256: "00"}
}

func TestNamesAreNeverGivenTwice(t *testing.T) {
	l := &ledgerOf{t, NewBook(), nil}
	l.record(l.book.EnrolFirst(somebody("admin")))
	l.record(l.book.Enrol(somebody("anna", Operates)))
	gone := somebody("anna", Operates)
	gone.Disabled = true
	l.record(l.book.ChangePerson(gone, "left"))
	if _, err := l.book.Enrol(somebody("anna", Operates)); FaultCode(err) != "operator-exists" {
		t.Errorf("a disabled person's name is given again: %v", err)
	}
	if err := l.book.People["anna"].MaySignIn(time.Unix(0, 0)); FaultCode(err) != "operator-disabled" {
		t.Errorf("a disabled person signs in: %v", err)
	}
	if _, err := l.book.EnrolFirst(somebody("other")); FaultCode(err) != "people-exist" {
		t.Errorf("a second first administrator: %v", err)
	}
}

func TestTheListOfOperatorsRefuses(t *testing.T) {
	l := &ledgerOf{t, NewBook(), nil}
	l.record(l.book.EnrolFirst(somebody("admin")))
	tests := []struct {
		name, want string
		person     Person
		reason     string
	}{
		{"no reason", "reason-missing", somebody("admin", Administers), "  "},
		{"the last administrator resigns", "last-administrator", somebody("admin", Operates), "r"},
		{"the last administrator is disabled", "last-administrator", Person{Name: "admin", PrintedName: "A", Duties: []Duty{Administers}, Disabled: true}, "r"},
		{"duties that must be apart", "bad-operator", somebody("admin", Administers, Reviews), "r"},
		{"no printed name", "bad-operator", Person{Name: "admin", Duties: []Duty{Administers}}, "r"},
		{"nobody of that name", "unknown-operator", somebody("bob", Operates), "r"},
	}
	for _, test := range tests {
		if _, err := l.book.ChangePerson(test.person, test.reason); FaultCode(err) != test.want {
			t.Errorf("%s: %v, want %s", test.name, err, test.want)
		}
	}
	l.record(l.book.Enrol(somebody("second", Administers)))
	l.record(l.book.ChangePerson(somebody("admin", Operates), "new work"))
}

func TestWrongSecretsLockTheNameForAWhile(t *testing.T) {
	l := &ledgerOf{t, NewBook(), nil}
	l.record(l.book.Enrol(somebody("anna", Operates)))
	now := time.Date(2026, 12, 1, 9, 0, 0, 0, time.UTC)
	anna := l.book.People["anna"]
	for i := 1; i <= lockAfter; i++ {
		if err := anna.MaySignIn(now); err != nil {
			t.Fatalf("locked before wrong secret %d: %v", i, err)
		}
		l.record(anna.WrongSecret(now, "sign-in"), nil)
	}
	if err := anna.MaySignIn(now.Add(lockedFor - time.Second)); FaultCode(err) != "locked-out" {
		t.Errorf("after %d wrong secrets: %v", lockAfter, err)
	}
	if err := anna.MaySignIn(now.Add(lockedFor)); err != nil {
		t.Errorf("after the lock: %v", err)
	}
	l.record(anna.WrongSecret(now.Add(lockedFor), "sign-in"), nil)
	if err := anna.MaySignIn(now.Add(lockedFor)); err != nil || anna.Wrong != 1 {
		t.Errorf("the count begins again after a lock: %d, %v", anna.Wrong, err)
	}
	for range lockAfter {
		l.record(anna.WrongSecret(now.Add(lockedFor), "sign-in"), nil)
	}
	l.record(l.book.ChangePerson(anna.Person, "unlock"))
	if err := anna.MaySignIn(now.Add(lockedFor)); err != nil {
		t.Errorf("unlocked by an administrator: %v", err)
	}
}

// However people come and go, a replay gives the same list, somebody administers it once
// anybody did, and nobody disappears.
func TestThePeopleAreAFunctionOfTheEvents(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		l := &ledgerOf{rt, NewBook(), nil}
		l.record(l.book.EnrolFirst(somebody("a")))
		names := rapid.SampledFrom([]string{"a", "b", "c", "d"})
		duties := rapid.SampledFrom([][]Duty{{Operates}, {Reviews}, {Administers}, {Operates, Reviews}, {Administers, Operates}, nil})
		rt.Repeat(map[string]func(*rapid.T){
			"enrol": func(rt *rapid.T) {
				if drafts, err := l.book.Enrol(somebody(names.Draw(rt, "name"), duties.Draw(rt, "duties")...)); err == nil {
					l.record(drafts, nil)
				}
			},
			"change": func(rt *rapid.T) {
				p := somebody(names.Draw(rt, "name"), duties.Draw(rt, "duties")...)
				p.Disabled = rapid.Bool().Draw(rt, "disabled")
				if drafts, err := l.book.ChangePerson(p, "r"); err == nil {
					l.record(drafts, nil)
				}
			},
			"wrong": func(rt *rapid.T) {
				if m := l.book.People[names.Draw(rt, "name")]; m != nil {
					l.record(m.WrongSecret(time.Unix(1000, 0), "sign-in"), nil)
				}
			},
			"": func(rt *rapid.T) {
				if l.book.administrators() == 0 {
					rt.Fatal("nobody administers the list any more")
				}
				again := NewBook()
				for _, line := range l.lines {
					if err := again.Apply(line); err != nil {
						rt.Fatal(err)
					}
				}
				was, is := mustJSON(rt, l.book.People), mustJSON(rt, again.People)
				if was != is {
					rt.Fatalf("replayed\n%s\nwas\n%s", is, was)
				}
			},
		})
	})
}

func mustJSON(t *rapid.T, v any) string {
	b, err := json.Marshal(v)
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}
