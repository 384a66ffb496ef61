package calc

import (
	"math"
	"math/rand/v2"
)

// pattern is how a simulated calibration is read and weighed.
type pattern struct {
	reading    string // stepwise or from-zero
	weighing   string // separate, running or tared
	replicates int
}

// bench draws calibrations with every error the model knows.
type bench struct {
	in       Inputs
	pointsML []float64
	pattern  pattern
	rate     float64 // of the hidden curve's wandering, mL²/mL
	scatter  float64 // of readings and deliveries, as a multiple of what the inputs state
	jitterML float64 // the operator stops this close to the mark, at or above it
	rng      *rand.Rand
}

// hidden is a true curve on a grid of a tenth of a millilitre, linear between.
type hidden []float64

const gridML = 0.1

func (h hidden) at(readingML float64) float64 {
	k := int(readingML / gridML)
	k = max(0, min(k, len(h)-2))
	share := readingML/gridML - float64(k)
	return h[k]*(1-share) + h[k+1]*share
}

// wander draws a Brownian curve from 0 at the first mark.
func (b *bench) wander() hidden {
	last := b.pointsML[len(b.pointsML)-1]
	h := make(hidden, int(math.Round(last/gridML))+2)
	for k := 1; k < len(h); k++ {
		h[k] = h[k-1] + math.Sqrt(b.rate*gridML)*b.rng.NormFloat64()
	}
	return h
}

// errors that one run shares.
type sharedErrors struct {
	thermometerC, airTempC, pressureHPa, humidityPct, water, air, expansion, sensitivity, weightKgM3 float64
}

func (b *bench) drawShared() sharedErrors {
	n, in := b.rng.NormFloat64, b.in
	return sharedErrors{
		n() * in.UThermometerC, n() * in.UAirTempC, n() * in.UPressureHPa, n() * in.UHumidityPct,
		n() * in.UWaterDensityRel, n() * in.UAirDensityRel, n() * in.UExpansionRel, n() * in.USensitivityRel, n() * in.UWeightDensityKgM3,
	}
}

// balanceG gives the reading of a balance for a true volume at the reference
// temperature: the model of the delivery turned round.
func (b *bench) balanceG(volume20ML, waterC float64, air Ambient, e sharedErrors) float64 {
	t := waterC + e.thermometerC
	air.AirTempC += e.airTempC
	air.PressureHPa += e.pressureHPa
	air.HumidityPct += e.humidityPct
	rw, _ := WaterDensity(b.in.WaterDensity, t, air.PressureHPa)
	ra, _ := AirDensity(b.in.AirDensity, air, b.in.CO2Fraction)
	rw, ra = rw*(1+e.water), ra*(1+e.air)
	rb := b.in.WeightDensityKgM3 + e.weightKgM3
	glass := 1 - b.in.ExpansionPerC*(1+e.expansion)*(t-b.in.ReferenceTempC)
	return volume20ML / glass / 1000 * (rw - ra) / (1 - ra/rb) / (1 + e.sensitivity)
}

// fact is an observed value and its true one.
type fact struct {
	number         int64
	observed, true float64
}

// draw makes one calibration of a burette with the curve h.
func (b *bench) draw(h hidden) []Delivery {
	n, in := b.rng.NormFloat64, b.in
	e := b.drawShared()
	next := int64(0)
	number := func() int64 { next++; return next }
	reading := func(observed float64) fact { return fact{number(), observed, observed + n()*in.UReadingML*b.scatter} }
	weighing := func(balance float64) fact { return fact{number(), balance + n()*in.UWeighingG, balance} }
	air := Ambient{Fact: number(), AirTempC: 21.3, PressureHPa: 1004.2, HumidityPct: 45}
	vesselG := 45.0
	var ds []Delivery
	for r := range b.pattern.replicates {
		start, load := reading(0), weighing(vesselG)
		for k, v := range b.pointsML {
			if k > 0 && b.pattern.reading == "from-zero" {
				start = reading(0)
			}
			switch b.pattern.weighing {
			case "separate":
				load = weighing(vesselG)
			case "tared":
				load = weighing(0)
			}
			end := reading(v - b.jitterML*b.rng.Float64())
			waterC := 21.4 + 0.1*n()
			true20 := end.true - start.true + h.at(max(end.true, 0)) - h.at(max(start.true, 0)) + n()*in.UDeliveryML*b.scatter
			after := weighing(load.true + b.balanceG(true20, waterC, air, e))
			ds = append(ds, Delivery{
				Delivery: len(ds) + 1, PointML: v, Replicate: r + 1,
				Before: Weighing{Fact: load.number, MassG: load.observed}, After: Weighing{Fact: after.number, MassG: after.observed},
				Start: Reading{Fact: start.number, ReadingML: start.observed}, End: Reading{Fact: end.number, ReadingML: end.observed},
				Water: WaterTemp{Fact: number(), WaterTempC: waterC + n()*in.UWaterTempC}, Ambient: air,
			})
			start, load = end, after
		}
	}
	return ds
}

func newBench(p pattern, seed uint64) *bench {
	return &bench{
		in: DefaultInputs(), pointsML: []float64{10, 20, 30, 40, 50}, pattern: p, rate: 1e-5, scatter: 1, jitterML: 0.05,
		rng: rand.New(rand.NewPCG(seed, 1)),
	}
}

var patterns = []pattern{
	{"stepwise", "separate", 2},
	{"stepwise", "running", 2},
	{"stepwise", "tared", 2},
	{"from-zero", "separate", 2},
	{"from-zero", "running", 2},
	{"from-zero", "tared", 2},
	{"stepwise", "separate", 3},
	{"from-zero", "separate", 3},
	{"stepwise", "running", 5},
	{"from-zero", "running", 5},
}
