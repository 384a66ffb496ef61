package calc

import (
	"errors"
	"math"
	"math/rand/v2"
	"strings"
	"testing"
	"time"

	"gonum.org/v1/gonum/stat"
)

func TestHistoryEn(t *testing.T) {
	for _, r := range csvRows(t, "en.csv") {
		en, err := EnScore(dec(t, r[0]), dec(t, r[1]), dec(t, r[2]), dec(t, r[3]))
		if err != nil {
			t.Fatal(err)
		}
		near(t, "En", en, r[4])
		if EnSatisfactory(en) != (r[5] == "satisfactory") {
			t.Errorf("En of %v: %v", r, EnSatisfactory(en))
		}
	}
	if en, err := EnScore(1, 1, 0, 0); err == nil {
		t.Errorf("En without uncertainty: %g", en)
	}
	if EnSatisfactory(math.NaN()) || EnSatisfactory(1.0001) || !EnSatisfactory(-1) {
		t.Error("the limit of En")
	}
}

// sharedCurve has a part of the covariance that the run's instruments share: it grows
// with the volume.
func sharedCurve(corrections []float64, uRandom, uSharedAt50 float64) *Curve {
	cov, random := diagonal(5, 0), diagonal(5, uRandom)
	for i := range cov {
		for j := range cov {
			cov[i][j] = random[i][j] + fivePoints[i]*fivePoints[j]/2500*uSharedAt50*uSharedAt50
		}
	}
	c := handCurve(fivePoints, corrections, cov)
	c.RandomML2 = random
	return c
}

func TestHistoryCompare(t *testing.T) {
	before := sharedCurve([]float64{-0.010, -0.020, 0.000, 0.012, 0.016}, 0.004, 0.006)
	for _, tt := range []struct {
		name       string
		after      []float64
		shared     float64
		agree      bool
		indication string
	}{
		{"unchanged", []float64{-0.008, -0.022, 0.001, 0.010, 0.018}, 0, true, ""},
		{"all points up", []float64{0.010, 0.000, 0.020, 0.032, 0.036}, 0, false, "the tip"},
		{"grows with the reading", []float64{-0.004, -0.008, 0.018, 0.036, 0.046}, 0, false, "thermometer"},
		{"here and there", []float64{-0.010, 0.005, -0.020, 0.012, 0.016}, 0, false, "single deliveries"},
		// A change like a thermometer's is hidden by thermometers that may differ, and
		// seen with the same one.
		{"small and proportional, other instruments", []float64{-0.007, -0.014, 0.009, 0.024, 0.031}, 0, true, ""},
		{"small and proportional, same instruments", []float64{-0.007, -0.014, 0.009, 0.024, 0.031}, 1, false, "thermometer"},
	} {
		got, err := Compare(before, sharedCurve(tt.after, 0.004, 0.006), tt.shared)
		if err != nil {
			t.Fatal(err)
		}
		if got.Agree != tt.agree || !strings.Contains(got.Indication, tt.indication) || tt.agree != (got.Indication == "") {
			t.Errorf("%s: agree %v, chi² %.1f of %.1f, worst En %.2f: %s", tt.name, got.Agree, got.Chi2, got.Chi2Limit, got.Worst.En, got.Indication)
		}
	}
}

// With nothing shared, En per point is (x − xref)/√(U² + Uref²) of the two certificates,
// also at readings between the points of the first.
func TestHistoryCompareIsEnOfCertificates(t *testing.T) {
	before := sharedCurve([]float64{-0.010, -0.020, 0.000, 0.012, 0.016}, 0.004, 0.006)
	before.BridgeRateML2PerML, before.BridgeNu = 1e-6, 5
	cov := diagonal(3, 0.005)
	after := handCurve([]float64{5, 25, 50}, []float64{-0.006, -0.01, 0.03}, cov)
	got, err := Compare(before, after, 0)
	if err != nil {
		t.Fatal(err)
	}
	for i, p := range got.Points {
		a, err := before.At(p.ReadingML)
		if err != nil {
			t.Fatal(err)
		}
		want, err := EnScore(after.Points[i].CorrectionML, a.CorrectionML, after.Points[i].ExpandedML, a.ExpandedML)
		if err != nil || math.Abs(p.En-want) > 1e-12 {
			t.Errorf("at %g mL: En %.12g, from the certificates %.12g", p.ReadingML, p.En, want)
		}
	}
	if _, err := Compare(handCurve([]float64{10}, []float64{0}, diagonal(1, 0.004)), after, 0); !errors.Is(err, ErrOutsideCurve) {
		t.Errorf("beyond the older curve: %v", err)
	}
	if _, err := Compare(before, after, 2); err == nil {
		t.Error("a shared part of 2 was accepted")
	}
}

func day(y, m, d int) time.Time { return time.Date(y, time.Month(m), d, 9, 0, 0, 0, time.UTC) }

// yearly gives calibrations a year apart with a slope at 50 mL and none at 25 mL.
func yearly(n int, at50, perYear, u float64, noise func() float64) []Calibration {
	var h []Calibration
	for i := range n {
		c := at50 + perYear*float64(i) + noise()
		h = append(h, Calibration{Label: string(rune('A' + i)), At: after(day(2020, 3, 1), float64(i)), Curve: handCurve([]float64{25, 50}, []float64{0.005, c}, diagonal(2, u))})
	}
	return h
}

func quiet() float64 { return 0 }

// Against gonum's weighted linear regression.
func TestHistoryDriftAgainstRegression(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	var h []Calibration
	var x, y, w []float64
	for i := range 6 {
		u := 0.003 + 0.001*float64(i%3)
		c := 0.002*float64(i) + 0.004*rng.NormFloat64()
		at := day(2018, 1+5*i%12, 3).AddDate(i, 0, 0)
		h = append(h, Calibration{Label: "x", At: at, Curve: handCurve([]float64{50}, []float64{c}, diagonal(1, u))})
		x, y, w = append(x, at.Sub(h[0].At).Hours()/hoursPerYear), append(y, c), append(w, 1/(u*u))
	}
	d, err := DriftOf(h, 0, 50)
	if err != nil {
		t.Fatal(err)
	}
	alpha, beta := stat.LinearRegression(x, y, w, false)
	if math.Abs(d.PerYearML-beta) > 1e-12 {
		t.Errorf("slope %.15g, gonum %.15g", d.PerYearML, beta)
	}
	if c, _ := d.AtTime(h[0].At); math.Abs(c-alpha) > 1e-9 {
		t.Errorf("at the first calibration %.12g, gonum %.12g", c, alpha)
	}
}

// Slope and u by hand: 4 calibrations a year apart, u 0.004 mL: Σ(t − t̄)² = 5, so
// u = 0.004/√5.
func TestHistoryDriftByHand(t *testing.T) {
	d, err := DriftOf(yearly(4, 0.010, 0.006, 0.004, quiet), 0, 50)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "slope", d.PerYearML, "0.0060")
	near(t, "u", d.UPerYearML, "0.0017889")
	near(t, "k", d.K, "2.000")
	if !d.Drifts || !d.Reliable || d.Birge != 1 || !strings.Contains(d.Words(), "It drifts") {
		t.Errorf("%+v", d)
	}
	still, err := DriftOf(yearly(4, 0.010, 0.006, 0.004, quiet), 0, 25)
	if err != nil || still.Drifts {
		t.Errorf("%+v, %v", still, err)
	}
}

// Scatter beyond the uncertainties widens the interval and takes k from Student's t.
func TestHistoryDriftScatter(t *testing.T) {
	i := 0
	h := yearly(5, 0, 0.001, 0.002, func() float64 { i++; return 0.01 * float64(1-2*(i%2)) })
	d, err := DriftOf(h, 0, 50)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "k for nu = 3 (JCGM 100:2008, table G.2)", d.K, "3.31")
	if d.Birge < 3 || d.Drifts || d.Nu != 3 {
		t.Errorf("%+v", d)
	}
}

func TestHistoryDriftRefuses(t *testing.T) {
	var r *Refusal
	if _, err := DriftOf(yearly(2, 0, 0.01, 0.004, quiet), 0, 50); !errors.As(err, &r) || r.Code != "drift-too-few" {
		t.Errorf("two calibrations: %v", err)
	}
	three, err := DriftOf(yearly(3, 0, 0.01, 0.004, quiet), 0, 50)
	if err != nil || three.Reliable || !strings.Contains(three.Words(), "first number") {
		t.Errorf("three calibrations: %+v, %v", three, err)
	}
	same := yearly(3, 0, 0.01, 0.004, quiet)
	for i := range same {
		same[i].At = day(2020, 1, 1)
	}
	if _, err := DriftOf(same, 0, 50); !errors.As(err, &r) || r.Code != "drift-one-time" {
		t.Errorf("one day: %v", err)
	}
	if _, err := DriftOf(yearly(3, 0, 0.01, 0.004, quiet), 0, 60); !errors.Is(err, ErrOutsideCurve) {
		t.Errorf("outside: %v", err)
	}
}

// The slope's interval holds the true slope in 95.45 % when the uncertainties are true,
// and not less when they are understated (2000 histories).
func TestHistoryDriftCoverage(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 8))
	for _, tt := range []struct {
		name  string
		n     int
		noise float64
		low   float64
	}{{"true u", 5, 0.004, 0.94}, {"scatter twice u", 6, 0.008, 0.90}} {
		within := 0
		const histories = 2000
		for range histories {
			d, err := DriftOf(yearly(tt.n, 0, 0.003, 0.004, func() float64 { return tt.noise * rng.NormFloat64() }), 0, 50)
			if err != nil {
				t.Fatal(err)
			}
			if math.Abs(d.PerYearML-0.003) <= d.ExpandedML {
				within++
			}
		}
		if share := float64(within) / histories; share < tt.low {
			t.Errorf("%s: the interval held the slope in %.1f %%", tt.name, 100*share)
		} else {
			t.Logf("%s: %.1f %%", tt.name, 100*share)
		}
	}
}

// 0.010 mL and 0.006 mL a year reach 0.05 mL after 20/3 years from the first
// calibration.
func TestHistoryOutlook(t *testing.T) {
	h := yearly(5, 0.010, 0.006, 0.002, quiet)
	o, err := Foretell(h, classA50, 0.95, 20)
	if err != nil {
		t.Fatal(err)
	}
	want := after(h[0].At, 20.0/3)
	if !o.Leaves.Happens || o.Leaves.At.Sub(want).Abs() > 48*time.Hour || o.Leaves.FromML != 0 || o.Leaves.ToML != 50 {
		t.Errorf("leaves %+v, want %v", o.Leaves, want)
	}
	if !o.InDoubt.Happens || !o.InDoubt.At.Before(o.Leaves.At) || !o.InDoubt.At.After(h[4].At) {
		t.Errorf("in doubt %+v", o.InDoubt)
	}
	d, err := DriftOf(h, o.InDoubt.FromML, o.InDoubt.ToML)
	if err != nil || math.Abs(d.probability(o.InDoubt.At, 0.05)-0.95) > 0.01 {
		t.Errorf("probability then %.3f", d.probability(o.InDoubt.At, 0.05))
	}
	steady, err := Foretell(yearly(5, 0.010, 0, 0.001, quiet), classA50, 0.95, 10)
	if err != nil || steady.Leaves.Happens {
		t.Errorf("steady: %+v, %v", steady, err)
	}
	gone, err := Foretell(yearly(5, 0.060, 0, 0.001, quiet), classA50, 0.95, 10)
	if err != nil || !gone.Leaves.Happens || !gone.Leaves.At.Equal(gone.From) {
		t.Errorf("already outside: %+v, %v", gone, err)
	}
}

// The two-point rule holds ahead too: two points that part reach the limit before
// either does.
func TestHistoryOutlookKnowsPairs(t *testing.T) {
	var h []Calibration
	for i := range 5 {
		step := 0.004 * float64(i)
		h = append(h, Calibration{Label: "x", At: after(day(2020, 1, 1), float64(i)), Curve: handCurve([]float64{25, 50}, []float64{step, -step}, diagonal(2, 0.001))})
	}
	o, err := Foretell(h, classA50, 0.95, 20)
	if err != nil || o.Leaves.FromML != 25 || o.Leaves.ToML != 50 {
		t.Errorf("%+v, %v", o.Leaves, err)
	}
}

func TestHistoryOutlookRefuses(t *testing.T) {
	h := yearly(4, 0, 0.001, 0.002, quiet)
	h[1], h[2] = h[2], h[1]
	if _, err := Foretell(h, classA50, 0.95, 10); err == nil {
		t.Error("calibrations out of order")
	}
	if _, err := Foretell(nil, classA50, 0.95, 10); err == nil {
		t.Error("no calibrations")
	}
	if _, err := Foretell(yearly(4, 0, 0, 0.002, quiet), classA50, 0.2, 10); err == nil {
		t.Error("a probability of 0.2")
	}
	var r *Refusal
	if _, err := Foretell(yearly(2, 0, 0, 0.002, quiet), classA50, 0.95, 10); !errors.As(err, &r) {
		t.Errorf("two calibrations: %v", err)
	}
}

func TestHistoryDue(t *testing.T) {
	doubt := &Outlook{Reliable: true, InDoubt: Crossing{Happens: true, At: day(2026, 6, 1)}}
	hasty := &Outlook{Reliable: false, InDoubt: doubt.InDoubt}
	for _, tt := range []struct {
		name    string
		last    time.Time
		months  int
		o       *Outlook
		want    time.Time
		because string
	}{
		{"a year", day(2026, 3, 1), 12, nil, day(2027, 3, 1), "interval"},
		{"end of January", day(2026, 1, 31), 1, nil, day(2026, 2, 28), "interval"},
		{"leap day", day(2024, 2, 29), 12, nil, day(2025, 2, 28), "interval"},
		{"drift is earlier", day(2026, 3, 1), 12, doubt, day(2026, 6, 1), "drift"},
		{"interval is earlier", day(2026, 3, 1), 2, doubt, day(2026, 5, 1), "interval"},
		{"too few calibrations to believe the drift", day(2026, 3, 1), 12, hasty, day(2027, 3, 1), "interval"},
	} {
		got, err := DueDate(tt.last, tt.months, tt.o)
		if err != nil || !got.At.Equal(tt.want) || got.Because != tt.because {
			t.Errorf("%s: %+v, %v; want %v", tt.name, got, err, tt.want)
		}
	}
	if due, err := DueDate(day(2026, 1, 1), 0, nil); err == nil {
		t.Errorf("no interval: %+v", due)
	}
}

// ASTM E542-01(2021) 4.2 and 4.3.
func TestHistoryLongestInterval(t *testing.T) {
	for material, want := range map[string]int{"borosilicate-3.3": 120, "soda-lime": 60, "polypropylene": 0} {
		if got, ok := LongestInterval(material); got != want || ok != (want > 0) {
			t.Errorf("%s: %d months, %v", material, got, ok)
		}
	}
}

func TestHistoryChart(t *testing.T) {
	for _, tt := range []struct {
		name string
		last float64
		want string
	}{{"as ever", 0.012, ""}, {"odd", 0.0150, "warning"}, {"out", 0.03, "action"}} {
		values := []float64{0.010, 0.012, 0.009, 0.011, 0.012, 0.010, 0.011, tt.last}
		h := yearly(len(values), 0, 0, 0.004, quiet)
		for i := range h {
			h[i].Curve = handCurve([]float64{50}, []float64{values[i]}, diagonal(1, 0.004))
		}
		c, err := ChartHistory(h, 0, 50)
		if err != nil || c.Last != tt.want || c.Limits.Provisional || len(c.Values) != 8 {
			t.Errorf("%s: %+v, %v", tt.name, c, err)
		}
	}
	var r *Refusal
	if _, err := ChartHistory(yearly(3, 0, 0, 0.004, quiet), 0, 50); !errors.As(err, &r) {
		t.Errorf("three calibrations: %v", err)
	}
	if _, err := ChartHistory(yearly(5, 0, 0, 0.004, quiet), 0, 60); !errors.Is(err, ErrOutsideCurve) {
		t.Errorf("outside: %v", err)
	}
}

// F quantiles for 10 and 10 degrees of freedom: 3.72 at 97.5 % (the usual table, from
// memory) and its inverse.
func TestHistoryRepeatability(t *testing.T) {
	same, err := CompareRepeatability(0.0031, 0.00297, 10, 10, 0.05)
	if err != nil || same.Changed {
		t.Fatalf("%+v, %v", same, err)
	}
	near(t, "F 97.5 %", same.Up, "3.72")
	near(t, "F 2.5 %", 1/same.Low, "3.72")
	for _, s := range []float64{0.0062, 0.0014} {
		if got, err := CompareRepeatability(s, 0.00297, 10, 10, 0.05); err != nil || !got.Changed {
			t.Errorf("s = %g: %+v, %v", s, got, err)
		}
	}
	if _, err := CompareRepeatability(0.003, 0, 10, 10, 0.05); err == nil {
		t.Error("s of 0 was accepted")
	}
}

// ILAC-G24, the staircase; numbers from memory.
func TestHistoryStaircase(t *testing.T) {
	for _, tt := range []struct {
		name                  string
		correction            float64
		months, longest, want int
	}{
		{"well within", 0.02, 12, 60, 18},
		{"well within, at the longest", 0.02, 48, 60, 60},
		{"close to the limit", 0.045, 12, 60, 12},
		{"outside", 0.06, 12, 60, 8},
		{"outside, every month", 0.06, 1, 60, 1},
	} {
		found, err := Assess(handCurve([]float64{50}, []float64{tt.correction}, diagonal(1, 0.003)), classA50, Rule{})
		if err != nil {
			t.Fatal(err)
		}
		if got := Staircase(tt.months, tt.longest, found); got != tt.want {
			t.Errorf("%s: %d months, want %d", tt.name, got, tt.want)
		}
	}
}
