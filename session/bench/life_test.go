package bench

import (
	"bytes"
	"fmt"
	"io/fs"
	"math"
	"regexp"
	"slices"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"tenthmark/calc"
	"tenthmark/session"
)

func TestAmendKeepsTheOldValueAndTakesTheWeightThatFitsNow(t *testing.T) {
	l, run := opened(t, shortPlan)
	l.must(200, "POST", run+"/facts", `{"reading":"0.00"}`)
	l.settle("45.1000")
	l.must(200, "POST", run+"/facts", `{"reading":"7.02","water_temp_C":"21.4"}`) // should have been 10.02
	l.settle("55.1010")
	v := l.look(run)
	if len(v.Seen) != 1 || !strings.Contains(v.Seen[0].Why, "near 10.0 mL instead of 7.02") {
		t.Fatalf("seen %+v", v.Seen)
	}
	v = into[runView](t, l.must(200, "POST", run+"/amend", fmt.Sprintf(`{"fact":%d,"value":"10,02","reason":"misread"}`, v.Deliveries[0].End.Fact)))
	d := v.Deliveries[0]
	if d.After == nil || d.After.MassG.String() != "55.1010" || len(v.Recorded) != 2 {
		t.Errorf("the weight was not taken along: %+v, recorded %d", d.After, len(v.Recorded))
	}
	if got := d.End; got.ReadingML.String() != "10.02" || len(got.Amended) != 1 || got.Amended[0].Was.String() != "7.02" || got.Amended[0].By != l.operator {
		t.Errorf("amended reading %+v", got)
	}
}

func TestADoubtIsAnsweredAmendedOrVoid(t *testing.T) {
	l, run := opened(t, shortPlan)
	l.deliver(run, "0.00", "10.12", "45.1000", "55.1010")
	v := l.look(run)
	if v.Doubt == nil || v.Doubt.Value.String() != "10.02" {
		t.Fatalf("doubt %+v", v.Doubt)
	}
	if a := l.call("POST", run+"/facts", `{"reading":"20.0"}`); a.status != 409 || a.code() != "answer-first" {
		t.Errorf("an entry over a doubt: %d %s", a.status, a.code())
	}
	if v = into[runView](t, l.must(200, "POST", run+"/answer", `{"delivery":1,"reason":"looked again"}`)); v.Doubt != nil {
		t.Errorf("answered, and still in doubt: %+v", v.Doubt)
	}
	v = into[runView](t, l.must(200, "POST", run+"/void", `{"delivery":1,"reason":"a lost drop"}`))
	if !v.Deliveries[0].Void || len(v.Deliveries) != 5 || v.Deliveries[4].Replaces != 1 {
		t.Errorf("after void: %+v", v.Deliveries)
	}
	if a := l.call("POST", run+"/void", `{"delivery":1,"reason":"again"}`); a.status != 409 || a.code() != "already-void" {
		t.Errorf("void twice: %d %s", a.status, a.code())
	}
}

func TestSuspendedRunsFreeTheStationAndNeedItFreeAgain(t *testing.T) {
	l, first := opened(t, shortPlan)
	l.must(200, "POST", first+"/suspend", `{"reason":"end of the day"}`)
	if a := l.call("POST", first+"/facts", `{"reading":"0.00"}`); a.status != 409 || a.code() != "run-suspended" {
		t.Errorf("an entry into a suspended run: %d %s", a.status, a.code())
	}
	second := "/api/v1/runs/" + into[runView](t, l.must(201, "POST", "/api/v1/runs", openBody(shortPlan))).Run.ID
	if a := l.call("POST", first+"/resume", `{"reason":"on"}`); a.status != 409 || a.code() != "station-busy" {
		t.Errorf("resume on a busy station: %d %s", a.status, a.code())
	}
	l.must(200, "POST", second+"/abandon", `{"reason":"opened by mistake"}`)
	l.operator = "k.moreau"
	if v := into[runView](t, l.must(200, "POST", first+"/resume", `{"reason":"on"}`)); v.Run.State != "open" {
		t.Errorf("resumed by another person: %s", v.Run.State)
	}
	list := into[struct {
		Runs []session.Summary
		More bool
	}](t, l.must(200, "GET", "/api/v1/runs?limit=1", ""))
	if len(list.Runs) != 1 || !strings.HasSuffix(second, list.Runs[0].ID) || !list.More {
		t.Errorf("newest first: %+v", list)
	}
	list.Runs, list.More = nil, false
	rest := l.must(200, "GET", "/api/v1/runs?state=open&after="+strings.TrimPrefix(second, "/api/v1/runs/"), "")
	if !bytes.Contains(rest.text, []byte(strings.TrimPrefix(first, "/api/v1/runs/"))) || bytes.Contains(rest.text, []byte(`"more":true`)) {
		t.Errorf("the next page: %s", rest.text)
	}
}

func TestReopenTakesTheSignatureBack(t *testing.T) {
	l, run := opened(t, shortPlan)
	l.whole(run)
	l.must(200, "POST", run+"/finish", `{"meaning":"performed"}`)
	if v := into[runView](t, l.must(200, "POST", run+"/reopen", `{"reason":"a value has to be amended"}`)); v.Run.State != "open" || v.Run.PerformedBy != "" {
		t.Errorf("after reopening: %+v", v.Run)
	}
	l.must(200, "POST", run+"/finish", `{"meaning":"performed"}`)
	l.operator = "m.okafor"
	l.must(200, "POST", run+"/trail-review", `{"meaning":"trail-reviewed"}`)
	l.must(200, "POST", run+"/review", `{"meaning":"reviewed"}`)
	if a := l.call("POST", run+"/reopen", `{"reason":"r"}`); a.status != 409 {
		t.Errorf("reopened after review: %d %s", a.status, a.text)
	}
}

// published gives a laboratory with a published run on B-07.
func published(t *testing.T, change func(*Options)) (*laboratory, string) {
	t.Helper()
	l := open(t, change)
	l.must(201, "POST", "/api/v1/burettes", burette50)
	id := into[runView](t, l.must(201, "POST", "/api/v1/runs", openBody(shortPlan))).Run.ID
	run := "/api/v1/runs/" + id
	l.whole(run)
	l.must(200, "POST", run+"/finish", `{"meaning":"performed"}`)
	l.operator = "m.okafor"
	l.must(200, "POST", run+"/review", `{"meaning":"reviewed"}`)
	if err := l.desk.Published(t.Context(), id, session.PublishedBody{Folder: id, Files: map[string]string{"run.json": "00"}}); err != nil {
		t.Fatal(err)
	}
	return l, id
}

func TestTheCurveInForceCorrectsTitrations(t *testing.T) {
	l, id := published(t, nil)
	curve := into[curveAnswer](t, l.must(200, "GET", "/api/v1/curves/B-07?at=2026-12-01", ""))
	if curve.Run != id || len(curve.Curve.Points) != 2 {
		t.Fatalf("curve %+v", curve)
	}
	if a := l.call("GET", "/api/v1/curves/B-07?at=2026-11-30", ""); a.status != 404 || a.code() != "no-curve-in-force" {
		t.Errorf("the day before: %d %s", a.status, a.code())
	}
	type table struct {
		Rows []struct {
			Row     int
			Run     string
			Problem *problem
			calc.TitrationResult
		}
	}
	got := into[table](t, l.must(200, "POST", "/api/v1/curves/B-07/titrations", `{"rows":[
		{"start":"0.00","end":"10.00","at":"2026-12-02"}, {"start":"0.00","end":"30.00"}, {"start":"5","end":"4"},
		{"start":"1","end":"2","at":"2026-11-30"}, {"start":"1","end":"2","at":"tomorrow"}, {"end":"2"}]}`))
	row := got.Rows[0]
	if want := 10 + curve.Curve.Points[0].CorrectionML*10/curve.Curve.Points[0].ReadingML; row.Problem != nil || math.Abs(row.VolumeML-want) > 1e-9 || row.UML <= 0 || row.Run != id {
		t.Errorf("row 1: %+v, want a volume of %.6f mL", row, want)
	}
	want := []string{"", "reading-outside-curve", "readings-fall", "no-curve-in-force", "bad-time", "reading-missing"}
	for i, r := range got.Rows {
		code := ""
		if r.Problem != nil {
			code = r.Problem.Code
		}
		if code != want[i] || r.Row != i+1 {
			t.Errorf("row %d (%d): problem %q, want %q", i+1, r.Row, code, want[i])
		}
	}
}

func TestConversionToTheReferenceTemperature(t *testing.T) {
	l, _ := published(t, nil)
	a := l.must(200, "POST", "/api/v1/curves/B-07/titrations", `{"to_reference_temp":true,"u_temp_C":"0.2","rows":[{"start":"0","end":"20","temp_C":"25"},{"start":"0","end":"20"},{"start":"0","end":"20","temp_C":"99"}]}`)
	got := into[struct{ Rows []titrationAnswer }](t, a).Rows
	// Density of air-free water, Tanaka et al. 2001, Metrologia 38, 301: 998.2067 kg/m³ at
	// 20 °C and 997.0470 kg/m³ at 25 °C; borosilicate 9.9e-6/°C.
	want := (1 + 5*9.9e-6) * 997.0470 / 998.2067
	if got[0].Problem != nil || math.Abs(got[0].TempFactor-want) > 1e-6 {
		t.Errorf("at 25 °C: %+v, want a factor of %.7f", got[0], want)
	}
	if got[1].Problem == nil || got[1].Problem.Code != "titrant-temp-missing" || got[2].Problem == nil || got[2].Problem.Code != "temp-out-of-range" {
		t.Errorf("without a temperature %+v, at 99 °C %+v", got[1].Problem, got[2].Problem)
	}
}

func TestDocumentsAreHandedOutAndNothingElse(t *testing.T) {
	var drop papers
	drop.fs = fstest.MapFS{"secret.key": {Data: []byte("key")}}
	l, id := published(t, func(o *Options) { o.Documents = &drop })
	drop.fs[id+"/run.json"] = &fstest.MapFile{Data: []byte(`{"a":1}`)}
	drop.fs[id+"/run.exe"] = &fstest.MapFile{Data: []byte(`MZ`)}
	run := "/api/v1/runs/" + id
	a := l.must(200, "GET", run+"/documents/run.json", "")
	if string(a.text) != `{"a":1}` || !strings.Contains(a.header.Get("Content-Security-Policy"), "sandbox") {
		t.Errorf("document %s with %q", a.text, a.header.Get("Content-Security-Policy"))
	}
	for _, name := range []string{"nothing.json", "run.exe", "..%2Fsecret.key", "%2e%2e", "..%5Crun.json", "run.json%00"} {
		if a := l.call("GET", run+"/documents/"+name, ""); a.status != 404 {
			t.Errorf("document %q: %d %s", name, a.status, a.text)
		}
	}
	if v := into[runAnswer](t, l.must(200, "GET", run, "")); !slices.Equal(v.Documents, []string{"run.json"}) {
		t.Errorf("the run lists %v", v.Documents)
	}
	l.must(200, "GET", "/api/v1/outbox", "")
}

func TestEventsAreHandedOutByteForByte(t *testing.T) {
	l, id := published(t, nil)
	a := l.must(200, "GET", "/api/v1/ledger/events", "")
	if want := append(bytes.Join(l.record.all(), []byte("\n")), '\n'); !bytes.Equal(a.text, want) {
		t.Error("the lines differ from those that are stored")
	}
	a = l.must(200, "GET", "/api/v1/ledger/events?kind=weighing&run="+id+"&after=3&limit=2", "")
	if lines := bytes.Split(bytes.TrimSpace(a.text), []byte("\n")); len(lines) != 2 || !bytes.Contains(lines[0], []byte(`"kind":"weighing"`)) {
		t.Errorf("filtered: %s", a.text)
	}
}

func TestTheRegisterSaysWhatIsDue(t *testing.T) {
	l, id := published(t, nil)
	b := into[entry](t, l.must(200, "GET", "/api/v1/burettes/B-07", ""))
	if b.LastRun != id || b.Overdue || b.DueOn.Format(time.DateOnly) != "2027-12-01" {
		t.Errorf("after calibration: %+v", b)
	}
	// ISO 385:2005, table 1: class A and AS, 50 mL: ±0.05 mL.
	if b.MPEML != 0.05 {
		t.Errorf("limit %g mL", b.MPEML)
	}
	l.now.pass(400 * 24 * time.Hour)
	if b = into[entry](t, l.must(200, "GET", "/api/v1/burettes/B-07", "")); !b.Overdue {
		t.Error("after 400 days it is not overdue")
	}
	changed := strings.Replace(burette50, `"wait_s":30`, `"wait_s":45`, 1)
	b = into[entry](t, l.must(200, "PUT", "/api/v1/burettes/B-07", strings.TrimSuffix(changed, "}")+`,"reason":"new procedure"}`))
	if b.WaitS != 45 || len(b.Changes) != 1 || b.Changes[0].Reason != "new procedure" {
		t.Errorf("changed entry %+v", b)
	}
}

func TestTareIsRecorded(t *testing.T) {
	l := open(t, nil)
	l.must(200, "POST", "/api/v1/stations/bench-1/tare", "")
	if len(l.pans.tared) != 1 || !bytes.Contains(l.record.all()[0], []byte(`"kind":"station.tared"`)) {
		t.Errorf("tared %v, recorded %s", l.pans.tared, l.record.all())
	}
}

func TestAnEntrySentTwiceLandsOnce(t *testing.T) {
	l, run := opened(t, strings.Replace(shortPlan, "stepwise", "from-zero", 1))
	body := `{"reading":"0.00","delivery":1,"role":"start"}`
	l.must(200, "POST", run+"/facts", body)
	before := len(l.record.all())
	if a := l.call("POST", run+"/facts", body); a.status < 400 || len(l.record.all()) != before {
		t.Errorf("the second time: %d %s", a.status, a.text)
	}
}

func TestPagesAreServedAndChecked(t *testing.T) {
	l := open(t, nil)
	a := l.must(200, "GET", "/", "")
	if !bytes.Contains(a.text, []byte("glass under load")) || !bytes.Contains(a.text, []byte("local law")) {
		t.Error("the page lacks its cautions")
	}
	if bytes.Contains(a.text, []byte("<style")) || bytes.Contains(a.text, []byte("onclick=")) || bytes.Contains(a.text, []byte("http://")) {
		t.Error("the page has inline parts or parts from elsewhere")
	}
	for _, name := range []string{"/start.js", "/run.js", "/drawing.js", "/bench.css", "/mark.svg"} {
		l.must(200, "GET", name, "")
	}
	if again := l.call("GET", "/", "", ifNoneMatch(a.header.Get("ETag"))); again.status != 304 {
		t.Errorf("the same page again: %d", again.status)
	}
}

// The page has no build step that would find a missing part, so this does.
func TestThePageHasAllItsParts(t *testing.T) {
	l := open(t, nil)
	parts, err := fs.ReadDir(pageFiles, "page")
	if err != nil {
		t.Fatal(err)
	}
	reference := regexp.MustCompile(`(?:from|src=|href=) ?"(/[a-z]+\.[a-z]+)"`)
	exported := regexp.MustCompile(`import \{([^}]*)\} from "(/[a-z]+\.js)"`)
	for _, part := range parts {
		text := string(l.must(200, "GET", "/"+part.Name(), "").text)
		for _, m := range reference.FindAllStringSubmatch(text, -1) {
			l.must(200, "GET", m[1], "")
		}
		for _, m := range exported.FindAllStringSubmatch(text, -1) {
			from := string(l.must(200, "GET", m[2], "").text)
			for _, name := range strings.Split(m[1], ",") {
				name = strings.TrimSpace(name)
				if !regexp.MustCompile(`export (async )?(function|const|class) ` + name + `\b`).MatchString(from) {
					t.Errorf("%s takes %s from %s, which does not have it", part.Name(), name, m[2])
				}
			}
		}
		if strings.Contains(text, "innerHTML") || strings.Contains(text, "eval(") {
			t.Errorf("%s makes markup or program text out of data", part.Name())
		}
	}
}
