package virtual

import (
	"math"
	"math/rand/v2"
)

// cell is the mechanics and the filter of the balance: what lies and pushes on the
// pan, how it swings, what the air does, and the value behind two stages of lag.
// Times are in seconds of the balance's world, masses in g.
type cell struct {
	opt Options
	rng *rand.Rand // noise that comes and goes with time
	lay *rand.Rand // where a load comes to rest: one draw for each, whatever the time

	loadG      float64 // what lies on the pan
	restG      float64 // by how much the cell shows this load off
	evaporateS float64 // g/s that the load loses
	driftG     float64
	windG      float64
	push       push
	swing      swing
	filterLag  float64 // factor on LagS, from the ambient filter
	stage      [2]float64
}

// push is a hand on the pan: a force that trembles.
type push struct{ forceG, leftS float64 }

// swing is a bumped table: an oscillation that dies away.
type swing struct{ sizeG, ageS float64 }

const (
	swingHz     = 7.0 // of a heavy table
	swingDecayS = 0.25
	windS       = 3.0 // correlation time of draught
)

func newCell(opt Options) *cell {
	return &cell{
		opt: opt, rng: rand.New(rand.NewPCG(opt.Seed, 0xce11)), lay: rand.New(rand.NewPCG(opt.Seed, 0x1a7)),
		filterLag: 1,
	}
}

// setLoad puts so much on the pan in place of what lay there. An empty pan comes to
// rest more exactly than a load.
func (c *cell) setLoad(massG float64) {
	c.loadG = massG
	c.restG = c.lay.NormFloat64() * c.opt.RepeatabilityG
	if massG == 0 {
		c.restG /= 4
	}
}

// step moves on by dt and gives the new value behind the filter, with noise.
func (c *cell) step(dtS float64) float64 {
	if c.loadG > 0 {
		c.loadG = max(0, c.loadG-c.evaporateS*dtS)
	}
	c.driftG += c.opt.DriftGS * dtS
	keep := math.Exp(-dtS / windS)
	c.windG = c.windG*keep + c.rng.NormFloat64()*c.opt.DraughtG*math.Sqrt(1-keep*keep)
	follow := -math.Expm1(-dtS / (c.opt.LagS * c.filterLag))
	c.stage[0] += (c.force(dtS) - c.stage[0]) * follow
	c.stage[1] += (c.stage[0] - c.stage[1]) * follow
	return c.stage[1] + c.rng.NormFloat64()*c.opt.NoiseG
}

// force is what the cell feels.
func (c *cell) force(dtS float64) float64 {
	f := c.calm() + c.windG
	if c.push.leftS > 0 {
		c.push.leftS -= dtS
		f += c.push.forceG * (1 + 0.1*c.rng.NormFloat64())
	}
	if c.swing.sizeG != 0 {
		c.swing.ageS += dtS
		f += c.swing.sizeG * math.Exp(-c.swing.ageS/swingDecayS) * math.Sin(2*math.Pi*swingHz*c.swing.ageS)
		if c.swing.ageS > 20*swingDecayS {
			c.swing = swing{}
		}
	}
	return f
}

// calm is what the cell would show of the load without wind, hands and bumps.
func (c *cell) calm() float64 { return c.loadG + c.restG + c.driftG }
