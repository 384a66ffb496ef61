package calc

import (
	"fmt"
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"
)

// denseCurve solves the same model another way: numerical derivatives of the volume by
// every variable, dense matrices, explicit inverses.
func denseCurve(t *testing.T, in Inputs, points []float64, ds []Delivery, birge float64) (c *mat.VecDense, cov *mat.Dense, chi2 float64) {
	t.Helper()
	a, y := denseSystem(in, points, ds)
	v := denseCovariance(in, ds, birge)
	var w, wa, normal, inverse, right mat.Dense
	must(t, w.Inverse(v))
	wa.Mul(&w, a)
	normal.Mul(a.T(), &wa)
	must(t, inverse.Inverse(&normal))
	right.Mul(wa.T(), y)
	var theta, r mat.VecDense
	theta.MulVec(&inverse, right.ColView(0))
	r.MulVec(a, &theta)
	r.SubVec(y, &r)
	return &theta, &inverse, mat.Inner(&r, &w, &r)
}

func denseSystem(in Inputs, points []float64, ds []Delivery) (*mat.Dense, *mat.VecDense) {
	n, p := len(ds), len(points)
	a, y := mat.NewDense(n, p, nil), mat.NewVecDense(n, nil)
	knots := append([]float64{0}, points...)
	hat := func(k int, x float64) float64 { // tent around knot k
		left, right := knots[k-1], math.Inf(1)
		if k < p {
			right = knots[k+1]
		}
		switch {
		case x <= left || x >= right:
			return 0
		case x <= knots[k]:
			return (x - left) / (knots[k] - left)
		}
		return (right - x) / (right - knots[k])
	}
	for i, d := range ds {
		y.SetVec(i, volume20(in, d, disturbed{})-d.End.ReadingML+d.Start.ReadingML)
		for k := 1; k <= p; k++ {
			a.Set(i, k-1, hat(k, d.End.ReadingML)-hat(k, d.Start.ReadingML))
		}
	}
	return a, y
}

func denseCovariance(in Inputs, ds []Delivery, birge float64) *mat.Dense {
	n := len(ds)
	v := mat.NewDense(n, n, nil)
	addOuter := func(scale float64, column []float64) {
		x := mat.NewVecDense(n, column)
		var outer mat.Dense
		outer.Outer(scale, x, x)
		v.Add(v, &outer)
	}
	for _, column := range factColumns(in, ds) {
		addOuter(birge*birge, column)
	}
	for _, column := range commonColumns(in, ds) {
		addOuter(1, column)
	}
	return v
}

func must(t *testing.T, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

// disturbed is a change of each variable that a volume depends on.
type disturbed struct {
	massG, waterC, airC, hPa, pct, water, air, expansion, sensitivity, weightKgM3 float64
}

// volume20 is the equation of the volume written out once more.
func volume20(in Inputs, d Delivery, e disturbed) float64 {
	amb := d.Ambient
	amb.AirTempC += e.airC
	amb.PressureHPa += e.hPa
	amb.HumidityPct += e.pct
	tw := d.Water.WaterTempC + e.waterC
	rw, err := WaterDensity(in.WaterDensity, tw, amb.PressureHPa)
	if err != nil {
		panic(err)
	}
	ra, err := AirDensity(in.AirDensity, amb, in.CO2Fraction)
	if err != nil {
		panic(err)
	}
	rw, ra = rw*(1+e.water), ra*(1+e.air)
	rb := in.WeightDensityKgM3 + e.weightKgM3
	massG := (d.After.MassG - d.Before.MassG + d.EvaporationG + e.massG) * (1 + e.sensitivity)
	glass := 1 - in.ExpansionPerC*(1+e.expansion)*(tw-in.ReferenceTempC)
	return massG * 1000 / (rw - ra) * (1 - ra/rb) * glass
}

// slope is the central difference of volume20 in one direction.
func slope(in Inputs, d Delivery, direction func(step float64) disturbed, step float64) float64 {
	return (volume20(in, d, direction(step)) - volume20(in, d, direction(-step))) / (2 * step)
}

func factColumns(in Inputs, ds []Delivery) map[string][]float64 {
	columns := map[string][]float64{}
	add := func(i int, kind string, number int64, x float64) {
		key := fmt.Sprintf("%s %d", kind, number)
		if columns[key] == nil {
			columns[key] = make([]float64, len(ds))
		}
		columns[key][i] += x
	}
	own := func(u, usual float64) float64 {
		if u > 0 {
			return u
		}
		return usual
	}
	for i, d := range ds {
		byMass := slope(in, d, func(s float64) disturbed { return disturbed{massG: s} }, 1e-3)
		byTemp := slope(in, d, func(s float64) disturbed { return disturbed{waterC: s} }, 1e-3)
		add(i, "w", d.After.Fact, byMass*own(d.After.UMassG, in.UWeighingG))
		add(i, "w", d.Before.Fact, -byMass*own(d.Before.UMassG, in.UWeighingG))
		add(i, "r", d.End.Fact, -own(d.End.UReadingML, in.UReadingML))
		add(i, "r", d.Start.Fact, own(d.Start.UReadingML, in.UReadingML))
		add(i, "t", d.Water.Fact, byTemp*own(d.Water.UWaterTempC, in.UWaterTempC))
		add(i, "d", int64(d.Delivery), in.UDeliveryML)
	}
	return columns
}

func commonColumns(in Inputs, ds []Delivery) [][]float64 {
	kinds := []struct {
		u, step   float64
		direction func(s float64) disturbed
	}{
		{in.UThermometerC, 1e-3, func(s float64) disturbed { return disturbed{waterC: s} }},
		{in.UAirTempC, 1e-2, func(s float64) disturbed { return disturbed{airC: s} }},
		{in.UPressureHPa, 1e-1, func(s float64) disturbed { return disturbed{hPa: s} }},
		{in.UHumidityPct, 1e-1, func(s float64) disturbed { return disturbed{pct: s} }},
		{in.UWaterDensityRel, 1e-5, func(s float64) disturbed { return disturbed{water: s} }},
		{in.UAirDensityRel, 1e-3, func(s float64) disturbed { return disturbed{air: s} }},
		{in.UExpansionRel, 1e-2, func(s float64) disturbed { return disturbed{expansion: s} }},
		{in.USensitivityRel, 1e-5, func(s float64) disturbed { return disturbed{sensitivity: s} }},
		{in.UWeightDensityKgM3, 10, func(s float64) disturbed { return disturbed{weightKgM3: s} }},
	}
	var out [][]float64
	for _, k := range kinds {
		column := make([]float64, len(ds))
		for i, d := range ds {
			column[i] = k.u * slope(in, d, k.direction, k.step)
		}
		out = append(out, column)
	}
	return out
}

// An implementation written differently must agree: 1e-9 in the curve, 1e-6 in the
// covariance, both relative.
func TestFitAgreesWithDenseSolution(t *testing.T) {
	for i, p := range patterns {
		b := newBench(p, uint64(100+i))
		ds := b.draw(b.wander())
		// one thermometer reading for all deliveries of a replicate, facts with their
		// own uncertainty, and scatter that the facts do not explain
		for j := range ds {
			switch i % 3 {
			case 0:
				ds[j].Water = ds[j/5*5].Water
			case 1:
				ds[j].Water = ds[0].Water
				ds[j].After.UMassG = 3e-4
				ds[j].End.UReadingML = 0.004
			case 2:
				ds[j].After.MassG += 0.08 * b.rng.NormFloat64()
			}
		}
		c, err := FitCurve(b.in, b.pointsML, ds)
		if err != nil {
			t.Fatal(err)
		}
		if i%3 == 2 && c.Birge <= 1 {
			t.Errorf("%v: Birge ratio %g in spite of the scatter, chi² %g of %d", p, c.Birge, c.Chi2, c.Nu)
		}
		_, _, chi2 := denseCurve(t, b.in, b.pointsML, ds, 1)
		want, cov, _ := denseCurve(t, b.in, b.pointsML, ds, c.Birge)
		if !within(c.Chi2, chi2, 1e-7) {
			t.Errorf("%v: chi² %.12g, want %.12g", p, c.Chi2, chi2)
		}
		for k := range b.pointsML {
			if got := c.Points[k].CorrectionML; math.Abs(got-want.AtVec(k)) > 1e-9*math.Abs(want.AtVec(k))+1e-12 {
				t.Errorf("%v, point %d: correction %.15g, want %.15g", p, k, got, want.AtVec(k))
			}
			for l := range b.pointsML {
				if got := c.CovarianceML2[k][l]; !within(got, cov.At(k, l), 1e-6) {
					t.Errorf("%v: covariance %d,%d %.12g, want %.12g", p, k, l, got, cov.At(k, l))
				}
			}
		}
	}
}

func within(got, want, relative float64) bool {
	return math.Abs(got-want) <= relative*math.Abs(want)
}
