package calc

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"gonum.org/v1/gonum/stat"
	"pgregory.net/rapid"
)

// Three intervals of a textbook exercise: a 50 mL burette at 24 °C, 1.0038 mL/g
// (D. C. Harris, Quantitative Chemical Analysis; the inputs as quoted in a
// second source, the printed +0.04, −0.02 and −0.05 mL from memory).
func TestWorksheetTextbookSegments(t *testing.T) {
	var entries []SheetEntry
	for i, r := range [][3]float64{{0.03, 10.01, 9.984}, {10.01, 19.90, 9.835}, {19.90, 30.06, 10.071}} {
		entries = append(entries, SheetEntry{Delivery: i + 1, StartML: r[0], EndML: r[1], NetMassG: r[2], VolumeML: r[2] * 1.0038})
	}
	w, err := WorkByHand(0.03, []float64{10.01, 19.90, 30.06}, entries)
	if err != nil {
		t.Fatal(err)
	}
	for i, want := range []struct{ volume, interval, printed, sum string }{
		{"10.0219", "0.0419", "0.04", "0.0419"}, {"9.8724", "-0.0176", "-0.02", "0.0243"}, {"10.1093", "-0.0507", "-0.05", "-0.0264"},
	} {
		near(t, "volume", w.Intervals[i].Entries[0].VolumeML, want.volume)
		near(t, "interval", w.Intervals[i].MeanML, want.interval)
		near(t, "interval, printed", w.Intervals[i].MeanML, want.printed)
		near(t, "running sum", w.Points[i].CorrectionML, want.sum)
	}
	near(t, "factor at 24 °C", ZFactor(waterAt(t, 24), 1.2, 8000), "1.0038")
}

func waterAt(t *testing.T, tempC float64) float64 {
	t.Helper()
	rho, err := WaterDensity("tanaka-2001", tempC, 1013.25)
	if err != nil {
		t.Fatal(err)
	}
	return rho
}

// A classical table, 50 mL at 25 °C, 0.9961 g/mL, the vessel not emptied (from memory;
// every step checks). Its rounded interval corrections sum up to 0.11 mL, the readings
// and masses give 0.1053 mL.
func TestWorksheetClassicalTable(t *testing.T) {
	readings := []float64{0.03, 10.13, 20.10, 30.17, 40.20, 49.99}
	gross := []float64{29.20, 39.28, 49.19, 59.27, 69.24, 79.07}
	var entries []SheetEntry
	for i := 1; i < len(gross); i++ {
		net := gross[i] - gross[i-1]
		entries = append(entries, SheetEntry{Delivery: i, StartML: readings[i-1], EndML: readings[i], NetMassG: net, VolumeML: net / 0.9961})
	}
	w, err := WorkByHand(0.03, readings[1:], entries)
	if err != nil {
		t.Fatal(err)
	}
	for i, want := range []struct{ volume, interval, sum string }{
		{"10.1195", "0.02", "0.0195"}, {"9.9488", "-0.02", "-0.0017"}, {"10.1195", "0.05", "0.0477"}, {"10.0090", "-0.02", "0.0268"}, {"9.8685", "0.08", "0.1053"},
	} {
		near(t, "volume", w.Intervals[i].Entries[0].VolumeML, want.volume)
		near(t, "interval", w.Intervals[i].MeanML, want.interval)
		near(t, "from the first reading", w.Points[i].CorrectionML, want.sum)
	}
	direct := (gross[5]-gross[0])/0.9961 - (readings[5] - readings[0])
	if math.Abs(w.Points[4].CorrectionML-direct) > 1e-12 {
		t.Errorf("summed up %.6f, first to last %.6f mL", w.Points[4].CorrectionML, direct)
	}
}

// Single intervals as published.
func TestWorksheetPublishedIntervals(t *testing.T) {
	for _, tt := range []struct {
		name                   string
		start, end, mass, perG float64
		volume, correction     string
	}{
		{"JJG 196-2006 practice, 15 °C, 0.99793 g/mL", 0, 10.03, 10.04, 1 / 0.99793, "10.06", "0.03"},
		{"Talbot, Quantitative Chemical Analysis (1908): true minus apparent, no buoyancy", 0, 10.05, 10.03, 1, "10.03", "-0.02"},
		{"full delivery at 19 °C, Z 1.0027, published exercise", 0, 50, 49.867, 1.0027, "50.0016", "0.0016"},
		{"flask as one interval, 18 °C, 0.9975 g/mL", 0, 50, 49.87, 1 / 0.9975, "49.995", "-0.005"},
	} {
		w, err := WorkByHand(0, []float64{tt.end}, []SheetEntry{{StartML: tt.start, EndML: tt.end, NetMassG: tt.mass, VolumeML: tt.mass * tt.perG}})
		if err != nil {
			t.Fatal(err)
		}
		near(t, tt.name+": volume", w.Intervals[0].Entries[0].VolumeML, tt.volume)
		near(t, tt.name+": correction", w.Points[0].CorrectionML, tt.correction)
	}
}

// Volumes of published exercises on pipettes by the factor of this package.
func TestWorksheetPublishedVolumes(t *testing.T) {
	// D. Harvey, Analytical Chemistry 2.1, example 5.1: 9.9736 g at 25 °C, brass 8.40,
	// 0.99705 g/mL: 10.014 mL, without buoyancy 10.003 mL.
	near(t, "Harvey", 9.9736*ZFactor(997.05, 1.2, 8400), "10.014")
	near(t, "Harvey, no buoyancy", 9.9736/0.99705, "10.003")
	// A 10 mL pipette at 24 °C, 0.9972994 g/mL, running vessel; without buoyancy as
	// published, with it computed with 1.2 and 8000 kg/m³.
	gross := []float64{48.1267, 58.0784, 68.0556, 78.0387, 87.9970}
	plain := []string{"9.9786", "10.0042", "10.0101", "9.9853"}
	buoyant := []string{"9.9892", "10.0148", "10.0207", "9.9958"}
	for i := range plain {
		net := gross[i+1] - gross[i]
		near(t, "pipette, no buoyancy", net/0.9972994, plain[i])
		near(t, "pipette", net*ZFactor(997.2994, 1.2, 8000), buoyant[i])
	}
	// RD 52.04.186-89 5.1.6: 25 mL at 23 °C and 742 mmHg, 24.884 g; by its table, 996.64 g
	// a litre at 740 mmHg corrected to 742, 24.916 g are 25 mL: 24.968 mL.
	near(t, "25 mL pipette", 25*24.884/24.916, "24.968")
	d := Delivery{
		After: Weighing{MassG: 24.884}, End: Reading{ReadingML: 25}, Water: WaterTemp{WaterTempC: 23},
		Ambient: Ambient{AirTempC: 23, PressureHPa: 742 * 1.333224, HumidityPct: 50},
	}
	in := DefaultInputs()
	in.ExpansionPerC, in.WeightDensityKgM3 = 2.5e-5, 8400
	v, err := DeliveryVolume(in, d)
	if err != nil || math.Abs(v.Volume20ML-24.968) > 0.002 {
		t.Errorf("25 mL pipette by the formulas: %.4f mL, %v", v.Volume20ML, err)
	}
	// A 50 mL cylinder at 32 °C: mean and standard deviation as published.
	mean, s := stat.MeanStdDev([]float64{49.34, 49.30, 49.23}, nil)
	near(t, "cylinder, mean", mean, "49.29")
	near(t, "cylinder, s", s, "0.055678")
	// Its net masses from gross and tare: the first printed tare has two digits swapped,
	// so that net 49.05 does not follow from the readings. Net is always computed.
	near(t, "net of the first run", 116.80-67.57, "49.23")
}

// rawRun is the simulated run from zero, as deliveries.
func rawRun(t *testing.T) (Inputs, []Delivery, [][]string) {
	t.Helper()
	in := DefaultInputs()
	in.WaterDensity = "tanaka-2001"
	rows := csvRows(t, "from_zero_50mL_raw.csv")
	var ds []Delivery
	for i, r := range rows {
		f := int64(10 * i)
		ds = append(ds, Delivery{
			Delivery: i + 1, PointML: dec(t, r[0]), Replicate: int(dec(t, r[1])),
			Before: Weighing{Fact: f + 1, MassG: dec(t, r[2])}, After: Weighing{Fact: f + 2, MassG: dec(t, r[3])},
			Start: Reading{Fact: f + 3}, End: Reading{Fact: f + 4, ReadingML: dec(t, r[0])},
			Water:   WaterTemp{Fact: f + 5, WaterTempC: dec(t, r[5])},
			Ambient: Ambient{AirTempC: dec(t, r[6]), PressureHPa: dec(t, r[7]), HumidityPct: dec(t, r[8])},
		})
	}
	return in, ds, rows
}

// A whole run against an independent program: densities, volumes, means, corrections,
// standard deviations, span, verdicts.
func TestWorksheetWholeRun(t *testing.T) {
	in, ds, rows := rawRun(t)
	for i, d := range ds {
		v, err := DeliveryVolume(in, d)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "net", v.NetMassG, rows[i][4])
		near(t, "water", v.WaterDensityKgM3, rows[i][9])
		near(t, "air", v.AirDensityKgM3, rows[i][10])
		near(t, "volume", v.Volume20ML, rows[i][11])
		near(t, "error", -v.CorrectionML, rows[i][12])
	}
	c, err := FitCurve(in, fivePoints, ds)
	if err != nil {
		t.Fatal(err)
	}
	w, err := NewWorksheet(in, c, ds)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "pooled s", w.PooledSML, "0.002973")
	if w.PooledNu != 10 || w.LargestDifference > sheetExact || !strings.Contains(w.Text(), "The curve is this calculation") {
		t.Errorf("nu %d, %g mL from the curve", w.PooledNu, w.LargestDifference)
	}
	var corrections []float64
	cov := diagonal(5, 0)
	results := csvRows(t, "from_zero_50mL_result.csv")
	for i, r := range results {
		near(t, "s", w.Intervals[i].SML, r[2])
		near(t, "correction", w.Points[i].CorrectionML, r[4])
		corrections = append(corrections, w.Points[i].CorrectionML)
		cov[i][i] = math.Pow(dec(t, r[5]), 2)
	}
	for k, name := range []string{RuleSimple, RuleGuarded, RuleNonBinary} {
		got, err := Assess(handCurve(fivePoints, corrections, cov), classA50, Rule{Name: name})
		if err != nil {
			t.Fatal(err)
		}
		near(t, "span", got.SpanML, "0.03790")
		near(t, "span", got.SpanML, "0.0378964798")
		for i, r := range results {
			if got.Points[i].Verdict != Meets || r[8+k] != "pass" {
				t.Errorf("%s at %s mL: %s", name, r[0], got.Points[i].Verdict)
			}
			if u := got.Points[i].ExpandedML; math.Abs(u-dec(t, r[6])) > 1.1e-5 { // twice a u printed with five decimals
				t.Errorf("U at %s mL: %.5f, want %s", r[0], u, r[6])
			}
			near(t, "p_conform", got.Points[i].PConform, r[11][:len(r[11])-1])
		}
		// Point by point every rule passes. Between any two the guarded one does not:
		// with independent points U of the difference is √2 times as large.
		if want := map[string]string{RuleSimple: Meets, RuleGuarded: DoesNotMeet, RuleNonBinary: ConditionalPass}[name]; got.Verdict != want {
			t.Errorf("%s: %s, want %s (%+v)", name, got.Verdict, want, got.WorstPair)
		}
	}
}

// Equal replicates at nominal readings: the curve is the sheet, in both patterns of
// reading and all of weighing.
func TestWorksheetIsTheCurveInTheClassicalCase(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		l := Layout{
			PointsML: fivePoints, Replicates: rapid.IntRange(1, 4).Draw(t, "replicates"),
			ReadingPattern:  rapid.SampledFrom([]string{readStepwise, readFromZero}).Draw(t, "reading"),
			WeighingPattern: rapid.SampledFrom([]string{weighSeparate, weighRunning, weighTared}).Draw(t, "weighing"),
		}
		rng := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 1))
		ds, _, err := l.deliveries(DefaultInputs(), OrdinaryRoom())
		if err != nil {
			t.Fatal(err)
		}
		jitter(ds, rng, 0.004)
		c, err := FitCurve(DefaultInputs(), fivePoints, ds)
		if err != nil {
			t.Fatal(err)
		}
		w, err := NewWorksheet(DefaultInputs(), c, ds)
		if err != nil {
			t.Fatal(err)
		}
		// What a delivery weighs in the fit depends, in the seventh digit, on its own mass.
		if w.LargestDifference > sheetExact || len(w.Points) != 5 || w.OffMarkML != 0 {
			t.Errorf("%+v: %g mL from the curve", l, w.LargestDifference)
		}
	})
}

// jitter changes the after-weights, and what follows in a running vessel.
func jitter(ds []Delivery, rng *rand.Rand, sd float64) {
	shift := map[int64]float64{}
	for i := range ds {
		before := &ds[i].Before
		before.MassG += shift[before.Fact]
		shift[ds[i].After.Fact] = shift[before.Fact] + sd*rng.NormFloat64()
		ds[i].After.MassG += shift[ds[i].After.Fact]
	}
}

// Off the marks the sheet and the curve differ, and the sheet says so.
func TestWorksheetOffTheMarks(t *testing.T) {
	in, ds, _ := rawRun(t)
	for i := range ds {
		shift := 0.02 * float64(i%3-1)
		ds[i].End.ReadingML += shift
		ds[i].After.MassG += shift * 0.997
	}
	last := len(ds) - 1
	ds[last].End.ReadingML = 50
	c, err := FitCurve(in, []float64{10, 20, 30, 40, 50.05}, ds)
	if err != nil {
		t.Fatal(err)
	}
	w, err := NewWorksheet(in, c, ds)
	if err != nil {
		t.Fatal(err)
	}
	if w.LargestDifference == 0 || w.OffMarkML < 0.02 {
		t.Errorf("%+v", w)
	}
	text := w.Text()
	for _, part := range []string{"from this calculation", "from their marks", "mean of 3", "Pooled standard deviation", "WORKED SHEET"} {
		if !strings.Contains(text, part) {
			t.Errorf("%q is missing in\n%s", part, text)
		}
	}
}

func TestWorksheetRefuses(t *testing.T) {
	for name, e := range map[string]SheetEntry{
		"passes no mark": {StartML: 0, EndML: 3, VolumeML: 3}, "backwards": {StartML: 20, EndML: 10, VolumeML: 10},
		"not a number": {StartML: 0, EndML: 10, VolumeML: math.NaN()},
	} {
		if w, err := WorkByHand(0, []float64{10, 20}, []SheetEntry{e}); err == nil {
			t.Errorf("%s: %+v", name, w)
		}
	}
	if _, err := WorkByHand(0, nil, nil); err == nil {
		t.Error("an empty sheet")
	}
	w, err := WorkByHand(0, []float64{10, 20, 30}, []SheetEntry{{StartML: 0, EndML: 10, VolumeML: 10}, {StartML: 20, EndML: 30, VolumeML: 10}})
	if err != nil || len(w.Unreached) != 2 || !strings.Contains(w.Verdict(), "no way to [20 30] mL") {
		t.Errorf("%+v, %v", w, err)
	}
}
