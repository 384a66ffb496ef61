package calc

import (
	"encoding/json"
	"errors"
	"math"
	"slices"
	"strings"
	"testing"

	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"
)

// fitted fits or ends the test.
func fitted(t interface{ Fatal(args ...any) }, in Inputs, points []float64, ds []Delivery) *Curve {
	c, err := FitCurve(in, points, ds)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// quietBench draws without any error: what is left is the curve, straight between the
// points.
func quietBench(p pattern, seed uint64) (*bench, hidden) {
	b := newBench(p, seed)
	h := b.wander()
	for k := range h {
		left := k / 100 * 100
		right := min(left+100, len(h)-2)
		if right > left {
			h[k] = h[left] + (h[right]-h[left])*float64(k-left)/float64(right-left)
		}
	}
	b.in.UWeighingG, b.in.UReadingML, b.in.UWaterTempC, b.in.UDeliveryML = 1e-12, 1e-12, 0, 0
	b.in.UThermometerC, b.in.UAirTempC, b.in.UPressureHPa, b.in.UHumidityPct = 0, 0, 0, 0
	b.in.UWaterDensityRel, b.in.UAirDensityRel, b.in.UExpansionRel, b.in.USensitivityRel, b.in.UWeightDensityKgM3 = 0, 0, 0, 0, 0
	return b, h
}

// Without errors every pattern gives the true curve, so that all patterns agree, and
// mixed patterns too.
func TestPatternsAgree(t *testing.T) {
	for i := range patterns {
		b, h := quietBench(patterns[i], 77)
		ds := b.draw(h)
		if i > 0 { // a second run with another pattern joins in
			b.pattern = patterns[i-1]
			for _, d := range b.draw(h) {
				d.Delivery += 1000
				for _, f := range []*int64{&d.Before.Fact, &d.After.Fact, &d.Start.Fact, &d.End.Fact, &d.Water.Fact} {
					*f += 10_000
				}
				ds = append(ds, d)
			}
		}
		c := fitted(t, DefaultInputs(), b.pointsML, ds)
		for k, p := range c.Points {
			if want := h.at(p.ReadingML); math.Abs(p.CorrectionML-want) > 1e-8 {
				t.Errorf("%v, point %d: %.10f, true %.10f", patterns[i], k, p.CorrectionML, want)
			}
		}
		if c.Chi2 > 1e-6 || c.Birge != 1 {
			t.Errorf("%v: chi² %g, Birge %g", patterns[i], c.Chi2, c.Birge)
		}
	}
}

// A balance and a reading without error beside a poor thermometer, and the other way
// round: the equations stay solvable, to a hundredth of u.
func TestFitExtremeUncertainties(t *testing.T) {
	for name, change := range map[string]func(*Inputs){
		"facts exact":  func(in *Inputs) { in.UWeighingG, in.UReadingML, in.UDeliveryML, in.UWaterTempC = 1e-9, 1e-9, 0, 0 },
		"facts poor":   func(in *Inputs) { in.UWeighingG, in.UReadingML, in.UDeliveryML = 1, 10, 10 },
		"common exact": func(in *Inputs) { in.UThermometerC, in.UAirDensityRel, in.UWaterDensityRel = 0, 0, 0 },
		"common poor":  func(in *Inputs) { in.UThermometerC, in.UAirDensityRel, in.UWaterDensityRel = 10, 0.2, 1e-2 },
	} {
		b, h := quietBench(patterns[0], 6)
		in := DefaultInputs()
		change(&in)
		c := fitted(t, in, b.pointsML, b.draw(h))
		for _, p := range c.Points {
			if math.Abs(p.CorrectionML-h.at(p.ReadingML)) > 0.01*p.UML+1e-7 || !(p.UML > 0) {
				t.Errorf("%s: %+v, true %.9f", name, p, h.at(p.ReadingML))
			}
		}
	}
}

// classical is equal replicates at nominal readings and one water temperature.
func classical(p pattern, seed uint64) (*bench, []Delivery) {
	b := newBench(p, seed)
	b.jitterML = 0
	ds := b.draw(b.wander())
	for i := range ds {
		ds[i].Water.WaterTempC = 21.4
	}
	return b, ds
}

// In the classical case the solution is the hand calculation: the mean of the replicates
// in each interval, summed up the scale; or, from zero, the mean at each point. With
// equal weights it is that exactly. What comes from temperature, and what the run
// shares, follows each delivery's own volume, by which replicates differ in weight by
// some 1e-3 of a small share: a tenth of a nanolitre.
func TestClassicalCase(t *testing.T) {
	for i, p := range patterns {
		b, ds := classical(p, uint64(i))
		byHand := handCalculation(t, b, ds)
		equal := b.in
		equal.UWaterTempC, equal.UThermometerC, equal.UAirTempC, equal.UPressureHPa, equal.UHumidityPct = 0, 0, 0, 0, 0
		equal.UWaterDensityRel, equal.UAirDensityRel, equal.UExpansionRel, equal.USensitivityRel, equal.UWeightDensityKgM3 = 0, 0, 0, 0, 0
		for tolerance, in := range map[float64]Inputs{1e-12: equal, 2e-7: b.in} {
			c := fitted(t, in, b.pointsML, ds)
			for k, want := range byHand {
				if math.Abs(c.Points[k].CorrectionML-want) > tolerance {
					t.Errorf("%v, point %d: %.13f, by hand %.13f", p, k, c.Points[k].CorrectionML, want)
				}
			}
		}
	}
}

func handCalculation(t *testing.T, b *bench, ds []Delivery) []float64 {
	t.Helper()
	out := make([]float64, len(b.pointsML))
	for _, d := range ds {
		v, err := DeliveryVolume(b.in, d)
		if err != nil {
			t.Fatal(err)
		}
		out[slices.Index(b.pointsML, d.PointML)] += v.CorrectionML / float64(b.pattern.replicates)
	}
	for k := 1; k < len(out) && b.pattern.reading == "stepwise"; k++ {
		out[k] += out[k-1]
	}
	return out
}

// An error of a shared reading moves its own point and cancels in the next interval.
func TestSharedReadingCancels(t *testing.T) {
	b, ds := classical(pattern{"stepwise", "separate", 3}, 5)
	before := fitted(t, b.in, b.pointsML, ds)
	const misread = 0.01
	for i := range ds {
		if ds[i].End.ReadingML == 20 {
			ds[i].End.ReadingML -= misread
		}
		if ds[i].Start.ReadingML == 20 {
			ds[i].Start.ReadingML -= misread
		}
	}
	after := fitted(t, b.in, b.pointsML, ds)
	for k := range b.pointsML {
		moved, want := after.Points[k].CorrectionML-before.Points[k].CorrectionML, 0.0
		if b.pointsML[k] == 20 {
			want = misread
		}
		if math.Abs(moved-want) > 1e-4 {
			t.Errorf("%g mL moved by %.6f, want %g", b.pointsML[k], moved, want)
		}
	}
	// and u of a stepwise curve grows far less than with the root of the intervals
	if ratio := before.Points[4].UML / before.Points[0].UML; ratio > 1.6 {
		t.Errorf("u grows by %.2f over five intervals", ratio)
	}
}

func TestFitProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		p := rapid.SampledFrom(patterns).Draw(t, "pattern")
		b := newBench(p, rapid.Uint64().Draw(t, "seed"))
		ds := b.draw(b.wander())
		c := fitted(t, b.in, b.pointsML, ds)

		var chol mat.Cholesky
		cov := mat.NewSymDense(len(c.Points), nil)
		for i := range c.Points {
			for j := i; j < len(c.Points); j++ {
				cov.SetSym(i, j, c.CovarianceML2[i][j])
			}
		}
		if !chol.Factorize(cov) {
			t.Error("the covariance is not positive definite")
		}

		shuffled := slices.Clone(ds)
		b.rng.Shuffle(len(shuffled), func(i, j int) { shuffled[i], shuffled[j] = shuffled[j], shuffled[i] })
		other := fitted(t, b.in, b.pointsML, shuffled)

		const scale = 3.7
		in, points := scaled(b.in, b.pointsML, ds, scale)
		large := fitted(t, in, points, scaleDeliveries(ds, scale))
		for i := range c.Points {
			if math.Abs(other.Points[i].CorrectionML-c.Points[i].CorrectionML) > 1e-12 || !within(other.Points[i].UML, c.Points[i].UML, 1e-10) {
				t.Errorf("the order of the deliveries matters: %+v and %+v", c.Points[i], other.Points[i])
			}
			if math.Abs(large.Points[i].CorrectionML-scale*c.Points[i].CorrectionML) > 1e-11 || !within(large.Points[i].UML, scale*c.Points[i].UML, 1e-9) {
				t.Errorf("a burette %g times as large: %+v and %+v", scale, c.Points[i], large.Points[i])
			}
		}
		checkBudget(t, c)
	})
}

func scaled(in Inputs, points []float64, _ []Delivery, scale float64) (Inputs, []float64) {
	in.UWeighingG *= scale
	in.UReadingML *= scale
	in.UDeliveryML *= scale
	large := make([]float64, len(points))
	for i, p := range points {
		large[i] = scale * p
	}
	return in, large
}

func scaleDeliveries(ds []Delivery, scale float64) []Delivery {
	out := slices.Clone(ds)
	for i := range out {
		d := &out[i]
		for _, x := range []*float64{&d.PointML, &d.Before.MassG, &d.After.MassG, &d.Start.ReadingML, &d.End.ReadingML} {
			*x *= scale
		}
	}
	return out
}

// The contributions of a point add up to its u, and the shares to 100 %.
func checkBudget(t interface{ Errorf(string, ...any) }, c *Curve) {
	for i, p := range c.Points {
		lines, err := c.Budget(i)
		if err != nil {
			t.Errorf("%v", err)
			return
		}
		share := 0.0
		for _, l := range lines {
			share += l.SharePct
			if math.Abs(l.Sensitivity*l.U*max(c.Birge, 1)-l.Contribution) > 1e-12 && c.Birge == 1 {
				t.Errorf("%s: %g × %g is not %g", l.What, l.Sensitivity, l.U, l.Contribution)
			}
		}
		sum, err := Combine(lines, 0.9545)
		if err != nil || !within(sum.U, p.UML, 1e-9) || math.Abs(share-100) > 1e-9 {
			t.Errorf("point %d: budget %.12g mL, u %.12g mL, shares %g %%, %v", i, sum.U, p.UML, share, err)
		}
	}
	if _, err := c.Budget(len(c.Points)); err == nil {
		t.Errorf("a budget beyond the last point")
	}
}

// The leave-one-out residual is what the other deliveries predict, by the conditional
// expectation written out with dense matrices.
func TestLeaveOneOut(t *testing.T) {
	for i, p := range patterns[:4] {
		b := newBench(p, uint64(40+i))
		ds := b.draw(b.wander())
		c := fitted(t, b.in, b.pointsML, ds)
		a, y := denseSystem(b.in, b.pointsML, ds)
		v := denseCovariance(b.in, ds, c.Birge)
		for k, r := range c.Residuals {
			rest := slices.Delete(slices.Clone(ds), k, k+1)
			theta, _, _ := denseCurve(t, b.in, b.pointsML, rest, c.Birge)
			predicted := conditional(t, a, y, v, theta, k)
			if want := y.AtVec(k) - predicted; math.Abs(r.LeaveOneOutML-want) > 1e-8 || !r.Checked || r.Delivery != ds[k].Delivery {
				t.Errorf("%v, delivery %d: %+v, want %.9f", p, k, r, want)
			}
			if math.Signbit(r.Normalised) != math.Signbit(r.LeaveOneOutML) {
				t.Errorf("the normalised residual changes its sign: %+v", r)
			}
		}
	}
}

// conditional is A_k·c + V_k·V⁻¹·(y − A·c) over the rows but k.
func conditional(t *testing.T, a *mat.Dense, y *mat.VecDense, v *mat.Dense, theta *mat.VecDense, k int) float64 {
	n := y.Len()
	var rows []int
	for i := range n {
		if i != k {
			rows = append(rows, i)
		}
	}
	vv, rest := mat.NewDense(n-1, n-1, nil), mat.NewVecDense(n-1, nil)
	for i, row := range rows {
		rest.SetVec(i, y.AtVec(row)-mat.Dot(a.RowView(row), theta))
		for j, column := range rows {
			vv.Set(i, j, v.At(row, column))
		}
	}
	var weighted mat.VecDense
	must(t, weighted.SolveVec(vv, rest))
	out := mat.Dot(a.RowView(k), theta)
	for i, row := range rows {
		out += v.At(k, row) * weighted.AtVec(i)
	}
	return out
}

// A delivery that is off is flagged, stays in the curve, and the others are not flagged.
func TestResidualFlags(t *testing.T) {
	b := newBench(pattern{"from-zero", "separate", 4}, 12)
	ds := b.draw(b.wander())
	ds[7].After.MassG += 0.1
	c := fitted(t, b.in, b.pointsML, ds)
	for _, r := range c.Residuals {
		if r.Flag != (r.Delivery == 8) {
			t.Errorf("%+v", r)
		}
	}
	// without redundancy nothing can be checked
	single := newBench(pattern{"stepwise", "separate", 1}, 1)
	c = fitted(t, single.in, single.pointsML, single.draw(single.wander()))
	for _, r := range c.Residuals {
		if r.Checked || r.Flag || r.Normalised != 0 {
			t.Errorf("one replicate: %+v", r)
		}
	}
	if c.Nu != 0 || c.Chi2Limit != 0 || c.Birge != 1 {
		t.Errorf("one replicate: nu %d, limit %g, Birge %g", c.Nu, c.Chi2Limit, c.Birge)
	}
}

func TestAtAndBetween(t *testing.T) {
	b := newBench(patterns[0], 9)
	c := fitted(t, b.in, b.pointsML, b.draw(b.wander()))
	for _, p := range c.Points {
		if got := at(t, c, 0, p.ReadingML); math.Abs(got.CorrectionML-p.CorrectionML) > 1e-15 || !within(got.UML, p.UML, 1e-12) || got.K != p.K {
			t.Errorf("at a point: %+v, want %+v", got, p)
		}
	}
	middle := at(t, c, 0, 15)
	if want := (c.Points[0].CorrectionML + c.Points[1].CorrectionML) / 2; math.Abs(middle.CorrectionML-want) > 1e-15 {
		t.Errorf("in the middle: %g, want %g", middle.CorrectionML, want)
	}
	// variance of the mean of two points and of a Brownian bridge of 10 mL in its middle
	linear := (c.CovarianceML2[0][0] + 2*c.CovarianceML2[0][1] + c.CovarianceML2[1][1]) / 4
	bridge := c.BridgeRateML2PerML * 5 * 5 / 10
	if want := math.Sqrt(linear + bridge); !within(middle.UML, want, 1e-12) {
		t.Errorf("u in the middle %g, want %g", middle.UML, want)
	}
	if want := (linear + bridge) * (linear + bridge) / (bridge * bridge / 5); c.Birge == 1 && !within(float64(middle.NuEff), want, 1e-12) {
		t.Errorf("nu in the middle %g, want %g", float64(middle.NuEff), want)
	}
	// two readings of one interval: a bridge increment of length 2 in 10
	near := at(t, c, 14, 16)
	u2 := 0.04*(c.CovarianceML2[0][0]-2*c.CovarianceML2[0][1]+c.CovarianceML2[1][1]) + c.BridgeRateML2PerML*2*8/10
	if !within(near.UML, math.Sqrt(u2), 1e-9) {
		t.Errorf("u of 14 to 16 mL %g, want %g", near.UML, math.Sqrt(u2))
	}
	same := at(t, c, 13, 13)
	if same.CorrectionML != 0 || same.UML > 1e-12 {
		t.Errorf("from 13 to 13 mL: %+v", same)
	}
	forth, back := at(t, c, 12, 37), at(t, c, 37, 12)
	if forth.CorrectionML != -back.CorrectionML || !within(forth.UML, back.UML, 1e-12) {
		t.Errorf("forth %+v, back %+v", forth, back)
	}
	for _, r := range []float64{-0.01, 50.01, math.NaN(), math.Inf(1)} {
		if _, err := c.At(r); !errors.Is(err, ErrOutsideCurve) {
			t.Errorf("at %g: %v", r, err)
		}
		if _, err := c.Between(r, 10); !errors.Is(err, ErrOutsideCurve) {
			t.Errorf("from %g: %v", r, err)
		}
	}
}

func TestFitRefuses(t *testing.T) {
	b := newBench(patterns[0], 2)
	good := b.draw(b.wander())
	for _, c := range []struct {
		name   string
		points []float64
		change func(*Inputs, []Delivery) []Delivery
		is     error
		says   string
	}{
		{"no points", nil, nil, nil, "0 points"},
		{"no deliveries", b.pointsML, func(*Inputs, []Delivery) []Delivery { return nil }, nil, "0 deliveries"},
		{"falling points", []float64{20, 10}, nil, nil, "rise"},
		{"a point at the first mark", []float64{0, 10}, nil, nil, "rise"},
		{"beyond the last point", []float64{10, 20, 30, 40}, nil, ErrOutsideCurve, "delivery 5"},
		{"a point untouched", []float64{10, 20, 30, 40, 50, 60, 70}, nil, ErrUndetermined, "60 mL"},
		{"a point not separated", b.pointsML, func(_ *Inputs, ds []Delivery) []Delivery {
			out := ds[:0]
			for _, d := range ds { // every delivery that ends or starts at 30 mL becomes one across it
				if d.PointML == 40 {
					continue
				}
				if d.PointML == 30 {
					d.End.ReadingML = 40
				}
				out = append(out, d)
			}
			for i := range out {
				out[i].Start.ReadingML = math.Round(out[i].Start.ReadingML/10) * 10
				out[i].End.ReadingML = math.Round(out[i].End.ReadingML/10) * 10
			}
			return out
		}, ErrUndetermined, "30 mL"},
		{"inputs", b.pointsML, func(in *Inputs, ds []Delivery) []Delivery { in.UReadingML = -1; return ds }, nil, "u_reading_mL"},
		{"water", b.pointsML, func(_ *Inputs, ds []Delivery) []Delivery { ds[3].Water.WaterTempC = 41; return ds }, ErrOutsideRange, "delivery 4"},
		{"negative uncertainty", b.pointsML, func(_ *Inputs, ds []Delivery) []Delivery { ds[4].End.UReadingML = -0.01; return ds }, nil, "delivery 5"},
		{"numbered twice", b.pointsML, func(_ *Inputs, ds []Delivery) []Delivery { ds[3].Delivery = 1; return ds }, nil, "twice"},
		{"reading not a number", b.pointsML, func(_ *Inputs, ds []Delivery) []Delivery { ds[0].Start.ReadingML = math.NaN(); return ds }, nil, "delivery 1"},
	} {
		in, ds := b.in, slices.Clone(good)
		if c.change != nil {
			ds = c.change(&in, ds)
		}
		_, err := FitCurve(in, c.points, ds)
		if err == nil || c.is != nil && !errors.Is(err, c.is) || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s: %v", c.name, err)
		}
	}
}

// A delivery across two intervals separates nothing by itself: two points of which only
// the sum of their hats is seen.
func TestFitNamesTheOpenPoint(t *testing.T) {
	b, h := quietBench(pattern{"from-zero", "separate", 2}, 3)
	b.in = DefaultInputs()
	b.pointsML = []float64{15}
	ds := b.draw(h) // all end at 15 mL, less up to 0.05 mL
	for i := range ds {
		ds[i].End.ReadingML = 15
	}
	_, err := FitCurve(b.in, []float64{10, 20}, ds)
	if !errors.Is(err, ErrUndetermined) {
		t.Errorf("%v", err)
	}
}

// A curve travels as JSON: without NaN or infinity, and it answers the same afterwards.
func TestCurveJSON(t *testing.T) {
	b := newBench(patterns[0], 9)
	c := fitted(t, b.in, b.pointsML, b.draw(b.wander()))
	text, err := json.Marshal(c)
	if err != nil {
		t.Fatal(err)
	}
	for _, key := range []string{`"reading_mL":10`, `"nu_eff":null`, `"covariance_mL2"`, `"chi2"`, `"nu":5`, `"birge":1`, `"bridge_rate_mL2_per_mL"`} {
		if !strings.Contains(string(text), key) {
			t.Errorf("no %s in %.300s", key, text)
		}
	}
	var back Curve
	must(t, json.Unmarshal(text, &back))
	for _, r := range []float64{0, 3.3, 10, 27.18, 50} {
		if got, want := at(t, &back, 0, r), at(t, c, 0, r); got != want {
			t.Errorf("at %g: %+v, want %+v", r, got, want)
		}
	}
	for name, bad := range map[string]string{
		"empty": `{}`, "no covariance": `{"points":[{"reading_mL":10}],"bridge_nu":1}`, "no number": `[]`,
		"not square": `{"points":[{"reading_mL":10}],"bridge_nu":1,"covariance_mL2":[[1,2]],"random_covariance_mL2":[[1]]}`,
	} {
		if err := json.Unmarshal([]byte(bad), new(Curve)); err == nil {
			t.Errorf("%s passed", name)
		}
	}
}

func TestInputsCheck(t *testing.T) {
	must(t, DefaultInputs().Check())
	for key, change := range map[string]func(*Inputs){
		"co2_fraction":         func(in *Inputs) { in.CO2Fraction = 0.5 },
		"u_weighing_g":         func(in *Inputs) { in.UWeighingG = 0 },
		"u_thermometer_C":      func(in *Inputs) { in.UThermometerC = math.NaN() },
		"coverage_probability": func(in *Inputs) { in.CoverageProbability = 95.45 },
		"weight_density_kg_m3": func(in *Inputs) { in.WeightDensityKgM3 = math.Inf(1) },
	} {
		in := DefaultInputs()
		change(&in)
		if err := in.Check(); err == nil || !strings.Contains(err.Error(), key) {
			t.Errorf("%s: %v", key, err)
		}
	}
}

// Whatever stands in a fact, the answer is an error or finite.
func TestFitNeverGivesNaN(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b := newBench(rapid.SampledFrom(patterns).Draw(t, "pattern"), rapid.Uint64().Draw(t, "seed"))
		ds := b.draw(b.wander())
		d := &ds[rapid.IntRange(0, len(ds)-1).Draw(t, "delivery")]
		field := rapid.SampledFrom([]*float64{
			&d.Before.MassG, &d.After.MassG, &d.After.UMassG, &d.Start.ReadingML, &d.End.ReadingML, &d.End.UReadingML, &d.Water.WaterTempC,
			&d.Water.UWaterTempC, &d.Ambient.AirTempC, &d.Ambient.PressureHPa, &d.Ambient.HumidityPct, &d.EvaporationG,
		}).Draw(t, "field")
		*field = rapid.SampledFrom([]float64{0, -1, 1e-300, 1e9, 1e300, math.MaxFloat64, math.NaN(), math.Inf(1), math.Inf(-1)}).Draw(t, "value")
		c, err := FitCurve(b.in, b.pointsML, ds)
		if err != nil {
			return
		}
		for _, p := range append(slices.Clone(c.Points), at2(c, 17.3)) {
			for _, x := range []float64{p.CorrectionML, p.UML, p.K, p.ExpandedML, c.Chi2, c.Birge, c.BridgeRateML2PerML} {
				if math.IsNaN(x) || math.IsInf(x, 0) {
					t.Fatalf("%+v", p)
				}
			}
			if math.IsNaN(float64(p.NuEff)) {
				t.Fatalf("%+v", p)
			}
		}
		if _, err := json.Marshal(c); err != nil {
			t.Fatal(err)
		}
	})
}

func at2(c *Curve, readingML float64) Point {
	p, _ := c.At(readingML)
	return p
}
