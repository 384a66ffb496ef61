package bench

import (
	"bytes"
	"fmt"
	"net/http"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"tenthmark/session"
	"tenthmark/session/desk"
)

const headSecret, annaSecret, okaforSecret = "the head's own words", "anna's own words", "okafor's own words"

// staffed gives a laboratory where people sign in: head administers, anna operates,
// okafor reviews.
func staffed(t *testing.T) *laboratory {
	t.Helper()
	secrets, err := desk.OpenSecrets(filepath.Join(t.TempDir(), "secrets"), desk.Cost{Passes: 1, MemoryKiB: 64, Lanes: 1})
	if err != nil {
		t.Fatal(err)
	}
	l := open(t, func(o *Options) { o.SignIn, o.Secrets = true, secrets })
	l.operator = ""
	if err := l.desk.EnrolFirst(t.Context(), secrets, session.Person{Name: "head", PrintedName: "H. Ead"}, headSecret); err != nil {
		t.Fatal(err)
	}
	l.signIn("head", headSecret)
	l.must(201, "POST", "/api/v1/operators", fmt.Sprintf(`{"operator":"anna","name":"Anna Lindqvist","roles":["operator"],"secret":%q}`, annaSecret))
	l.must(201, "POST", "/api/v1/operators", fmt.Sprintf(`{"operator":"okafor","name":"M. Okafor","roles":["reviewer"],"secret":%q}`, okaforSecret))
	l.must(201, "POST", "/api/v1/burettes", burette50)
	return l
}

func (l *laboratory) signIn(name, secret string) answer {
	l.t.Helper()
	l.token = ""
	a := l.must(200, "POST", "/api/v1/sign-in", fmt.Sprintf(`{"operator":%q,"secret":%q}`, name, secret))
	l.token = into[signInAnswer](l.t, a).Token
	return a
}

func (l *laboratory) refused(status int, code, method, path, body string) {
	l.t.Helper()
	if a := l.call(method, path, body); a.status != status || a.code() != code {
		l.t.Errorf("%s %s %s: %d %s, want %d %s", method, path, body, a.status, a.text, status, code)
	}
}

func TestASignedRunFromSignInToReview(t *testing.T) {
	l := staffed(t)
	l.refused(403, "not-allowed", "POST", "/api/v1/runs", openBody(shortPlan)) // head administers
	l.signIn("anna", annaSecret)
	run := "/api/v1/runs/" + into[runView](t, l.must(201, "POST", "/api/v1/runs", openBody(shortPlan))).Run.ID
	l.whole(run)
	l.refused(401, "wrong-secret", "POST", run+"/finish", `{"meaning":"performed"}`)
	l.refused(401, "wrong-secret", "POST", run+"/finish", `{"meaning":"performed","secret":"not anna's"}`)
	v := into[session.Document](t, l.must(200, "POST", run+"/finish", fmt.Sprintf(`{"meaning":"performed","secret":%q}`, annaSecret)))
	if s := v.Signatures[0]; s.Name != "Anna Lindqvist" || !s.SignIn || s.Statement != session.Statement("performed") || len(s.RecordSHA256) != 64 {
		t.Errorf("signature %+v", s)
	}
	l.refused(403, "not-allowed", "POST", run+"/review", fmt.Sprintf(`{"meaning":"reviewed","secret":%q}`, annaSecret))
	l.signIn("okafor", okaforSecret)
	l.refused(403, "not-allowed", "POST", run+"/reopen", `{"reason":"r"}`)
	v = into[session.Document](t, l.must(200, "POST", run+"/review", fmt.Sprintf(`{"meaning":"reviewed","secret":%q}`, okaforSecret)))
	if v.Run.PerformedBy != "Anna Lindqvist" || v.Run.ReviewedBy != "M. Okafor" {
		t.Errorf("performed by %q, reviewed by %q", v.Run.PerformedBy, v.Run.ReviewedBy)
	}
	for _, line := range l.record.all() {
		for _, secret := range []string{headSecret, annaSecret, okaforSecret, "argon2"} {
			if bytes.Contains(line, []byte(secret)) {
				t.Errorf("the ledger holds a secret or its hash: %s", line)
			}
		}
	}
}

// The matrix of calls and roles, from the table of routes itself.
func TestEveryCallAsksForItsDuty(t *testing.T) {
	l := staffed(t)
	people := map[string]struct {
		secret string
		duty   session.Duty
	}{"head": {headSecret, session.Administers}, "anna": {annaSecret, session.Operates}, "okafor": {okaforSecret, session.Reviews}}
	replace := strings.NewReplacer("{run}", "none", "{burette}", "B-07", "{station}", "bench-7", "{operator}", "nobody", "{name}", "run.json")
	for _, rt := range routes {
		if rt.act == "" || rt.path == api+"/stream" || rt.path == api+"/sign-out" {
			continue
		}
		l.token = ""
		l.refused(401, "sign-in-needed", rt.method, replace.Replace(rt.path), `{}`)
	}
	for name, p := range people {
		l.signIn(name, p.secret)
		for _, rt := range routes {
			if rt.act == "" || rt.path == api+"/stream" || rt.path == api+"/sign-out" {
				continue
			}
			a := l.call(rt.method, replace.Replace(rt.path), `{}`)
			if allowed := session.Allows([]session.Duty{p.duty}, rt.act); allowed != (a.code() != "not-allowed") {
				t.Errorf("%s %s by %s, %s: %d %s", rt.method, rt.path, name, p.duty, a.status, a.code())
			}
		}
	}
}

func TestWrongSecretsAreRecordedAndLockTheName(t *testing.T) {
	l := staffed(t)
	l.token = ""
	wrong := `{"operator":"anna","secret":"something else"}`
	for range 4 {
		l.refused(401, "wrong-secret", "POST", "/api/v1/sign-in", wrong)
	}
	l.refused(429, "locked-out", "POST", "/api/v1/sign-in", wrong)
	before := len(l.record.all())
	if last := l.record.all()[before-1]; !bytes.Contains(last, []byte(`"sign-in.refused"`)) || !bytes.Contains(last, []byte("locked_until")) || bytes.Contains(last, []byte("something else")) {
		t.Errorf("recorded %s", last)
	}
	l.refused(429, "locked-out", "POST", "/api/v1/sign-in", fmt.Sprintf(`{"operator":"anna","secret":%q}`, annaSecret))
	if now := len(l.record.all()); now != before {
		t.Errorf("%d events while the name is locked", now-before)
	}
	l.signIn("head", headSecret)
	if a := l.must(200, "GET", "/api/v1/operators", ""); !bytes.Contains(a.text, []byte(`"locked":true`)) {
		t.Errorf("the lock is not to be seen: %s", a.text)
	}
	l.must(200, "PUT", "/api/v1/operators/anna", `{"name":"Anna Lindqvist","roles":["operator"],"reason":"unlock"}`)
	l.signIn("anna", annaSecret)
}

// A name that is not in the list gets the answer of a wrong secret, is not written down
// (people type their secret into the wrong field), and cannot fill the ledger.
func TestUnknownNamesTellNothing(t *testing.T) {
	l := staffed(t)
	l.token = ""
	before := len(l.record.all())
	for range 5 {
		l.refused(401, "wrong-secret", "POST", "/api/v1/sign-in", `{"operator":"my secret word","secret":"x"}`)
	}
	lines := l.record.all()[before:]
	if len(lines) != 1 || bytes.Contains(lines[0], []byte("my secret word")) {
		t.Errorf("recorded %s", lines)
	}
}

func TestASessionEnds(t *testing.T) {
	l := staffed(t)
	a := l.signIn("anna", annaSecret)
	cookie := a.header.Get("Set-Cookie")
	for _, want := range []string{"HttpOnly", "SameSite=Strict", "Path=/"} {
		if !strings.Contains(cookie, want) {
			t.Errorf("cookie %q lacks %s", cookie, want)
		}
	}
	token := l.token
	l.token = ""
	byCookie := func(r *http.Request) { r.AddCookie(&http.Cookie{Name: cookieName, Value: token}) }
	if a := l.call("GET", "/api/v1/runs", "", byCookie); a.status != 200 {
		t.Errorf("with the cookie: %d %s", a.status, a.text)
	}
	l.token = token
	l.now.pass(14 * time.Minute)
	l.must(200, "GET", "/api/v1/runs", "")
	l.now.pass(14 * time.Minute)
	l.must(200, "GET", "/api/v1/runs", "")
	l.now.pass(16 * time.Minute)
	before := len(l.record.all())
	l.refused(401, "sign-in-needed", "GET", "/api/v1/runs", "")
	if lines := l.record.all()[before:]; len(lines) != 1 || !bytes.Contains(lines[0], []byte(`"idle"`)) {
		t.Errorf("the end was recorded as %s", lines)
	}
	l.signIn("anna", annaSecret)
	l.must(200, "POST", "/api/v1/sign-out", "")
	l.refused(401, "sign-in-needed", "GET", "/api/v1/runs", "")
	l.token = "made up"
	l.refused(401, "sign-in-needed", "GET", "/api/v1/runs", "")
	if a := l.must(200, "GET", "/api/v1/me", ""); !bytes.Contains(a.text, []byte(`"operator":""`)) {
		t.Errorf("nobody is %s", a.text)
	}
}

func TestWhoeverIsChangedSignsInAgain(t *testing.T) {
	l := staffed(t)
	l.signIn("anna", annaSecret)
	anna := l.token
	l.signIn("head", headSecret)
	l.must(200, "PUT", "/api/v1/operators/anna", `{"name":"Anna Lindqvist","roles":["operator"],"reason":"left","disabled":true}`)
	head := l.token
	l.token = anna
	l.refused(401, "sign-in-needed", "GET", "/api/v1/runs", "")
	l.token = ""
	l.refused(403, "operator-disabled", "POST", "/api/v1/sign-in", fmt.Sprintf(`{"operator":"anna","secret":%q}`, annaSecret))
	l.token = head
	l.refused(409, "operator-exists", "POST", "/api/v1/operators", `{"operator":"anna","name":"Another Anna","roles":["operator"],"secret":"long enough"}`)
	l.must(200, "PUT", "/api/v1/operators/anna", `{"name":"Anna Lindqvist","roles":["operator"],"reason":"is back","secret":"other words now"}`)
	l.signIn("anna", "other words now")
	l.signIn("head", headSecret)
	l.refused(409, "last-administrator", "PUT", "/api/v1/operators/head", `{"name":"H. Ead","roles":["operator"],"reason":"r"}`)
	l.refused(422, "bad-secret", "POST", "/api/v1/operators", `{"operator":"bo","name":"Bo","roles":["operator"]}`)
}

func TestADisabledNameActsNowhere(t *testing.T) {
	l := open(t, nil)
	l.must(201, "POST", "/api/v1/operators", `{"operator":"bo","name":"Bo","roles":["operator"]}`)
	l.must(200, "PUT", "/api/v1/operators/bo", `{"name":"Bo","roles":["operator"],"disabled":true,"reason":"left"}`)
	l.operator = "bo"
	l.refused(403, "operator-disabled", "POST", "/api/v1/burettes", burette50)
}

func TestSignInNeedsSecrets(t *testing.T) {
	l := open(t, nil)
	o := l.bench.Options
	o.SignIn = true
	if _, err := New(o); err == nil {
		t.Error("a bench with sign-in and without secrets was made")
	}
	if _, err := New(Options{}); err == nil {
		t.Error("a bench without anything was made")
	}
}
