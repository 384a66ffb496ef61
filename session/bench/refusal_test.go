package bench

import (
	"fmt"
	"net/http"
	"strings"
	"testing"

	"tenthmark/session"
)

// facts gives the numbers of a run's entered facts by what they are.
func (l *laboratory) firstReading(run string) int64 { return l.look(run).Deliveries[0].Start.Fact }

// Whatever is refused says why and what to do, with a status that programs understand,
// and leaves no trace in the ledger.
func TestRefusals(t *testing.T) {
	l, run := opened(t, shortPlan)
	l.must(200, "POST", run+"/facts", `{"reading":"0.00"}`)
	l.settle("45.1000")
	weight := l.look(run).Deliveries[0].Before.Fact
	reading := l.firstReading(run)
	runs := "/api/v1/runs"
	tests := []struct {
		name, method, path, body string
		status                   int
		code                     string
	}{
		{"reading outside the scale", "POST", run + "/facts", `{"reading":"50.01"}`, 422, "reading-outside-scale"},
		{"reading below zero", "POST", run + "/facts", `{"reading":"-0.01"}`, 422, "reading-outside-scale"},
		{"reading up the scale", "POST", run + "/facts", `{"reading":"0.00"}`, 422, "reading-order"},
		{"text that is no number", "POST", run + "/facts", `{"reading":"ten"}`, 422, "bad-number"},
		{"infinity", "POST", run + "/facts", `{"reading":"inf"}`, 422, "bad-number"},
		{"an exponent", "POST", run + "/facts", `{"reading":1e1}`, 422, "bad-number"},
		{"two decimal points", "POST", run + "/facts", `{"reading":"1.0.2"}`, 422, "bad-number"},
		{"too many digits", "POST", run + "/facts", `{"reading":"1.0000000000000000000001"}`, 422, "bad-number"},
		{"hot water", "POST", run + "/facts", `{"water_temp_C":"80"}`, 422, "water-temp-out-of-range"},
		{"one value good, one bad: none is recorded", "POST", run + "/facts", `{"reading":"10.02","water_temp_C":"2"}`, 422, "water-temp-out-of-range"},
		{"pressure in another unit", "POST", run + "/facts", `{"ambient":{"air_temp_C":"21","pressure_hPa":"760","humidity_pct":"450"}}`, 422, "ambient-out-of-range"},
		{"half an ambient", "POST", run + "/facts", `{"ambient":{"air_temp_C":"21"}}`, 422, "ambient-out-of-range"},
		{"nothing entered", "POST", run + "/facts", `{}`, 422, "nothing-entered"},
		{"meant for another delivery", "POST", run + "/facts", `{"reading":"10.02","delivery":2}`, 409, "not-awaited"},
		{"meant for another role", "POST", run + "/facts", `{"reading":"10.02","role":"start"}`, 409, "not-awaited"},
		{"unknown field", "POST", run + "/facts", `{"readng":"10.02"}`, 400, "bad-json"},
		{"a time of one's own", "POST", run + "/facts", `{"reading":"10.02","at":"1999-01-01T00:00:00Z"}`, 400, "bad-json"},
		{"wrong type", "POST", run + "/facts", `{"delivery":"one"}`, 400, "bad-json"},
		{"an array", "POST", run + "/facts", `[]`, 400, "bad-json"},
		{"cut off", "POST", run + "/facts", `{"reading":"10.0`, 400, "bad-json"},
		{"two objects", "POST", run + "/facts", `{"reading":"10.02"}{"reading":"10.03"}`, 400, "bad-json"},
		{"oversize body", "POST", run + "/facts", `{"reading":"` + strings.Repeat("1", maxBody) + `"}`, 413, "too-large"},
		{"unknown run", "POST", runs + "/B-99-20261201-1/facts", `{"reading":"1"}`, 404, "unknown-run"},
		{"unknown run looked at", "GET", runs + "/B-99-20261201-1", ``, 404, "unknown-run"},
		{"second run on a busy station", "POST", runs, openBody(shortPlan), 409, "station-busy"},
		{"unknown burette", "POST", runs, `{"burette":"B-99","station":"bench-1"}`, 404, "unknown-burette"},
		{"unknown station", "POST", runs, `{"burette":"B-07","station":"bench-9"}`, 404, "unknown-station"},
		{"a balance that is not there", "POST", runs, `{"burette":"B-07","station":"bench-2"}`, 409, "station-offline"},
		{"points that do not rise", "POST", runs, `{"burette":"B-07","station":"bench-2","plan":{"points_mL":["20","10"]}}`, 422, "bad-plan"},
		{"an unknown pattern", "POST", runs, `{"burette":"B-07","station":"bench-2","plan":{"reading_pattern":"zigzag"}}`, 422, "bad-plan"},
		{"nothing to supersede", "POST", runs, `{"burette":"B-07","station":"bench-2","supersedes":"B-07-20250101-1"}`, 409, "cannot-supersede"},
		{"amend without a reason", "POST", run + "/amend", fmt.Sprintf(`{"fact":%d,"value":"0.02","reason":" \t "}`, reading), 422, "reason-missing"},
		{"amend a weight", "POST", run + "/amend", fmt.Sprintf(`{"fact":%d,"value":"45.2","reason":"r"}`, weight), 422, "weight-not-amendable"},
		{"amend what is not there", "POST", run + "/amend", `{"fact":9999,"value":"1","reason":"r"}`, 422, "no-such-fact"},
		{"amend outside the scale", "POST", run + "/amend", fmt.Sprintf(`{"fact":%d,"value":"77","reason":"r"}`, reading), 422, "reading-outside-scale"},
		{"amend a field that is not there", "POST", run + "/amend", fmt.Sprintf(`{"fact":%d,"field":"colour","value":"1","reason":"r"}`, reading), 422, "bad-field"},
		{"void without a reason", "POST", run + "/void", `{"delivery":1,"reason":""}`, 422, "reason-missing"},
		{"a reason that is a book", "POST", run + "/void", `{"delivery":1,"reason":"` + strings.Repeat("x", 501) + `"}`, 422, "reason-too-long"},
		{"void what is not there", "POST", run + "/void", `{"delivery":77,"reason":"r"}`, 422, "no-such-delivery"},
		{"void what has not begun", "POST", run + "/void", `{"delivery":3,"reason":"r"}`, 409, "nothing-to-void"},
		{"answer without a doubt", "POST", run + "/answer", `{"delivery":1,"reason":"r"}`, 409, "no-doubt"},
		{"take what was not seen", "POST", run + "/take", `{"seen":9999,"reason":"r"}`, 422, "no-such-weight"},
		{"take without a reason", "POST", run + "/take", `{"seen":1}`, 422, "reason-missing"},
		{"resume what is open", "POST", run + "/resume", `{"reason":"r"}`, 409, "wrong-state"},
		{"suspend without a reason", "POST", run + "/suspend", `{}`, 422, "reason-missing"},
		{"reopen what is open", "POST", run + "/reopen", `{"reason":"r"}`, 409, "wrong-state"},
		{"finish too early", "POST", run + "/finish", `{"meaning":"performed"}`, 409, "run-incomplete"},
		{"sign another meaning", "POST", run + "/finish", `{"meaning":"reviewed"}`, 422, "bad-meaning"},
		{"review too early", "POST", run + "/review", `{"meaning":"reviewed"}`, 409, "wrong-state"},
		{"review the changes too early", "POST", run + "/trail-review", `{"meaning":"trail-reviewed"}`, 409, "wrong-state"},
		{"a name given twice", "POST", "/api/v1/burettes", burette50, 409, "burette-exists"},
		{"a name that is a path", "POST", "/api/v1/burettes", `{"burette":"../x","capacity_mL":50,"subdivision_mL":0.1,"class":"A"}`, 422, "bad-name"},
		{"no class", "POST", "/api/v1/burettes", `{"burette":"B-08","capacity_mL":50,"subdivision_mL":0.1}`, 422, "bad-burette"},
		{"change without a reason", "PUT", "/api/v1/burettes/B-07", burette50, 422, "reason-missing"},
		{"rename", "PUT", "/api/v1/burettes/B-08", burette50, 422, "bad-burette"},
		{"change what is not there", "PUT", "/api/v1/burettes/B-09", `{"capacity_mL":50,"subdivision_mL":0.1,"class":"A","reason":"r"}`, 404, "unknown-burette"},
		{"a burette that is not there", "GET", "/api/v1/burettes/B-09", ``, 404, "unknown-burette"},
		{"no curve yet", "GET", "/api/v1/curves/B-07", ``, 404, "no-curve-in-force"},
		{"no such day", "GET", "/api/v1/curves/B-07?at=yesterday", ``, 422, "bad-time"},
		{"curve of an unknown burette", "POST", "/api/v1/curves/B-09/titrations", `{"rows":[{"start":"0","end":"1"}]}`, 404, "unknown-burette"},
		{"an empty table", "POST", "/api/v1/curves/B-07/titrations", `{"rows":[]}`, 422, "bad-table"},
		{"no checkpoint yet", "GET", "/api/v1/ledger/checkpoint", ``, 404, "no-checkpoint"},
		{"no backup here", "POST", "/api/v1/ledger/backup", `{"file":"x"}`, 501, "no-backup"},
		{"no document yet", "GET", run + "/documents/run.json", ``, 404, "no-document"},
		{"a limit that is none", "GET", "/api/v1/runs?limit=many", ``, 400, "bad-query"},
		{"a page after nothing", "GET", "/api/v1/runs?after=B-1", ``, 400, "bad-query"},
		{"an event number that is none", "GET", "/api/v1/stream?last_event_id=x", ``, 400, "bad-query"},
		{"wrong method", "DELETE", run, ``, 405, "wrong-method"},
		{"wrong method for facts", "PUT", run + "/facts", `{"reading":"1"}`, 405, "wrong-method"},
		{"no such call", "GET", "/api/v2/runs", ``, 404, "no-such-call"},
		{"no such page", "GET", "/page.go", ``, 404, "unknown-page"},
		{"post to a page", "POST", "/", `{}`, 405, "wrong-method"},
		{"sign in where it is off", "POST", "/api/v1/sign-in", `{"operator":"a","secret":"b"}`, 422, "sign-in-off"},
		{"tare a balance that is not there", "POST", "/api/v1/stations/bench-2/tare", ``, 409, "station-offline"},
		{"tare no station", "POST", "/api/v1/stations/bench-7/tare", ``, 404, "unknown-station"},
		{"no printed name", "POST", "/api/v1/operators", `{"operator":"x","roles":["operator"]}`, 422, "bad-operator"},
		{"an unknown role", "POST", "/api/v1/operators", `{"operator":"x","name":"X","roles":["chief"]}`, 422, "bad-operator"},
		{"duties that must be apart", "POST", "/api/v1/operators", `{"operator":"x","name":"X","roles":["operator","administrator"]}`, 422, "bad-operator"},
		{"nobody of that name", "PUT", "/api/v1/operators/x", `{"name":"X","roles":["operator"],"reason":"r"}`, 404, "unknown-operator"},
	}
	before := len(l.record.all())
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			a := l.call(test.method, test.path, test.body)
			p := into[problem](t, a)
			if a.status != test.status || p.Code != test.code {
				t.Errorf("got %d %s, want %d %s: %s", a.status, p.Code, test.status, test.code, a.text)
			}
			if p.Status != a.status || p.Detail == "" || p.Hint == "" || a.header.Get("Content-Type") != "application/problem+json" {
				t.Errorf("the problem document is not whole: %s", a.text)
			}
			if now := len(l.record.all()); now != before {
				t.Errorf("the refused call left %d events in the ledger", now-before)
			}
		})
	}
}

// With every call that changes something: no name, no change. Requirement 1.
func TestNobodyChangesAnything(t *testing.T) {
	l, run := opened(t, shortPlan)
	l.operator = ""
	before := len(l.record.all())
	replace := strings.NewReplacer("/api/v1/runs/{run}", run, "{burette}", "B-07", "{station}", "bench-1", "{operator}", "x")
	for _, rt := range routes {
		if len(rt.records) == 0 || rt.act == "" || rt.act == session.ActLook {
			continue
		}
		if a := l.call(rt.method, replace.Replace(rt.path), `{}`); a.status != http.StatusUnauthorized || a.code() != "who-acts" {
			t.Errorf("%s %s by nobody: %d %s", rt.method, rt.path, a.status, a.text)
		}
	}
	l.operator = "two words"
	if a := l.call("POST", run+"/facts", `{"reading":"1"}`); a.code() != "bad-name" {
		t.Errorf("a name that is none: %d %s", a.status, a.text)
	}
	if now := len(l.record.all()); now != before {
		t.Errorf("%d events were recorded", now-before)
	}
}

func TestOtherSitesChangeNothing(t *testing.T) {
	l, run := opened(t, shortPlan)
	before := len(l.record.all())
	header := func(name, value string) func(*http.Request) {
		return func(r *http.Request) { r.Header.Set(name, value) }
	}
	tests := []struct {
		name   string
		change func(*http.Request)
		status int
		code   string
	}{
		{"a page of another site, by its fetch metadata", header("Sec-Fetch-Site", "cross-site"), 403, "other-site"},
		{"a page of a sibling site", header("Sec-Fetch-Site", "same-site"), 403, "other-site"},
		{"a page of another site, by its origin", header("Origin", "https://elsewhere.example"), 403, "other-site"},
		{"a page without an origin", header("Origin", "null"), 403, "other-site"},
		{"a form", header("Content-Type", "text/plain"), 415, "not-json"},
		{"a name that leads here by a foreign name server", func(r *http.Request) { r.Host = "elsewhere.example" }, 421, "other-host"},
	}
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			a := l.call("POST", run+"/facts", `{"reading":"0.00"}`, test.change)
			if a.status != test.status || a.code() != test.code {
				t.Errorf("got %d %s, want %d %s", a.status, a.code(), test.status, test.code)
			}
		})
	}
	if now := len(l.record.all()); now != before {
		t.Errorf("%d events were recorded", now-before)
	}
	a := l.call("POST", run+"/facts", `{"reading":"0.00"}`, header("Sec-Fetch-Site", "same-origin"), header("Origin", l.server.URL))
	if a.status != 200 {
		t.Errorf("the page itself is refused: %d %s", a.status, a.text)
	}
}

func TestEveryAnswerCarriesItsProtection(t *testing.T) {
	l := open(t, nil)
	for _, path := range []string{"/", "/bench.css", "/start.js", "/api/v1/health", "/api/v1/nothing", "/api/openapi.json"} {
		a := l.call("GET", path, "")
		csp := a.header.Get("Content-Security-Policy")
		if !strings.Contains(csp, "default-src 'none'") || strings.Contains(csp, "unsafe") || a.header.Get("X-Content-Type-Options") != "nosniff" {
			t.Errorf("%s: policy %q", path, csp)
		}
	}
}

// An error that nobody foresaw shows a reference that the log line carries too, and not
// what it was.
func TestUnknownCausesCarryAReference(t *testing.T) {
	var log strings.Builder
	l := open(t, func(o *Options) { o.Log = logTo(&log) })
	l.must(201, "POST", "/api/v1/burettes", burette50)
	l.record.mu.Lock()
	l.record.fail = fmt.Errorf("append: input/output error at sector 7")
	l.record.mu.Unlock()
	a := l.call("POST", "/api/v1/runs", openBody(shortPlan))
	p := into[problem](t, a)
	if a.status != 500 || p.Reference == "" || strings.Contains(string(a.text), "sector") || !strings.Contains(log.String(), p.Reference) || !strings.Contains(log.String(), "sector 7") {
		t.Errorf("answer %d %s\nlog %s", a.status, a.text, log.String())
	}
	if a := l.call("GET", "/api/v1/health", ""); a.status != 503 || !strings.Contains(string(a.text), `"trouble"`) {
		t.Errorf("health: %d %s", a.status, a.text)
	}
}
