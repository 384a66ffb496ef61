package session

import (
	"fmt"

	"tenthmark/calc/decimal"
)

// ReadingPattern says where deliveries start.
type ReadingPattern string

// The patterns of reading.
const (
	Stepwise ReadingPattern = "stepwise"  // each delivery starts where the last ended
	FromZero ReadingPattern = "from-zero" // refilled to the zero line before each
)

// WeighingPattern says how the receiving vessel is weighed.
type WeighingPattern string

// The patterns of weighing.
const (
	Separate WeighingPattern = "separate" // weighed before and after every delivery
	Running  WeighingPattern = "running"  // not emptied: the after-weight is the next before-weight
	Tared    WeighingPattern = "tared"    // tared with the vessel on; the zero is the before-weight
)

// Plan is the ordered work of a run: its test points, how often, and how.
type Plan struct {
	PointsML        []decimal.Number `json:"points_mL"`
	Replicates      int              `json:"replicates"`
	ReadingPattern  ReadingPattern   `json:"reading_pattern"`
	WeighingPattern WeighingPattern  `json:"weighing_pattern"`
	VesselG         []decimal.Number `json:"vessel_g,omitempty"` // lightest and heaviest empty vessel in use
}

// Limits of a plan: more is a slip of the finger, not a calibration.
const (
	maxPoints     = 100
	maxReplicates = 30
)

// withDefaults fills in what a plan leaves open: five points over the scale, twice,
// stepwise, vessel weighed before and after.
func (p Plan) withDefaults(b Burette) Plan {
	if len(p.PointsML) == 0 {
		for i := int64(1); i <= 5; i++ {
			c := b.CapacityML
			p.PointsML = append(p.PointsML, trimZeros(decimal.New(c.Unscaled()*2*i, c.Decimals()+1)))
		}
	}
	if p.Replicates == 0 {
		p.Replicates = 2
	}
	if p.ReadingPattern == "" {
		p.ReadingPattern = Stepwise
	}
	if p.WeighingPattern == "" {
		p.WeighingPattern = Separate
	}
	return p
}

// trimZeros drops trailing zeros behind the decimal mark.
func trimZeros(n decimal.Number) decimal.Number {
	u, d := n.Unscaled(), n.Decimals()
	for d > 0 && u%10 == 0 {
		u, d = u/10, d-1
	}
	return decimal.New(u, d)
}

// Check says what is wrong with a plan for a burette, as a Fault.
func (p Plan) Check(b Burette) error {
	bad := func(message, hint string) error { return Refuse("bad-plan", message, hint) }
	switch {
	case len(p.PointsML) > maxPoints:
		return bad(fmt.Sprintf("The plan has %d test points.", len(p.PointsML)), fmt.Sprintf("Use at most %d.", maxPoints))
	case p.Replicates < 1 || p.Replicates > maxReplicates:
		return bad(fmt.Sprintf("The plan has %d replicates.", p.Replicates), fmt.Sprintf("Use 1 to %d; two or more show whether deliveries repeat.", maxReplicates))
	case p.ReadingPattern != Stepwise && p.ReadingPattern != FromZero:
		return bad(fmt.Sprintf("The reading pattern %q is not known.", p.ReadingPattern), "Use stepwise or from-zero.")
	case p.WeighingPattern != Separate && p.WeighingPattern != Running && p.WeighingPattern != Tared:
		return bad(fmt.Sprintf("The weighing pattern %q is not known.", p.WeighingPattern), "Use separate, running or tared.")
	}
	if err := p.checkPoints(b); err != nil {
		return err
	}
	if n := len(p.VesselG); n != 0 && (n != 2 || !p.VesselG[0].IsSet() || !p.VesselG[1].IsSet() || p.VesselG[0].Cmp(p.VesselG[1]) > 0) {
		return bad("vessel_g needs two masses, the lightest and the heaviest empty vessel.", `For example "vessel_g": ["44", "47"], or leave it out.`)
	}
	return nil
}

func (p Plan) checkPoints(b Burette) error {
	last := decimal.MustParse("0")
	for _, point := range p.PointsML {
		if !point.IsSet() || point.Cmp(last) <= 0 || point.Cmp(b.CapacityML.Number) > 0 {
			return Refuse("bad-plan", fmt.Sprintf("The test points must rise and lie above 0 and up to %s mL; %q does not.", b.CapacityML, point),
				"Give points_mL like [\"10\", \"20\", \"30\", \"40\", \"50\"].")
		}
		last = point
	}
	return nil
}

// deliveries lays the plan out: replicate after replicate, point after point.
func (p Plan) deliveries() []*Delivery {
	var all []*Delivery
	for rep := 1; rep <= p.Replicates; rep++ {
		from := decimal.MustParse("0")
		for i, point := range p.PointsML {
			d := &Delivery{Number: len(all) + 1, Replicate: rep, FromML: from, PointML: point}
			if i > 0 {
				d.Follows = d.Number - 1
			}
			all = append(all, d)
			if p.ReadingPattern == Stepwise {
				from = point
			}
		}
	}
	return all
}
