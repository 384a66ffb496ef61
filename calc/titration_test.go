package calc

import (
	"encoding/json"
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"pgregory.net/rapid"
)

// useCurve has the corrections of the computed titration examples: a 50 mL burette of
// class AS, five points from zero, three deliveries each (computed with Tanaka 2001 and
// CIPM-2007 by an independent program), rounded as its certificate prints them.
func useCurve() *Curve {
	cov := diagonal(5, 0.0069)
	for i := range cov {
		for j := range cov {
			if i != j {
				cov[i][j] = 1e-5 * float64(min(i, j)+1) / 5
			}
		}
	}
	return handCurve([]float64{10, 20, 30, 40, 50}, []float64{-0.01166, -0.02188, -0.00172, 0.01195, 0.01602}, cov)
}

func TestTitrationUse(t *testing.T) {
	c := useCurve()
	table, err := c.Table()
	if err != nil {
		t.Fatal(err)
	}
	for _, r := range csvRows(t, "titration_use.csv") {
		got, err := Titrate(c, Titration{StartML: dec(t, r[0]), EndML: dec(t, r[1])})
		if err != nil {
			t.Fatal(err)
		}
		near(t, r[0]+" to "+r[1]+": apparent", got.ApparentML, r[4])
		near(t, r[0]+" to "+r[1]+": volume", got.VolumeML, r[5])
		v, u, err := table.Correct(dec(t, r[0]), dec(t, r[1]))
		if err != nil || math.Abs(v-got.VolumeML) > 1e-12 || math.Abs(u-got.UML) > 1e-12 {
			t.Errorf("the table gives %.15g ± %.15g, Titrate %.15g ± %.15g, %v", v, u, got.VolumeML, got.UML, err)
		}
		for i, reading := range []string{r[0], r[1]} {
			p, err := c.At(dec(t, reading))
			if err != nil {
				t.Fatal(err)
			}
			near(t, "C("+reading+")", p.CorrectionML, r[2+i])
		}
	}
}

// u² = u²(C₂) + u²(C₁) − 2 cov + 2 u²(reading), by hand for two points of the curve.
func TestTitrationUncertaintyByHand(t *testing.T) {
	c := useCurve()
	got, err := Titrate(c, Titration{StartML: 10, EndML: 40, UReadingML: 0.005})
	if err != nil {
		t.Fatal(err)
	}
	want := math.Sqrt(0.0069*0.0069*2 - 2*1e-5*1.0/5 + 2*0.005*0.005)
	if math.Abs(got.UML-want) > 1e-12 || math.Abs(got.ExpandedML-2*want) > 1e-9 {
		t.Errorf("u %.12g, U %.12g, want %.12g and twice that", got.UML, got.ExpandedML, want)
	}
}

// TestTitrationTitrantTable: mL to add to 1000 mL of reading.
func TestTitrationTitrantTable(t *testing.T) {
	in := DefaultInputs()
	in.WaterDensity = "tanaka-2001"
	for _, r := range csvRows(t, "titrant_temperature.csv") {
		for i, gamma := range []float64{9.9e-6, 2.5e-5, 2.7e-5, 0} {
			in.ExpansionPerC = gamma
			f, _, err := TitrantFactor(in, dec(t, r[0]))
			if err != nil {
				t.Fatal(err)
			}
			// the normal pressure and the digits of the coefficients: 0.6 of the last digit
			if want := dec(t, r[1+i]); math.Abs(1000*(f-1)-want) > 0.0006 {
				t.Errorf("%s °C, gamma %g: %.4f mL/L, want %s", r[0], gamma, 1000*(f-1), r[1+i])
			}
		}
		// GB/T 601 annex A, from memory; its value at 33 °C does not fit its series.
		in.ExpansionPerC = 2.6e-5
		f, _, err := TitrantFactor(in, dec(t, r[0]))
		if err != nil {
			t.Fatal(err)
		}
		if r[0] != "33" && math.Abs(1000*(f-1)-dec(t, r[5])) > 0.022 {
			t.Errorf("%s °C: %.3f mL/L, GB/T 601 %s", r[0], 1000*(f-1), r[5])
		}
	}
}

// A linear formula, 2.1e-4·V·Δt, gives −2.10 mL/L at 30 °C; the right one −2.56 for
// the liquid and −2.46 in borosilicate.
func TestTitrationTitrantIsNotLinear(t *testing.T) {
	in := DefaultInputs()
	f, _, err := TitrantFactor(in, 30)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "borosilicate at 30 °C", 1000*(f-1), "-2.46")
	in.ExpansionPerC = 0
	f, _, err = TitrantFactor(in, 30)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "liquid at 30 °C", 1000*(f-1), "-2.56")
}

// A textbook exercise: 25.00 mL at 10 °C, 0.9984 and 0.9972 g/mL, is 25.03 mL at 20 °C.
// The exercise uses masses weighed in air in a glass vessel; the ratio of the densities
// of water in soda-lime glass gives the same two decimals.
func TestTitrationTitrantExercise(t *testing.T) {
	near(t, "the exercise by hand", 25.00*0.9984/0.9972, "25.0301")
	c := handCurve([]float64{50}, []float64{0}, diagonal(1, 0.001))
	c.Inputs.ExpansionPerC = 2.7e-5
	got, err := Titrate(c, Titration{EndML: 25, HasTitrantTemp: true, TitrantTempC: 10, ToReferenceTemp: true})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "volume at 20 °C", got.VolumeML, "25.03")
}

// The order: (r + C) is the capacity at 20 °C, × [1 + γ(t − 20)] the volume at t,
// × ρ(t)/ρ(20) the titrant at 20 °C.
func TestTitrationOrder(t *testing.T) {
	c := useCurve()
	plain := Titration{StartML: 0.42, EndML: 24.79}
	at20, err := Titrate(c, plain)
	if err != nil {
		t.Fatal(err)
	}
	warm := plain
	warm.HasTitrantTemp, warm.TitrantTempC, warm.UTitrantTempC = true, 25, 0.2
	known, err := Titrate(c, warm)
	if err != nil || known.VolumeML != at20.VolumeML || known.UML != at20.UML {
		t.Errorf("a temperature that is not applied changed the volume: %+v, %v", known, err)
	}
	warm.ToReferenceTemp = true
	got, err := Titrate(c, warm)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "added per litre", 1000*(got.VolumeML/at20.VolumeML-1), "-1.11")
	// 0.2 °C: (2.57e-4 − 9.9e-6)/°C × 0.2 °C × 24.36 mL = 0.0012 mL (derivative of Tanaka)
	uTemp := math.Sqrt(got.UML*got.UML - math.Pow(got.TempFactor*at20.UML, 2))
	near(t, "u of the temperature", uTemp, "0.0012")
	table, err := c.Table()
	if err != nil {
		t.Fatal(err)
	}
	row, err := table.ExpandAt(0.42, 24.79, 0, 25, 0.2)
	if err != nil || math.Abs(row.VolumeML-got.VolumeML) > 1e-12 || math.Abs(row.ExpandedML-got.ExpandedML) > 1e-12 {
		t.Errorf("the table gives %+v, Titrate %+v, %v", row, got, err)
	}
}

// An unknown temperature within u of 20 °C: QUAM:2012 A2 takes ± 4 °C rectangular and
// 2.1e-4/°C; here the burette's expansion is taken off.
func TestTitrationUnknownTemperature(t *testing.T) {
	c := useCurve()
	cold, err := Titrate(c, Titration{EndML: 20})
	if err != nil {
		t.Fatal(err)
	}
	got, err := Titrate(c, Titration{EndML: 20, UTitrantTempC: 4 / math.Sqrt(3)})
	if err != nil {
		t.Fatal(err)
	}
	u := math.Sqrt(got.UML*got.UML - cold.UML*cold.UML)
	near(t, "u of the temperature", u/(20*4/math.Sqrt(3)), "0.000197") // 2.07e-4 − 9.9e-6
}

func TestTitrationRefuses(t *testing.T) {
	c := useCurve()
	table, err := c.Table()
	if err != nil {
		t.Fatal(err)
	}
	for _, tt := range []struct {
		name string
		t    Titration
	}{
		{"end before start", Titration{StartML: 20, EndML: 10}},
		{"beyond the last point", Titration{StartML: 0, EndML: 50.01}},
		{"above the first mark", Titration{StartML: -0.01, EndML: 10}},
		{"reading not a number", Titration{StartML: 0, EndML: math.NaN()}},
		{"temperature missing", Titration{EndML: 10, ToReferenceTemp: true}},
		{"boiling", Titration{EndML: 10, HasTitrantTemp: true, TitrantTempC: 100, ToReferenceTemp: true}},
		{"temperature not a number", Titration{EndML: 10, HasTitrantTemp: true, TitrantTempC: math.NaN(), ToReferenceTemp: true}},
	} {
		if got, err := Titrate(c, tt.t); err == nil {
			t.Errorf("%s: %+v", tt.name, got)
		}
		if tt.t.HasTitrantTemp || tt.t.ToReferenceTemp {
			continue
		}
		if v, _, err := table.Correct(tt.t.StartML, tt.t.EndML); err == nil {
			t.Errorf("%s: the table gives %g", tt.name, v)
		}
	}
	if _, err := Titrate(c, Titration{EndML: 60}); !errors.Is(err, ErrOutsideCurve) {
		t.Errorf("got %v", err)
	}
	if _, err := (&Curve{}).Table(); err == nil {
		t.Error("a curve without points made a table")
	}
}

// The table is Titrate to 1e-12, at knots, inside one segment and across, with few
// degrees of freedom and many.
func TestTitrationTableIsTitrate(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c := useCurve()
		c.BridgeRateML2PerML = rapid.SampledFrom([]float64{0, 1e-6, 1e-5, 1e-4}).Draw(t, "bridge rate")
		c.BridgeNu = DegreesOfFreedom(rapid.IntRange(1, 9).Draw(t, "bridge nu"))
		if rapid.Bool().Draw(t, "scaled") {
			c.Birge, c.Nu = 1.7, rapid.IntRange(1, 20).Draw(t, "nu")
		}
		table, err := c.Table()
		if err != nil {
			t.Fatal(err)
		}
		a := rapid.Float64Range(0, 50).Draw(t, "a")
		b := rapid.Float64Range(0, 50).Draw(t, "b")
		if rapid.Bool().Draw(t, "at knots") {
			a, b = 10*math.Floor(a/10), 10*math.Ceil(b/10)
		}
		a, b = min(a, b), max(a, b)
		want, err := Titrate(c, Titration{StartML: a, EndML: b})
		if err != nil {
			t.Fatal(err)
		}
		got, err := table.Expand(a, b, 0)
		if err != nil {
			t.Fatal(err)
		}
		for name, pair := range map[string][2]float64{
			"volume": {got.VolumeML, want.VolumeML}, "u": {got.UML, want.UML}, "k": {got.K, want.K}, "U": {got.ExpandedML, want.ExpandedML},
		} {
			if math.Abs(pair[0]-pair[1]) > 1e-12*max(1, math.Abs(pair[1])) && !stepOfNu(got.NuEff, float64(want.NuEff)) {
				t.Errorf("%s: table %.16g, Titrate %.16g (nu %g, %g)", name, pair[0], pair[1], got.NuEff, float64(want.NuEff))
			}
		}
	})
}

// stepOfNu says whether rounding put two equal degrees of freedom on both sides of an
// integer.
func stepOfNu(a, b float64) bool {
	return wholeNu(a) != wholeNu(b) && math.Abs(a/b-1) < 1e-6
}

// The same burette read in one go or in two halves: volumes add up.
func TestTitrationVolumesAdd(t *testing.T) {
	c := useCurve()
	rapid.Check(t, func(t *rapid.T) {
		a := rapid.Float64Range(0, 20).Draw(t, "a")
		m := rapid.Float64Range(a, 40).Draw(t, "m")
		b := rapid.Float64Range(m, 50).Draw(t, "b")
		one, err1 := Titrate(c, Titration{StartML: a, EndML: b})
		first, err2 := Titrate(c, Titration{StartML: a, EndML: m})
		second, err3 := Titrate(c, Titration{StartML: m, EndML: b})
		if err := errors.Join(err1, err2, err3); err != nil {
			t.Fatal(err)
		}
		if math.Abs(one.VolumeML-first.VolumeML-second.VolumeML) > 1e-12 {
			t.Errorf("%g and %g + %g", one.VolumeML, first.VolumeML, second.VolumeML)
		}
	})
}

func TestTitrationTableAllocatesNothing(t *testing.T) {
	table, err := useCurve().Table()
	if err != nil {
		t.Fatal(err)
	}
	if n := testing.AllocsPerRun(100, func() {
		_, _, _ = table.Correct(0.42, 24.79)
		_, _ = table.Expand(0.42, 24.79, 0)
	}); n != 0 {
		t.Errorf("%g allocations a row", n)
	}
}

func BenchmarkTitration(b *testing.B) {
	c := useCurve()
	c.BridgeRateML2PerML, c.BridgeNu = 1e-6, 5
	table, err := c.Table()
	if err != nil {
		b.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(5, 6))
	rows := make([][2]float64, 1024)
	for i := range rows {
		a := 5 * rng.Float64()
		rows[i] = [2]float64{a, a + 40*rng.Float64()}
	}
	for _, way := range []struct {
		name string
		row  func(a, z float64) error
	}{
		{"way=Correct", func(a, z float64) error { _, _, err := table.Correct(a, z); return err }},
		{"way=Expand", func(a, z float64) error { _, err := table.Expand(a, z, 0); return err }},
		{"way=ExpandAt", func(a, z float64) error { _, err := table.ExpandAt(a, z, 0, 23.5, 0.2); return err }},
		{"way=Titrate", func(a, z float64) error { _, err := Titrate(c, Titration{StartML: a, EndML: z}); return err }},
	} {
		b.Run(way.name, func(b *testing.B) {
			b.ReportAllocs()
			i := 0
			for b.Loop() {
				r := rows[i&1023]
				i++
				if err := way.row(r[0], r[1]); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}

// A curve that was stored and read again gives the same titration.
func TestTitrationWithStoredCurve(t *testing.T) {
	c := useCurve()
	c.BridgeRateML2PerML, c.BridgeNu = 1e-6, 5
	b, err := json.Marshal(c)
	if err != nil {
		t.Fatal(err)
	}
	var again Curve
	if err := json.Unmarshal(b, &again); err != nil {
		t.Fatal(err)
	}
	use := Titration{StartML: 0.42, EndML: 24.79, UDeliveryML: 0.003}
	want, err1 := Titrate(c, use)
	got, err2 := Titrate(&again, use)
	if err1 != nil || err2 != nil || got != want {
		t.Errorf("%+v and %+v, %v, %v", got, want, err1, err2)
	}
	plain, err := Titrate(c, Titration{StartML: 0.42, EndML: 24.79})
	if err != nil || math.Abs(want.UML-math.Hypot(plain.UML, 0.003)) > 1e-12 {
		t.Errorf("u %g with the delivery, %g without, %v", want.UML, plain.UML, err)
	}
}

// QUAM:2012 A2: a burette within ± 0.03 mL, triangular, 0.0122 mL; with 0.006 mL for the
// temperature 0.0136 mL (the guide rounds the parts first).
func TestTitrationUncalibrated(t *testing.T) {
	in := DefaultInputs()
	in.ExpansionPerC = 0
	mpe := MPE{LimitML: 0.03, Class: "A", Standard: "ISO 385:2005"}
	got, err := Uncalibrated(in, mpe, Titration{EndML: 18.64})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "u of the class", got.UML, "0.0122")
	near(t, "volume", got.VolumeML, "18.64")
	warm, err := Uncalibrated(in, mpe, Titration{EndML: 18.64, UTitrantTempC: 3 / 1.96})
	if err != nil || math.Abs(warm.UML-0.0136) > 1e-4 {
		t.Errorf("with the temperature %.5f mL, %v", warm.UML, err)
	}
	if _, err := Uncalibrated(in, MPE{}, Titration{EndML: 1}); err == nil {
		t.Error("no limit was accepted")
	}
}
