package session

import (
	"encoding/json"
	"fmt"
	"math"
	"strings"
	"testing"
	"time"

	"tenthmark/calc"
	"tenthmark/calc/decimal"
)

// house is a book with the two things the desk adds: numbers and time.
type house struct {
	t     *testing.T
	book  *Book
	lines [][]byte
}

var testDay = time.Date(2026, 12, 1, 9, 0, 0, 0, time.UTC)

func newHouse(t *testing.T) *house {
	h := &house{t: t, book: NewBook()}
	h.record("daemon", Draft{Kind: "ledger.created", Body: struct{}{}})
	h.must(h.book.Register(Burette{Name: "B-07", CapacityML: amount("50"), SubdivisionML: amount("0.1"), Class: "AS", WaitS: 30}))
	return h
}

func amount(s string) Amount         { return Amount{decimal.MustParse(s)} }
func number(s string) decimal.Number { return decimal.MustParse(s) }

func (h *house) record(actor Actor, drafts ...Draft) {
	h.t.Helper()
	for _, d := range drafts {
		b, err := json.Marshal(d.Body)
		if err != nil {
			h.t.Fatal(err)
		}
		at := testDay.Add(time.Duration(h.book.Next) * time.Second)
		line, err := Event{Seq: h.book.Next, At: At(at), Actor: actor, Kind: d.Kind, Subject: d.Subject, Body: b}.Encode()
		if err != nil {
			h.t.Fatal(err)
		}
		if err := h.book.Apply(line); err != nil {
			h.t.Fatal(err)
		}
		h.lines = append(h.lines, line)
	}
}

func (h *house) must(drafts []Draft, err error) {
	h.t.Helper()
	if err != nil {
		h.t.Fatal(err)
	}
	h.record(Operator("m.berg"), drafts...)
}

func (h *house) refused(code string) func([]Draft, error) {
	return func(_ []Draft, err error) {
		h.t.Helper()
		if FaultCode(err) != code {
			h.t.Errorf("got %v, want a fault %q", err, code)
		}
	}
}

func (h *house) open(plan Plan) *Run {
	h.t.Helper()
	setting := Setting{Inputs: calc.DefaultInputs(), Rule: "simple", Review: true}
	h.must(h.book.OpenRun(Request{
		Burette: "B-07", Station: "bench-1", Plan: plan,
		Ambient: &AmbientBody{number("21.3"), number("1004.2"), number("45")},
	}, setting, Identity{}, testDay))
	return h.book.Runs[h.book.Order[len(h.book.Order)-1]]
}

func (h *house) weigh(r *Run, massG float64) {
	h.t.Helper()
	m, err := decimal.Round(massG, 4)
	if err != nil {
		h.t.Fatal(err)
	}
	h.record(Station(r.Opening.Station), r.SeeWeight(Weight{MassG: m, Raw: Raw(fmt.Sprintf("N     + %8s g  \r\n", m)), Mode: "settle"})...)
}

func (h *house) read(r *Run, reading string) {
	h.t.Helper()
	h.must(r.Enter(Facts{ReadingML: number(reading)}))
}

func (h *house) warm(r *Run) { h.t.Helper(); h.must(r.Enter(Facts{WaterTempC: number("21.4")})) }

// massOf gives what a volume at 20 °C weighs in the test's air at 21.4 °C.
func massOf(volumeML float64) float64 {
	d := calc.Delivery{After: calc.Weighing{MassG: 1}, Water: calc.WaterTemp{WaterTempC: 21.4}, Ambient: calc.Ambient{AirTempC: 21.3, PressureHPa: 1004.2, HumidityPct: 45}}
	v, err := calc.DeliveryVolume(calc.DefaultInputs(), d)
	if err != nil {
		panic(err)
	}
	return volumeML / v.Volume20ML
}

const vesselG = 45.1234

// work does all deliveries of a run; the burette delivers exactly what it says.
func (h *house) work(r *Run) {
	h.t.Helper()
	pan := vesselG
	for steps := 0; len(r.Awaits()) > 0; steps++ {
		if steps > 1000 {
			h.t.Fatalf("the run does not end: %s", r.Prompt())
		}
		next := r.Awaits()[0]
		d := r.Delivery(next.Delivery)
		switch {
		case next.Fact == "reading" && next.Role == Start:
			h.read(r, d.FromML.String())
		case next.Fact == "weighing" && next.Role == Before:
			if pan = vesselG; r.Opening.Plan.WeighingPattern == Tared {
				pan = 0
			}
			h.weigh(r, pan)
		case next.Fact == "weighing":
			pan = r.BeforeOf(d).MassG.Float() + massOf(d.PointML.Float()-r.StartOf(d).ReadingML.Float())
			h.weigh(r, pan)
		case next.Fact == "reading":
			h.read(r, d.PointML.String())
		case next.Fact == "water_temp":
			h.warm(r)
		default:
			h.t.Fatalf("unexpected %+v: %s", next, r.Prompt())
		}
	}
}

func TestARunInEveryPatternGivesAFlatCurveForAPerfectBurette(t *testing.T) {
	for _, reading := range []ReadingPattern{Stepwise, FromZero} {
		for _, weighing := range []WeighingPattern{Separate, Running, Tared} {
			t.Run(string(reading)+" "+string(weighing), func(t *testing.T) {
				h := newHouse(t)
				r := h.open(Plan{ReadingPattern: reading, WeighingPattern: weighing})
				h.work(r)
				curve, err := r.Curve()
				if err != nil {
					t.Fatal(err)
				}
				for _, p := range curve.Points {
					if math.Abs(p.CorrectionML) > 0.0005 { // five roundings to 0.1 mg
						t.Errorf("correction at %g mL = %g, want 0", p.ReadingML, p.CorrectionML)
					}
				}
				if got := len(r.Deliveries); got != 10 {
					t.Errorf("%d deliveries, want 10", got)
				}
			})
		}
	}
}

func TestStateIsAFunctionOfTheEvents(t *testing.T) {
	h := newHouse(t)
	r := h.open(Plan{})
	h.work(r)
	h.must(r.Finish("M. Berg", false))
	again := NewBook()
	for _, line := range h.lines {
		if err := again.Apply(line); err != nil {
			t.Fatal(err)
		}
	}
	want, _ := json.Marshal(r.Document())
	got, _ := json.Marshal(again.Runs[r.ID].Document())
	if string(got) != string(want) {
		t.Errorf("replayed run differs:\n%s\n%s", got, want)
	}
}

func TestAWeightThatFitsNothingIsSeenAndNotTaken(t *testing.T) {
	h := newHouse(t)
	r := h.open(Plan{})
	h.read(r, "0.00")
	h.weigh(r, 0)       // the empty pan
	h.weigh(r, vesselG) // the vessel
	h.weigh(r, 0)
	h.weigh(r, vesselG+20) // far too much for 10 mL
	if got := len(r.Seen); got != 3 {
		t.Fatalf("%d weights seen, want 3", got)
	}
	d := r.Delivery(1)
	if d.Before == nil || d.After != nil {
		t.Fatalf("before %v, after %v; want the vessel alone", d.Before, d.After)
	}
	h.refused("reason-missing")(r.Take(r.Seen[2].Fact, "", " "))
	h.must(r.Take(r.Seen[2].Fact, "", "twice the plan, on purpose"))
	if d.After == nil || r.Seen[2].Taken != d.After.Fact {
		t.Error("the seen weight was not taken")
	}
}

func TestAMisreadLineIsNamedAndAmended(t *testing.T) {
	h := newHouse(t)
	r := h.open(Plan{})
	h.read(r, "0.00")
	h.weigh(r, vesselG)
	h.weigh(r, vesselG+massOf(10.02))
	h.read(r, "10.12") // in truth 10.02
	h.warm(r)
	doubt := r.DoubtAbout(r.Delivery(1))
	if doubt == nil || doubt.Kind != "misreading" || doubt.Value.String() != "10.02" {
		t.Fatalf("doubt %+v, want a misreading of 10.02", doubt)
	}
	h.refused("answer-first")(r.Enter(Facts{ReadingML: number("20.00")}))
	h.must(r.Amend(doubt.Fact, "", number("10.02"), "looked again"))
	if r.DoubtAbout(r.Delivery(1)) != nil {
		t.Error("still in doubt after the amendment")
	}
	if c := r.Changes; len(c) != 1 || c[0].Was.String() != "10.12" || c[0].Value.String() != "10.02" || c[0].By != "m.berg" {
		t.Errorf("changes %+v do not show the old value", c)
	}
}

func TestAWeightThatWaitedForAnAmendedReadingIsTakenAlong(t *testing.T) {
	h := newHouse(t)
	r := h.open(Plan{})
	h.read(r, "0.00")
	h.weigh(r, vesselG)
	h.read(r, "12.00") // a slip: 10.00
	h.weigh(r, vesselG+massOf(10))
	if len(r.Seen) != 1 || !strings.Contains(r.Seen[0].Why, "reading near 10.0 mL instead of 12.00 mL") {
		t.Fatalf("seen %+v", r.Seen)
	}
	h.must(r.Amend(r.Delivery(1).End.Fact, "", number("10.00"), "mistyped"))
	h.record(Daemon, r.TakeAfterAmend()...)
	if r.Delivery(1).After == nil {
		t.Error("the weight was not taken after the amendment")
	}
}

func TestAVoidDeliveryGrowsAReplacement(t *testing.T) {
	h := newHouse(t)
	r := h.open(Plan{})
	h.read(r, "0.00")
	h.weigh(r, vesselG)
	h.refused("nothing-to-void")(r.Void(2, "not begun"))
	h.must(r.Void(1, "bubble in the tip"))
	h.refused("already-void")(r.Void(1, "again"))
	h.work(r)
	last := r.Deliveries[len(r.Deliveries)-1]
	if last.Replaces != 1 || last.PointML.String() != "10" || !r.IsDone() {
		t.Errorf("last delivery %+v does not replace delivery 1", last)
	}
	if _, err := r.Curve(); err != nil {
		t.Error(err)
	}
}

func TestWhatIsRefusedSaysWhatToDo(t *testing.T) {
	h := newHouse(t)
	r := h.open(Plan{})
	h.refused("reading-outside-scale")(r.Enter(Facts{ReadingML: number("50.01")}))
	h.refused("reading-outside-scale")(r.Enter(Facts{ReadingML: number("-0.01")}))
	h.refused("nothing-entered")(r.Enter(Facts{}))
	h.refused("water-temp-out-of-range")(r.Enter(Facts{WaterTempC: number("2.1")}))
	h.refused("run-incomplete")(r.Finish("M. Berg", false))
	h.refused("no-such-fact")(r.Amend(999, "", number("1"), "why"))
	h.refused("wrong-state")(r.Step(RunResumed, "why"))
	h.refused("station-busy")(h.book.OpenRun(Request{Burette: "B-07", Station: "bench-1"}, Setting{}, Identity{}, testDay))
	h.refused("unknown-burette")(h.book.OpenRun(Request{Burette: "B-99", Station: "bench-2"}, Setting{}, Identity{}, testDay))
	h.must(r.Step(RunSuspended, "lunch"))
	h.refused("run-suspended")(r.Enter(Facts{ReadingML: number("0.00")}))
	h.must(r.Step(RunResumed, "back"))
	h.read(r, "0.02")
	h.refused("reading-order")(r.Enter(Facts{ReadingML: number("0.01")}))
}

func TestNobodyReviewsTheirOwnRun(t *testing.T) {
	h := newHouse(t)
	r := h.open(Plan{Replicates: 1})
	h.work(r)
	h.must(r.Finish("M. Berg", false))
	h.refused("own-run")(r.ApproveBy(Operator("m.berg"), false))
	drafts, err := r.ApproveBy(Operator("t.okafor"), false)
	if err != nil {
		t.Fatal(err)
	}
	h.record(Operator("t.okafor"), drafts...)
	if r.State != Reviewed || !r.IsDue() {
		t.Errorf("state %s, due %v; want reviewed and due", r.State, r.IsDue())
	}
}

func TestAnotherBalanceIsRefused(t *testing.T) {
	h := newHouse(t)
	r := h.open(Plan{})
	h.read(r, "0.00")
	h.record(Station("bench-1"), r.SeeWeight(Weight{MassG: number("45.1234"), Identity: Identity{Serial: "1001"}})...)
	h.record(Station("bench-1"), r.SeeWeight(Weight{MassG: number("55.1000"), Identity: Identity{Serial: "2002"}})...)
	if len(r.Seen) != 1 || !strings.Contains(r.Seen[0].Why, "balance 2002") || r.Delivery(1).After != nil {
		t.Errorf("seen %+v: the other balance's weight was not refused", r.Seen)
	}
}

func fromRaw(raw Raw) (decimal.Number, error) {
	return decimal.Parse(strings.TrimSpace(strings.TrimSuffix(strings.TrimSpace(strings.TrimPrefix(string(raw), "N     +")), "g")))
}

func TestARunRecomputesFromItsRawBytes(t *testing.T) {
	h := newHouse(t)
	r := h.open(Plan{WeighingPattern: Running})
	h.work(r)
	h.must(r.Finish("M. Berg", false))
	lines := h.lines[r.First:]
	again, found, err := Recompute(lines, fromRaw)
	if err != nil || len(found) != 0 {
		t.Fatalf("differences %v, %v; want none", found, err)
	}
	want, _ := json.Marshal(r.Document())
	got, _ := json.Marshal(again.Document())
	if string(got) != string(want) {
		t.Error("the recomputed document differs")
	}
	bad := append([][]byte{}, lines...)
	for i, line := range bad {
		if changed := strings.Replace(string(line), `"mass_g":"45.1234"`, `"mass_g":"45.1244"`, 1); changed != string(line) {
			bad[i] = []byte(changed)
			break
		}
	}
	if _, found, err = Recompute(bad, fromRaw); err != nil || len(found) == 0 {
		t.Errorf("a changed weight was not found: %v", err)
	}
}

func TestACorrectedRunSupersedesTheOldOne(t *testing.T) {
	h := newHouse(t)
	old := h.open(Plan{Replicates: 1})
	h.work(old)
	h.must(old.Finish("M. Berg", false))
	h.refused("cannot-supersede")(h.book.OpenRun(Request{Burette: "B-07", Station: "bench-2", Supersedes: old.ID}, old.Opening.Setting, Identity{}, testDay))
	h.record(Daemon, Draft{RunPublished, old.ID, PublishedBody{Folder: old.ID}})
	h.must(h.book.OpenRun(Request{
		Burette: "B-07", Station: "bench-1", Plan: Plan{Replicates: 1}, Supersedes: old.ID, Condition: "thermometer T-4 was off",
		Ambient: &AmbientBody{number("21.3"), number("1004.2"), number("45")},
	}, old.Opening.Setting, Identity{}, testDay))
	corrected := h.book.Runs[h.book.Order[1]]
	h.work(corrected)
	h.must(corrected.Finish("M. Berg", false))
	h.record(Daemon, Draft{RunPublished, corrected.ID, PublishedBody{Folder: corrected.ID}}, Draft{RunSuperseded, old.ID, SupersededBody{By: corrected.ID, Reason: "thermometer T-4 was off"}})
	if old.Document().Run.SupersededBy != corrected.ID || corrected.Document().Run.Supersedes != old.ID {
		t.Errorf("old says %q, new says %q", old.Document().Run.SupersededBy, corrected.Document().Run.Supersedes)
	}
	h.refused("cannot-supersede")(h.book.OpenRun(Request{Burette: "B-07", Station: "bench-1", Supersedes: old.ID}, old.Opening.Setting, Identity{}, testDay))
}

func TestABalanceThatWasNotCheckedTodayOpensNoRun(t *testing.T) {
	h := newHouse(t)
	setting := Setting{Inputs: calc.DefaultInputs(), Rule: "simple", CheckWeight: "100 g"}
	open := func() ([]Draft, error) {
		return h.book.OpenRun(Request{Burette: "B-07", Station: "bench-1"}, setting, Identity{}, testDay)
	}
	check := func(mass string, within bool) {
		h.record(Station("bench-1"), Draft{LogSample, "bench-1", LogSampleBody{Label: "100 g", MassG: number(mass), Stable: true, Within: &within}})
	}
	h.refused("balance-not-checked")(open())
	check("100.0006", false)
	h.refused("balance-off")(open())
	check("99.9995", true)
	if _, err := open(); err != nil {
		t.Errorf("after a good check: %v", err)
	}
	testDayAfter := testDay.AddDate(0, 0, 1)
	h.refused("balance-not-checked")(h.book.OpenRun(Request{Burette: "B-07", Station: "bench-1"}, setting, Identity{}, testDayAfter))
}
