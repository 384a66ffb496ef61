package session

// waterGPerML is what one millilitre of water weighs in air against steel, near
// room temperature: good to 0.2 % from 15 to 28 °C, which is all that a window needs.
const waterGPerML = 0.9965

// span is a range of mass that a weight is expected in.
type span struct{ lowG, highG float64 }

func (s span) holds(massG float64) bool { return massG >= s.lowG && massG <= s.highG }

// Widths of the windows.
const (
	emptyVesselG = 2.0    // a wet vessel weighs up to this much more or less than the first time
	zeroG        = 0.05   // a tared balance shows zero within this
	lightestG    = 1.0    // lighter than any vessel: the empty pan
	heaviestG    = 1000.0 // no analytical balance weighs more
)

// window gives the range that a weighing is expected in.
func (r *Run) window(p place) span {
	if p.role == After {
		return r.afterWindow(p.delivery)
	}
	if r.Opening.Plan.WeighingPattern == Tared {
		return span{-zeroG, zeroG}
	}
	return r.vesselWindow()
}

// vesselWindow: the plan may say what its vessels weigh; otherwise the first one
// weighed sets it. With a running vessel a new series may begin with the water of
// the last one still in it.
func (r *Run) vesselWindow() span {
	if v := r.Opening.Plan.VesselG; len(v) == 2 {
		return r.orStillFull(span{v[0].Float(), v[1].Float()})
	}
	s := span{lightestG, heaviestG}
	for _, d := range r.Deliveries {
		if d.Before != nil {
			m := d.Before.MassG.Float()
			s = span{m - emptyVesselG, m + emptyVesselG}
			break
		}
	}
	return r.orStillFull(s)
}

func (r *Run) orStillFull(s span) span {
	if r.Opening.Plan.WeighingPattern != Running {
		return s
	}
	for _, d := range r.Deliveries {
		if d.After != nil {
			s.highG = max(s.highG, d.After.MassG.Float()+emptyVesselG)
		}
	}
	return s
}

// afterWindow: the before-weight plus what the delivery should weigh by its
// readings, or by the plan as long as they are not there. The half width is twelve
// thousandths of the capacity or six subdivisions: wide enough for whoever stops
// short of the mark, narrow enough to keep a whole millilitre's slip out.
func (r *Run) afterWindow(d *Delivery) span {
	from, to := d.FromML.Float(), d.PointML.Float()
	if start := r.StartOf(d); start != nil {
		from = start.ReadingML.Float()
	}
	if d.End != nil {
		to = d.End.ReadingML.Float()
	}
	b := r.Opening.Burette
	half := max(0.012*b.CapacityML.Float(), 6*b.SubdivisionML.Float())
	middle := (to - from) * waterGPerML
	base := r.BeforeOf(d).MassG.Float()
	return span{base + max(middle-half, middle/2), base + middle + half}
}
