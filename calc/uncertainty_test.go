package calc

import (
	"math"
	"testing"
)

func line(contribution, nu float64) BudgetLine {
	if nu == 0 {
		nu = math.Inf(1)
	}
	return BudgetLine{Contribution: contribution, Nu: DegreesOfFreedom(nu)}
}

// Published budgets, to all printed digits.
func TestCombinePublished(t *testing.T) {
	rect, tri := RectangularU, TriangularU
	for _, c := range []struct {
		name  string
		lines []BudgetLine
		u     float64
		tol   float64
		nu    float64 // truncated; 0: not printed
	}{
		// uncertainty budgets published by a university, machine digits
		{"10 mL pipette", []BudgetLine{line(rect(0.03), 0), line(0.04, 50), line(10*2.1e-4*rect(4), 0)}, 0.0438579525285894, 1e-15, 72},
		{"50 mL flask", []BudgetLine{line(rect(0.06), 0), line(rect(0.09), 0), line(50*2.1e-4*rect(4), 0)}, 0.0669925368977769, 1e-15, 0},
		{"weighing", []BudgetLine{line(0.00017, 15), line(rect(0.0002), 0), line(rect(0.00005), 0)}, 0.000207525098883645, 1e-17, 33},
		// a thesis
		{"5 mL", []BudgetLine{line(0.0102062072, 0), line(0.013/2, 0), line(5*2.1e-4*rect(2), 0)}, 0.01216, 5e-6, 0},
		// EURACHEM/CITAC QUAM:2012 A1, the volume, as the documentation of the GTC package computes it
		{"QUAM A1 volume", []BudgetLine{line(tri(0.1), 0), line(0.02, 0), line(rect(0.084), 0)}, 0.0664730521841, 1e-12, 0},
		// an evaluation of a 250 mL measure by JJG 20-2001
		{"250 mL measure", []BudgetLine{line(1.002676*math.Hypot(0.009165/math.Sqrt(3), rect(0.15)), 0), line(250.02*0.000018, 0), line(rect(0.15/4), 0)}, 0.08976, 6e-6, 0},
		// JCGM 100:2008, H.1, nm
		{"GUM H.1", []BudgetLine{line(25, 18), line(9.7, 25.6), line(2.9, 50), line(16.6, 2)}, 31.66, 0.02, 16}, // its parts are printed rounded
		// JCGM 100:2008, G.4.1, %
		{"GUM G.4.1", []BudgetLine{line(0.25, 9), line(0.57, 4), line(0.82, 14)}, 1.03, 0.005, 18},
	} {
		got, err := Combine(c.lines, 0.95)
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(got.U-c.u) > c.tol {
			t.Errorf("%s: u %.16g, want %.16g", c.name, got.U, c.u)
		}
		if c.nu != 0 && math.Floor(float64(got.NuEff)) != c.nu {
			t.Errorf("%s: %.4f degrees of freedom, want %g and a fraction", c.name, float64(got.NuEff), c.nu)
		}
	}
	h1, _ := Combine([]BudgetLine{line(25, 18), line(9.7, 25.6), line(2.9, 50), line(16.6, 2)}, 0.99)
	near(t, "GUM H.1 u²/1000", h1.U*h1.U/1000, "1.00") // printed 1002 nm² from unrounded parts
	near(t, "GUM H.1 k", h1.K, "2.92")
	if math.Abs(float64(h1.NuEff)-16.7) > 0.1 { // from the rounded parts
		t.Errorf("GUM H.1: %.3f degrees of freedom", float64(h1.NuEff))
	}
	if math.Abs(h1.Expanded-93) > 0.6 {
		t.Errorf("GUM H.1: U99 %.2f nm", h1.Expanded)
	}
	// G.4.1: the printed 19.0 is rounded (18.9987), and the guide uses t for 19
	g41, _ := Combine([]BudgetLine{line(0.25, 9), line(0.57, 4), line(0.82, 14)}, 0.95)
	near(t, "GUM G.4.1 nu", float64(g41.NuEff), "19.0")
	near(t, "GUM G.4.1 U", g41.Expanded, "2.2")
}

// EURACHEM/CITAC QUAM:2012 A1 to A3 as the documentation of the GTC package computes them.
func TestQUAM(t *testing.T) {
	rect, tri := RectangularU, TriangularU
	relative := func(value float64, parts ...float64) float64 {
		sum := 0.0
		for _, p := range parts {
			sum += p * p
		}
		return value * math.Sqrt(sum)
	}
	a1 := relative(1002.7, 0.05/100.28, rect(0.0001)/0.9999, 0.0664730521841/100)
	if math.Abs(a1-0.835199) > 1e-5 {
		t.Errorf("A1: u(c) = %.7f mg/L", a1)
	}
	molar := 8*12.0107 + 5*1.00794 + 4*15.9994 + 39.0983
	uMolar := math.Sqrt(math.Pow(8*rect(0.0008), 2) + math.Pow(5*rect(0.00007), 2) + math.Pow(4*rect(0.0003), 2) + math.Pow(rect(0.0001), 2))
	mass := math.Sqrt2 * rect(0.00015) / 0.3888
	titrant := math.Hypot(tri(0.03), 0.006) / 18.64
	c2 := 1000 * 0.3888 / (molar * 18.64)
	if math.Abs(c2-0.102136159706) > 1e-12 {
		t.Errorf("A2: c = %.12f mol/L", c2)
	}
	if u := relative(c2, 0.0005, mass, rect(0.0005), titrant, uMolar/molar); math.Abs(u-0.000100500722124) > 1e-12 {
		t.Errorf("A2: u(c) = %.15f mol/L", u)
	}
	volume := func(ml, flow, tempML float64) float64 { return math.Hypot(tri(flow), rect(tempML*2.1e-4*4)) / ml }
	c3 := 1000 * 0.3888 * 14.89 / (18.64 * molar * 15)
	u3 := relative(c3, 0.001, mass, rect(0.0005), volume(14.89, 0.03, 15), volume(18.64, 0.03, 19), volume(15, 0.02, 15), uMolar/molar)
	if math.Abs(c3-0.10139) > 6e-6 || math.Abs(u3-0.0001843) > 6e-8 {
		t.Errorf("A3: c = %.6f, u = %.8f mol/L", c3, u3)
	}
}

// JCGM 100:2008 4.4.3: twenty readings. G.4.2: judged uncertainties.
func TestRepeated(t *testing.T) {
	r, err := Repeated([]float64{
		96.90, 98.18, 98.25, 98.61, 99.03, 99.49, 99.56, 99.74, 99.89, 100.07,
		100.33, 100.42, 100.68, 100.95, 101.11, 101.20, 101.57, 101.84, 102.36, 102.72,
	})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "mean", r.Mean, "100.145")
	near(t, "s", r.S, "1.489")
	near(t, "u", r.U, "0.333")
	for relative, want := range map[float64]DegreesOfFreedom{0.25: 8, 0.5: 2} {
		if nu, err := JudgedNu(relative); err != nil || nu != want {
			t.Errorf("judged %g: %g, %v", relative, float64(nu), err)
		}
	}
	if _, err := Repeated([]float64{1}); err == nil {
		t.Error("one observation gave a standard deviation")
	}
	if _, err := Repeated([]float64{1, math.NaN()}); err == nil {
		t.Error("NaN passed")
	}
	// a bore of 11 mm read within 0.1 mm: 0.0095 mL, between the 0.0090 and 0.0100 mL of
	// 50 mL burettes (geometry)
	near(t, "meniscus", MeniscusU(0.1, 11), "0.0095")
	near(t, "resolution", ResolutionU(1), "0.29") // JCGM 100:2008 F.2.2.1
}

// Made-up budgets of a flask and two pipettes; sensitivities from the Python package
// uncertainties 3.1.6. The model has no compressibility.
func TestSyntheticBudgets(t *testing.T) {
	type row struct{ value, u, nu, sensitivity, contribution float64 }
	rows, results := map[string]map[string]row{}, map[string]map[string]float64{}
	for _, r := range csvRows(t, "synthetic_budgets.csv") {
		if rows[r[0]] == nil {
			rows[r[0]], results[r[0]] = map[string]row{}, map[string]float64{}
		}
		if r[1] == "RESULT_V20" {
			results[r[0]]["RESULT_uc_mL"], results[r[0]]["RESULT_nu_eff"] = num(t, r[3]), num(t, r[4])
		}
		if r[5] == "" {
			results[r[0]][r[1]] = num(t, r[2])
			continue
		}
		x := row{num(t, r[2]), num(t, r[3]), num(t, r[4]), num(t, r[5]), num(t, r[6])}
		if x.nu >= 1e9 {
			x.nu = math.Inf(1)
		}
		rows[r[0]][r[1]] = x
	}
	if len(rows) != 3 {
		t.Fatalf("%d examples", len(rows))
	}
	for name, q := range rows {
		want := results[name]
		in := DefaultInputs()
		in.AirDensity, in.ExpansionPerC, in.WeightDensityKgM3 = "oiml-r111-simplified", q["g"].value, q["rb"].value
		air := Ambient{AirTempC: q["ta"].value, PressureHPa: q["p"].value, HumidityPct: q["h"].value}
		d := single(q["m"].value, q["tw"].value, air)
		v := Volume{NetMassG: d.After.MassG, AirDensityKgM3: oimlR111(air, 0)}
		var byWater, byAir [3]float64
		v.WaterDensityKgM3, byWater[0], _ = tanaka(q["tw"].value, normalHPa)
		byAir[0], byAir[1], byAir[2] = oimlR111Slopes(air, 0)
		v.Volume20ML = v.NetMassG * ZFactor(v.WaterDensityKgM3, v.AirDensityKgM3, in.WeightDensityKgM3) * GlassFactor(in.ExpansionPerC, q["tw"].value, 20)
		s := volumeSlopes(in, d, v, byWater, byAir)
		sensitivities := map[string]float64{
			"m": s.mass, "tw": s.waterTemp, "ta": s.airTemp, "p": s.pressure, "h": s.humidity, "rb": s.weightDensity, "g": s.expansionRel / in.ExpansionPerC,
			"drw": s.waterRel / v.WaterDensityKgM3, "dra": s.airRel / v.AirDensityKgM3, "dVm": 1, "dVe": 1, "dVr": 1,
		}
		var lines []BudgetLine
		for quantity, x := range q {
			if !within(sensitivities[quantity], x.sensitivity, 1e-8) {
				t.Errorf("%s, %s: sensitivity %.10g, want %.10g", name, quantity, sensitivities[quantity], x.sensitivity)
			}
			lines = append(lines, line(sensitivities[quantity]*x.u, x.nu))
		}
		got, err := Combine(lines, 0.954499736103642)
		if err != nil {
			t.Fatal(err)
		}
		checks := map[string][2]float64{
			"RESULT_V20": {v.Volume20ML, 1e-8}, "RESULT_uc_mL": {got.U, 1e-8}, "RESULT_nu_eff": {float64(got.NuEff), 1e-6},
			"RESULT_rho_w": {v.WaterDensityKgM3, 1e-10}, "RESULT_rho_a": {v.AirDensityKgM3, 1e-8},
			"RESULT_k_95.45_at_floor(nu)": {got.K, 3e-6}, "RESULT_U_k(nu)_mL": {got.Expanded, 1e-8}, "MC_u_mL": {got.U, 3e-3},
		}
		for key, c := range checks {
			if w, ok := want[key]; ok && !within(c[0], w, c[1]) {
				t.Errorf("%s, %s: %.12g, want %.12g", name, key, c[0], w)
			} else if !ok {
				t.Errorf("%s: no %s in the fixture", name, key)
			}
		}
	}
}

func TestVolumeWithBudget(t *testing.T) {
	d := single(9.9789, 21.4, Ambient{AirTempC: 21.3, PressureHPa: 1004.2, HumidityPct: 45})
	b, err := VolumeWithBudget(DefaultInputs(), d)
	if err != nil {
		t.Fatal(err)
	}
	share, square := 0.0, 0.0
	for _, l := range b.Lines {
		share += l.SharePct
		square += l.Contribution * l.Contribution
		if math.Abs(l.Sensitivity*l.U-l.Contribution) > 1e-15 {
			t.Errorf("%s: %g × %g is not %g", l.What, l.Sensitivity, l.U, l.Contribution)
		}
	}
	if math.Abs(share-100) > 1e-9 || math.Abs(math.Sqrt(square)-b.Combined.U) > 1e-15 || b.K < 1.99 || b.K > 2.01 {
		t.Errorf("shares %.12g %%, u %g, k %g", share, b.Combined.U, b.K)
	}
	if _, err := VolumeWithBudget(Inputs{}, d); err == nil {
		t.Error("empty inputs passed")
	}
}
