package calc

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"testing"
)

func simulated(t *testing.T, model func(rng *rand.Rand) float64, s Simulation) *Outcome {
	t.Helper()
	o, err := Simulate(context.Background(), 1, func() Trial {
		return func(rng *rand.Rand, y []float64) { y[0] = model(rng) }
	}, s)
	if err != nil {
		t.Fatal(err)
	}
	return o
}

// JCGM 101:2008, 9.2 (additive model) and 9.3 (mass calibration with air buoyancy).
func TestSimulatePublishedExamples(t *testing.T) {
	sum := func(draw func(*rand.Rand) float64, last float64) func(*rand.Rand) float64 {
		return func(rng *rand.Rand) float64 { return draw(rng) + draw(rng) + draw(rng) + last*draw(rng) }
	}
	buoyancy := func(rng *rand.Rand) float64 {
		width := func(centre, half float64) float64 { return centre + half*(2*rng.Float64()-1) }
		mass := 100_000 + 0.050*rng.NormFloat64() + 1.234 + 0.020*rng.NormFloat64()
		air, weight, reference := width(1.2, 0.1), width(8000, 1000), width(8000, 50)
		return mass*(1+(air-1.2)*(1/weight-1/reference)) - 100_000
	}
	for _, c := range []struct {
		name                      string
		model                     func(*rand.Rand) float64
		mean, u, low, up          float64
		tolMean, tolU, tolUncover float64
		shortest                  bool
	}{
		{"9.2.2 four normal", sum((*rand.Rand).NormFloat64, 1), 0, 2.00, -3.92, 3.92, 0.01, 0.01, 0.02, false},
		{"9.2.3 four rectangular", sum(rectangular, 1), 0, 2.00, -3.88, 3.88, 0.01, 0.01, 0.02, false},
		{"9.2.4 one dominates", sum(rectangular, 10), 0, 10.1, -17.0, 17.0, 0.05, 0.06, 0.06, false},
		// the interval's ends: published from 4.5e5 trials, to 0.002
		{"9.3 buoyancy", buoyancy, 1.2341, 0.0754, 1.0834, 1.3825, 3e-4, 3e-4, 2.5e-3, true},
	} {
		o := simulated(t, c.model, Simulation{Trials: 1_000_000, Seed: 7, Probability: 0.95})
		if math.Abs(o.Mean[0]-c.mean) > c.tolMean || math.Abs(o.U[0]-c.u) > c.tolU {
			t.Errorf("%s: mean %.5f u %.5f, want %.5f and %.5f", c.name, o.Mean[0], o.U[0], c.mean, c.u)
		}
		i := o.Symmetric[0]
		if c.shortest {
			i = o.Shortest[0]
		}
		if math.Abs(i.Low-c.low) > c.tolUncover || math.Abs(i.Up-c.up) > c.tolUncover {
			t.Errorf("%s: %v, want %g to %g", c.name, i, c.low, c.up)
		}
	}
}

// The numerical tolerance: the first case is the example of JCGM 101:2008, 7.9.2 (from
// memory), the others follow from its definition.
func TestNumericalTolerance(t *testing.T) {
	for _, c := range []struct{ u, want float64 }{
		{0.00035, 0.000005}, {0.0075, 0.00005}, {2, 0.05}, {0.0996, 0.005}, {0.0994, 0.0005}, {0, 0},
	} {
		if got := NumericalTolerance(c.u); math.Abs(got-c.want) > 1e-12 {
			t.Errorf("tolerance for u = %g: %g, want %g", c.u, got, c.want)
		}
	}
}

func TestSimulateDoesNotDependOnWorkers(t *testing.T) {
	b := newBench(patterns[1], 3)
	ds := b.draw(b.wander())
	var first *MonteCarloResult
	for _, workers := range []int{1, 3} {
		r, err := MonteCarlo(context.Background(), b.in, b.pointsML, ds, Simulation{Trials: 60_000, Seed: 5, Workers: workers})
		if err != nil {
			t.Fatal(err)
		}
		if first == nil {
			first = r
		} else if !reflect.DeepEqual(first, r) {
			t.Errorf("%d workers give another result than one", workers)
		}
	}
	other, err := MonteCarlo(context.Background(), b.in, b.pointsML, ds, Simulation{Trials: 60_000, Seed: 6})
	if err != nil {
		t.Fatal(err)
	}
	if other.Points[0].UML == first.Points[0].UML {
		t.Error("another seed gives the same result")
	}
}

func TestSimulateAdaptive(t *testing.T) {
	o := simulated(t, (*rand.Rand).NormFloat64, Simulation{Seed: 2, Probability: 0.9545})
	if !o.Stable || o.Trials < 20_000 || o.Trials > 1_000_000 {
		t.Errorf("stable %v after %d trials", o.Stable, o.Trials)
	}
	if math.Abs(o.U[0]-1) > 0.05 || math.Abs(o.Symmetric[0].Up-2) > 0.05 {
		t.Errorf("u %g, interval %v", o.U[0], o.Symmetric[0])
	}
	o = simulated(t, (*rand.Rand).NormFloat64, Simulation{Seed: 2, Probability: 0.9545, MaxTrials: 30_000, Tolerance: 1e-3})
	if o.Stable || o.Trials != 30_000 {
		t.Errorf("stable %v after %d trials, want the bound to end it", o.Stable, o.Trials)
	}
}

func TestSimulateRefuses(t *testing.T) {
	constant := func() Trial { return func(_ *rand.Rand, y []float64) { y[0] = 3 } }
	o, err := Simulate(context.Background(), 1, constant, Simulation{Trials: 10_000, Probability: 0.95})
	if err != nil || o.Mean[0] != 3 || o.U[0] != 0 || math.Abs(o.Symmetric[0].Low-3) > 1e-12 {
		t.Errorf("a constant gives %v, %v", o, err)
	}
	cancelled, cancel := context.WithCancel(context.Background())
	cancel()
	if _, err := Simulate(cancelled, 1, constant, Simulation{Trials: 100_000, Probability: 0.95}); !errors.Is(err, context.Canceled) {
		t.Errorf("cancelled: %v", err)
	}
	broken := func() Trial { return func(_ *rand.Rand, y []float64) { y[0] = math.NaN() } }
	if _, err := Simulate(context.Background(), 1, broken, Simulation{Trials: 100_000, Probability: 0.95}); err == nil {
		t.Error("a model that gives NaN passed")
	}
	if _, err := Simulate(context.Background(), 0, constant, Simulation{Probability: 0.95}); err == nil {
		t.Error("no outputs passed")
	}
}

// In ordinary cases the simulation agrees with the first-order result within the
// tolerance of JCGM 101, or its noise cannot tell.
func TestMonteCarloAgreesWithFirstOrder(t *testing.T) {
	for i, p := range []pattern{patterns[0], patterns[4], patterns[8]} {
		b := newBench(p, uint64(20+i))
		r, err := MonteCarlo(context.Background(), b.in, b.pointsML, b.draw(b.wander()), Simulation{Trials: 400_000, Seed: 1})
		if err != nil {
			t.Fatal(err)
		}
		if r.Agreement == Differs {
			t.Errorf("%v: first order and simulation differ: %+v", p, r.Points)
		}
		for _, m := range r.Points {
			if math.Abs(m.UML/m.FirstOrder.UML-1) > 0.005 {
				t.Errorf("%v at %g mL: u %.6f by simulation, %.6f first order", p, m.ReadingML, m.UML, m.FirstOrder.UML)
			}
			if math.Abs(m.CorrectionML-m.FirstOrder.CorrectionML) > 5*m.UML/math.Sqrt(400_000)+1e-6 {
				t.Errorf("%v at %g mL: mean %.7f, first order %.7f", p, m.ReadingML, m.CorrectionML, m.FirstOrder.CorrectionML)
			}
		}
	}
}

// Near its greatest density the water's volume depends on the square of the
// temperature error, which a first-order budget does not see: the comparison must say so.
func TestMonteCarloReportsWhereFirstOrderFails(t *testing.T) {
	b := newBench(pattern{"from-zero", "separate", 2}, 4)
	b.in.UReadingML, b.in.UDeliveryML, b.in.UThermometerC, b.in.UWaterTempC = 1e-4, 1e-4, 1.2, 0
	ds := b.draw(b.wander())
	for i := range ds {
		ds[i].Water.WaterTempC = 4.7 // where water and glass together turn round
		ds[i].Ambient.AirTempC = 6
	}
	r, err := MonteCarlo(context.Background(), b.in, b.pointsML, ds, Simulation{Trials: 200_000, Seed: 1})
	if err != nil {
		t.Fatal(err)
	}
	if r.Agreement != Differs {
		t.Errorf("agreement %q: %+v", r.Agreement, r.Points)
	}
}

// Where the Birge ratio scaled the random part, the simulation draws its scale: the
// intervals then agree with Student's factor on the first-order u.
func TestMonteCarloWithBirge(t *testing.T) {
	b := newBench(pattern{"stepwise", "separate", 4}, 8)
	ds := b.draw(b.wander())
	for i := range ds {
		ds[i].After.MassG += 0.05 * b.rng.NormFloat64()
	}
	r, err := MonteCarlo(context.Background(), b.in, b.pointsML, ds, Simulation{Trials: 300_000, Seed: 1})
	if err != nil {
		t.Fatal(err)
	}
	for _, m := range r.Points {
		if math.IsInf(float64(m.FirstOrder.NuEff), 1) {
			t.Fatal("the Birge ratio did not come in")
		}
		if half := (m.SymmetricML.Up - m.SymmetricML.Low) / 2; math.Abs(half/m.FirstOrder.ExpandedML-1) > 0.01 {
			t.Errorf("at %g mL: half-width %.5f, U %.5f", m.ReadingML, half, m.FirstOrder.ExpandedML)
		}
	}
}
