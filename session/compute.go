package session

import (
	"fmt"

	"tenthmark/calc"
)

// Result gives the volume of a complete delivery. Results are kept until the next
// event changes the run.
func (r *Run) Result(d *Delivery) (calc.Volume, error) {
	if v, ok := r.results[d.Number]; ok {
		return v.volume, v.err
	}
	in, err := r.calcDelivery(d)
	if err != nil {
		return calc.Volume{}, err
	}
	v, err := calc.DeliveryVolume(r.Opening.Setting.Inputs, in)
	if r.results == nil {
		r.results = map[int]outcome{}
	}
	r.results[d.Number] = outcome{v, err}
	return v, err
}

type outcome struct {
	volume calc.Volume
	err    error
}

// calcDelivery hands a delivery's facts over to calc: here, and only here, digits
// become floats.
func (r *Run) calcDelivery(d *Delivery) (calc.Delivery, error) {
	if !r.IsComplete(d) {
		return calc.Delivery{}, fmt.Errorf("delivery %d of run %s is not complete", d.Number, r.ID)
	}
	before, start, ambient := r.BeforeOf(d), r.StartOf(d), r.AmbientOf(d)
	return calc.Delivery{
		Delivery:  d.Number,
		PointML:   d.PointML.Float(),
		Replicate: d.Replicate,
		Before:    calc.Weighing{Fact: before.Fact, MassG: before.MassG.Float()},
		After:     calc.Weighing{Fact: d.After.Fact, MassG: d.After.MassG.Float()},
		Start:     calc.Reading{Fact: start.Fact, ReadingML: start.ReadingML.Float()},
		End:       calc.Reading{Fact: d.End.Fact, ReadingML: d.End.ReadingML.Float()},
		Water:     calc.WaterTemp{Fact: d.Water.Fact, WaterTempC: d.Water.WaterTempC.Float()},
		Ambient: calc.Ambient{
			Fact: ambient.Fact, AirTempC: ambient.AirTempC.Float(),
			PressureHPa: ambient.PressureHPa.Float(), HumidityPct: ambient.HumidityPct.Float(),
		},
	}, nil
}

// PointsML gives the knots of the curve: the plan's test points, the last one drawn
// out to the furthest reading when a delivery ended beyond it.
func (r *Run) PointsML() []float64 {
	points := make([]float64, len(r.Opening.Plan.PointsML))
	for i, p := range r.Opening.Plan.PointsML {
		points[i] = p.Float()
	}
	last := &points[len(points)-1]
	for _, d := range r.Deliveries {
		if d.Void == nil && d.End != nil {
			*last = max(*last, d.End.ReadingML.Float())
		}
	}
	return points
}

// CalcDeliveries gives the complete deliveries that are not void, for calc.
func (r *Run) CalcDeliveries() ([]calc.Delivery, error) {
	var all []calc.Delivery
	for _, d := range r.Deliveries {
		if d.Void != nil || !r.IsComplete(d) {
			continue
		}
		in, err := r.calcDelivery(d)
		if err != nil {
			return nil, err
		}
		all = append(all, in)
	}
	return all, nil
}

// Curve fits the correction curve to the deliveries that are there. It is an error
// as long as they do not determine every point.
func (r *Run) Curve() (*calc.Curve, error) {
	ds, err := r.CalcDeliveries()
	if err != nil {
		return nil, err
	}
	curve, err := calc.FitCurve(r.Opening.Setting.Inputs, r.PointsML(), ds)
	if err != nil {
		return nil, fmt.Errorf("curve of run %s: %w", r.ID, err)
	}
	return curve, nil
}

// Conformity judges a curve against the class that is engraved on the burette.
func (r *Run) Conformity(curve *calc.Curve) (calc.Conformity, error) {
	b := r.Opening.Burette
	standard := r.Opening.Setting.Standard
	if standard == "" {
		standard = b.Standard
	}
	mpe, err := calc.Limit(standard, b.Class, b.CapacityML.Float(), b.SubdivisionML.Float())
	if err != nil {
		return calc.Conformity{}, err
	}
	return calc.Assess(curve, mpe, calc.Rule{Name: r.Opening.Setting.Rule})
}
