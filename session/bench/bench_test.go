package bench

import (
	"context"
	"encoding/json"
	"io"
	"io/fs"
	"net/http"
	"net/http/httptest"
	"strings"
	"sync"
	"testing"
	"testing/fstest"
	"time"

	"github.com/rs/zerolog"

	"tenthmark/calc"
	"tenthmark/calc/decimal"
	"tenthmark/session"
	"tenthmark/session/desk"
)

// memory is a ledger that lives in memory: what the desk writes to and the bench reads.
type memory struct {
	mu    sync.Mutex // guards lines and fail
	lines [][]byte
	fail  error
}

func (m *memory) Append(_ context.Context, drafts ...func(int64) ([]byte, error)) ([][]byte, error) {
	m.mu.Lock()
	defer m.mu.Unlock()
	if m.fail != nil {
		return nil, m.fail
	}
	var out [][]byte
	for _, d := range drafts {
		line, err := d(int64(len(m.lines) + len(out)))
		if err != nil {
			return nil, err
		}
		out = append(out, line)
	}
	m.lines = append(m.lines, out...)
	return out, nil
}

func (m *memory) all() [][]byte {
	m.mu.Lock()
	defer m.mu.Unlock()
	return m.lines
}

func (m *memory) Replay(_ context.Context, from int64, each func([]byte) error) error {
	for _, line := range m.all()[from:] {
		if err := each(line); err != nil {
			return err
		}
	}
	return nil
}

func (m *memory) RunLines(_ context.Context, id string) ([][]byte, error) {
	var out [][]byte
	for _, line := range m.all() {
		if e, err := session.DecodeEvent(line); err == nil && e.Subject == id {
			out = append(out, line)
		}
	}
	return out, nil
}

func (m *memory) LoadSnapshot(context.Context) ([]byte, int64, bool, error) {
	return nil, 0, false, nil
}
func (m *memory) SaveSnapshot(context.Context, []byte, int64) error { return nil }
func (m *memory) Recover(context.Context) ([][]byte, error)         { return nil, nil }
func (m *memory) Checkpoint(context.Context) (string, error)        { return "", nil }
func (m *memory) Size(context.Context) (int64, error)               { return int64(len(m.all())), nil }

func (m *memory) Events(_ context.Context, q Query) (out []Line, err error) {
	for i, line := range m.all() {
		e, err := session.DecodeEvent(line)
		if err != nil {
			return nil, err
		}
		if int64(i) > q.After && len(out) < q.Limit && chosen(q.Run, e.Subject) && chosen(q.Kind, string(e.Kind)) && chosen(q.Actor, string(e.Actor)) {
			out = append(out, Line{int64(i), line})
		}
	}
	return out, nil
}

// pans are stations without balances.
type pans struct {
	mu    sync.Mutex // guards both
	list  []Station
	tared []string
}

func (p *pans) List() []Station {
	p.mu.Lock()
	defer p.mu.Unlock()
	return append([]Station(nil), p.list...)
}

func (p *pans) Tare(_ context.Context, station string) error {
	p.mu.Lock()
	defer p.mu.Unlock()
	p.tared = append(p.tared, station)
	return nil
}

// papers are published documents.
type papers struct{ fs fstest.MapFS }

func (p papers) Open(run, name string) (fs.File, error) { return p.fs.Open(run + "/" + name) }
func (p papers) Waiting() []Waiting                     { return nil }

// laboratory is a daemon in a test: desk, ledger, stations and the bench before them.
type laboratory struct {
	t        *testing.T
	record   *memory
	pans     *pans
	desk     *desk.Desk
	bench    *Bench
	server   *httptest.Server
	now      *clock
	token    string
	operator string
}

// clock is one that a test sets.
type clock struct {
	mu sync.Mutex // guards at
	at time.Time
}

func (c *clock) Now() time.Time {
	c.mu.Lock()
	defer c.mu.Unlock()
	return c.at
}

func (c *clock) Running() time.Duration { return c.Now().Sub(morning) }

func (c *clock) pass(d time.Duration) {
	c.mu.Lock()
	defer c.mu.Unlock()
	c.at = c.at.Add(d)
}

var morning = time.Date(2026, 12, 1, 9, 0, 0, 0, time.UTC)

// quietBench is a bench with a desk and no server, for tests in a bubble.
func quietBench(t *testing.T) *Bench {
	t.Helper()
	record := &memory{}
	d, err := desk.New(t.Context(), record, &clock{at: morning}, zerolog.Nop())
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	stopped := make(chan error, 1)
	go func() { stopped <- d.Run(ctx) }()
	t.Cleanup(func() { cancel(); <-stopped })
	b, err := New(Options{
		Desk: d, Stations: &restless{}, Records: record, Version: "test", Log: zerolog.Nop(),
		Setting: func(string) session.Setting { return session.Setting{Inputs: calc.DefaultInputs()} },
	})
	if err != nil {
		t.Fatal(err)
	}
	return b
}

func open(t *testing.T, change func(*Options)) *laboratory {
	t.Helper()
	l := &laboratory{t: t, record: &memory{}, now: &clock{at: morning}, operator: "a.lindqvist", pans: &pans{list: []Station{
		{Name: "bench-1", State: Online, Identity: session.Identity{Model: "MC-224", Serial: "40711"}, Live: &Live{Text: "45.1234", Unit: "g", Stable: true}},
		{Name: "bench-2", State: Offline, Reason: "the port is not there.", Hint: "Plug the adapter in."},
	}}}
	var err error
	if l.desk, err = desk.New(t.Context(), l.record, l.now, zerolog.Nop()); err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	stopped := make(chan error, 1)
	go func() { stopped <- l.desk.Run(ctx) }()
	options := Options{
		Desk: l.desk, Stations: l.pans, Records: l.record, Zone: time.UTC, Now: l.now.Now, Version: "test", Log: zerolog.Nop(),
		Setting: func(string) session.Setting { return session.Setting{Inputs: calc.DefaultInputs(), Rule: "simple"} },
	}
	if change != nil {
		change(&options)
	}
	if l.bench, err = New(options); err != nil {
		t.Fatal(err)
	}
	l.server = httptest.NewUnstartedServer(nil)
	l.server.Config = l.bench.Server()
	l.server.Start()
	t.Cleanup(func() {
		l.bench.Close()
		l.server.Close()
		cancel()
		if err := <-stopped; err != nil {
			t.Error(err)
		}
	})
	return l
}

// answer is what came back from a call.
type answer struct {
	status int
	header http.Header
	text   []byte
}

func (a answer) code() string {
	var p problem
	_ = json.Unmarshal(a.text, &p)
	return p.Code
}

func into[T any](t *testing.T, a answer) T {
	t.Helper()
	var v T
	if err := json.Unmarshal(a.text, &v); err != nil {
		t.Fatalf("%v in answer %d %s", err, a.status, a.text)
	}
	return v
}

// call sends a request as the laboratory's operator. change may alter it.
func (l *laboratory) call(method, path, body string, change ...func(*http.Request)) answer {
	l.t.Helper()
	req, err := http.NewRequestWithContext(l.t.Context(), method, l.server.URL+path, strings.NewReader(body))
	if err != nil {
		l.t.Fatal(err)
	}
	if body != "" {
		req.Header.Set("Content-Type", "application/json")
	}
	if l.operator != "" {
		req.Header.Set("X-Operator", l.operator)
	}
	if l.token != "" {
		req.Header.Set("Authorization", "Bearer "+l.token)
	}
	for _, c := range change {
		c(req)
	}
	resp, err := l.server.Client().Do(req)
	if err != nil {
		l.t.Fatal(err)
	}
	defer resp.Body.Close()
	text, err := io.ReadAll(resp.Body)
	if err != nil {
		l.t.Fatal(err)
	}
	a := answer{resp.StatusCode, resp.Header, text}
	l.checkDescribed(req, a)
	return a
}

// must is call for what has to work.
func (l *laboratory) must(status int, method, path, body string) answer {
	l.t.Helper()
	a := l.call(method, path, body)
	if a.status != status {
		l.t.Fatalf("%s %s %s: %d %s, want %d", method, path, body, a.status, a.text, status)
	}
	return a
}

// runView is what tests look at of a run.
type runView struct {
	Run struct {
		ID, State   string
		PerformedBy string `json:"performed_by"`
	}
	Deliveries []session.DocumentDelivery
	Awaits     []session.Awaited
	Prompt     string
	Doubt      *session.Doubt
	Seen       []session.DocumentSeen
	Recorded   []session.Event
	Curve      *calc.Curve
}

const burette50 = `{"burette":"B-07","capacity_mL":50,"subdivision_mL":0.1,"class":"AS","wait_s":30,"interval_months":12}`

// opened gives a laboratory with burette B-07 registered and a run open on bench-1.
func opened(t *testing.T, plan string) (*laboratory, string) {
	t.Helper()
	l := open(t, nil)
	l.must(201, "POST", "/api/v1/burettes", burette50)
	a := l.must(201, "POST", "/api/v1/runs", openBody(plan))
	return l, "/api/v1/runs/" + into[runView](t, a).Run.ID
}

func openBody(plan string) string {
	return `{"burette":"B-07","station":"bench-1","plan":` + plan + `,"ambient":{"air_temp_C":"21.3","pressure_hPa":"1004.2","humidity_pct":"45"}}`
}

const shortPlan = `{"points_mL":["10","20"],"replicates":2,"reading_pattern":"stepwise","weighing_pattern":"separate"}`

// settle lets a weight settle on bench-1.
func (l *laboratory) settle(massG string) {
	l.t.Helper()
	_, err := l.desk.Do(l.t.Context(), session.Station("bench-1"), func(b *session.Book) ([]session.Draft, error) {
		return b.OpenRunAt("bench-1").SeeWeight(session.Weight{MassG: decimal.MustParse(massG), Raw: session.Raw("N     + " + massG + " g  \r\n")}), nil
	})
	if err != nil {
		l.t.Fatal(err)
	}
}

// deliver does one whole delivery of a run.
func (l *laboratory) deliver(run, start, end, before, after string) {
	l.t.Helper()
	if start != "" {
		l.must(200, "POST", run+"/facts", `{"reading":"`+start+`"}`)
	}
	l.settle(before)
	l.settle(after)
	l.must(200, "POST", run+"/facts", `{"reading":"`+end+`","water_temp_C":"21,4"}`)
}

func (l *laboratory) look(run string) runView {
	l.t.Helper()
	return into[runView](l.t, l.must(200, "GET", run, ""))
}

// whole does every delivery of shortPlan.
func (l *laboratory) whole(run string) {
	l.t.Helper()
	l.deliver(run, "0.00", "10.02", "45.1000", "55.1010")
	l.deliver(run, "", "20.01", "45.1010", "55.0660")
	l.deliver(run, "0.00", "10.01", "45.1005", "55.0921")
	l.deliver(run, "", "20.02", "45.1011", "55.0858")
}

func TestARunThroughTheDoor(t *testing.T) {
	l, run := opened(t, shortPlan)
	l.whole(run)
	v := l.look(run)
	if len(v.Awaits) != 0 || v.Curve == nil || v.Doubt != nil {
		t.Fatalf("after all deliveries: awaits %v, doubt %v, prompt %q", v.Awaits, v.Doubt, v.Prompt)
	}
	if got := v.Deliveries[0].Water.WaterTempC.String(); got != "21.4" {
		t.Errorf("a typed comma became %q", got)
	}
	v = into[runView](t, l.must(200, "POST", run+"/finish", `{"meaning":"performed"}`))
	if v.Run.State != "finished" || v.Run.PerformedBy != "a.lindqvist" || len(v.Recorded) != 1 {
		t.Errorf("after signing: %+v, recorded %v", v.Run, v.Recorded)
	}
	if a := l.call("POST", run+"/review", `{"meaning":"reviewed"}`); a.status != 403 || a.code() != "own-run" {
		t.Errorf("reviewing one's own run: %d %s", a.status, a.code())
	}
	l.operator = "m.okafor"
	if v = into[runView](t, l.must(200, "POST", run+"/review", `{"meaning":"reviewed"}`)); v.Run.State != "reviewed" {
		t.Errorf("after review: %s", v.Run.State)
	}
}

// logTo writes a daemon's log into a test.
func logTo(w io.Writer) zerolog.Logger { return zerolog.New(w) }

func ifNoneMatch(tag string) func(*http.Request) {
	return func(r *http.Request) { r.Header.Set("If-None-Match", tag) }
}
