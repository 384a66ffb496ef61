package main

import (
	"fmt"
	"math"
	"math/rand/v2"

	"tenthmark/calc"
	"tenthmark/calc/decimal"
)

// pan is what hands do to a balance.
type pan interface {
	SetLoad(massG float64)
}

// demoBench is the bench that the virtual operator stands at: a burette whose true
// corrections nobody sees, a vessel, water, air and the pan of the balance.
type demoBench struct {
	pan      pan
	rng      *rand.Rand
	inputs   calc.Inputs
	air      calc.Ambient
	hidden   []float64 // true correction at each whole mL, mL
	waterC   float64   // true temperature of the water, °C
	meniscus float64   // where the meniscus really stands on the scale, mL
	shown    decimal.Number
	vesselG  float64 // the dry vessel, g
	filledG  float64 // water and wet film in it, g
}

// What the people and things of the demo do, as standard deviations. They are a
// little better than the uncertainties in the demo's configuration, as a careful
// laboratory would have it.
const (
	demoReadingML  = 0.004
	demoDeliveryML = 0.002
	demoTempC      = 0.02
	demoStopML     = 0.03 // how far from the mark the operator stops
)

func newDemoBench(seed uint64, p pan, inputs calc.Inputs, air calc.Ambient) *demoBench {
	rng := rand.New(rand.NewPCG(seed, 0x7e17))
	b := &demoBench{pan: p, rng: rng, inputs: inputs, air: air, vesselG: 45 + rng.Float64(), waterC: 21 + rng.Float64()}
	b.hidden = hiddenCurve(rng, 50)
	return b
}

// hiddenCurve wanders like the bore of a drawn tube, with a slow trend under it.
func hiddenCurve(rng *rand.Rand, capacityML int) []float64 {
	c := make([]float64, capacityML+1)
	trend := rng.NormFloat64() * 0.00015
	for i := 1; i <= capacityML; i++ {
		c[i] = c[i-1] + trend + rng.NormFloat64()*0.0018
	}
	return c
}

// TrueCorrection gives the hidden correction at a reading, mL.
func (b *demoBench) TrueCorrection(readingML float64) float64 {
	i := min(int(readingML), len(b.hidden)-2)
	return b.hidden[i] + (readingML-float64(i))*(b.hidden[i+1]-b.hidden[i])
}

// Refill fills the burette, lets it down to near a mark and gives what is read.
func (b *demoBench) Refill(toML float64) string {
	b.meniscus = max(toML+b.rng.NormFloat64()*demoStopML/2, 0.004)
	return b.look()
}

// look reads the meniscus to a hundredth of a millilitre.
func (b *demoBench) look() string {
	b.shown = round(max(b.meniscus+b.rng.NormFloat64()*demoReadingML, 0), 2)
	return b.shown.String()
}

// Reading gives what the last look showed.
func (b *demoBench) Reading() string { return b.shown.String() }

// Misread gives the last reading off by so many lines.
func (b *demoBench) Misread(lines int64) string {
	return b.shown.Sub(decimal.New(-lines, 1)).String()
}

// EmptyVessel pours the water out; a wet film stays.
func (b *demoBench) EmptyVessel() { b.filledG = math.Abs(b.rng.NormFloat64()) * 0.02 }

// DeliverTo lets the burette down to near a point into the vessel and gives what is
// read at the end.
func (b *demoBench) DeliverTo(pointML float64) string {
	from := b.meniscus
	b.meniscus = min(pointML+b.rng.NormFloat64()*demoStopML, float64(len(b.hidden)-1)-0.02)
	volume := b.meniscus - from + b.TrueCorrection(b.meniscus) - b.TrueCorrection(from) + b.rng.NormFloat64()*demoDeliveryML
	b.waterC += b.rng.NormFloat64() * 0.02
	b.filledG += b.weighs(volume)
	return b.look()
}

// weighs gives what a volume at the reference temperature weighs in this air: the
// formula of the volume turned round.
func (b *demoBench) weighs(volumeML float64) float64 {
	d := calc.Delivery{After: calc.Weighing{MassG: 1}, Water: calc.WaterTemp{WaterTempC: b.waterC}, Ambient: b.air}
	v, err := calc.DeliveryVolume(b.inputs, d)
	if err != nil {
		panic(fmt.Sprintf("the demo's bench: %v", err)) // its water and air are constants
	}
	return volumeML / v.Volume20ML
}

// Spill loses water beside the vessel.
func (b *demoBench) Spill(massG float64) { b.filledG -= massG }

// PutVesselOn and LiftVessel move the vessel.
func (b *demoBench) PutVesselOn() { b.pan.SetLoad(b.vesselG + b.filledG) }

// LiftVessel takes the vessel off the pan.
func (b *demoBench) LiftVessel() { b.pan.SetLoad(0) }

// WaterTemp gives what the thermometer shows, to 0.01 °C.
func (b *demoBench) WaterTemp() string {
	return round(b.waterC+b.rng.NormFloat64()*demoTempC, 2).String()
}

// round is for numbers that the demo makes up and that are always finite.
func round(x float64, decimals int) decimal.Number {
	n, err := decimal.Round(x, decimals)
	if err != nil {
		panic(fmt.Sprintf("the demo's bench: %v", err))
	}
	return n
}
