package calc

import (
	"fmt"
	"math"
	"sort"

	"gonum.org/v1/gonum/stat"
)

// SheetEntry is one delivery on the worked sheet, with everything its volume is made
// of:
//
//	net mass = after − before + evaporation
//	factor   = 1000·(1 − ρa/ρb)/(ρw − ρa)·(1 − γ(t − tref))
//	volume   = net mass × factor
type SheetEntry struct {
	Delivery         int     `json:"delivery"`
	StartML          float64 `json:"start_mL"`
	EndML            float64 `json:"end_mL"`
	BeforeG          float64 `json:"before_g"`
	AfterG           float64 `json:"after_g"`
	EvaporationG     float64 `json:"evaporation_g"`
	NetMassG         float64 `json:"net_mass_g"`
	WaterTempC       float64 `json:"water_temp_C"`
	WaterDensityKgM3 float64 `json:"water_density_kg_m3"`
	AirDensityKgM3   float64 `json:"air_density_kg_m3"`
	FactorMLPerG     float64 `json:"factor_mL_per_g"`
	VolumeML         float64 `json:"volume_20C_mL"` // at the reference temperature
	CorrectionML     float64 `json:"correction_mL"` // volume − (end − start)
}

// SheetInterval is what was delivered between the same two marks.
type SheetInterval struct {
	FromML  float64      `json:"from_mL"`
	ToML    float64      `json:"to_mL"`
	Entries []SheetEntry `json:"entries"`
	MeanML  float64      `json:"mean_mL"` // of the corrections
	SML     float64      `json:"s_mL"`    // their standard deviation; 0 for one
}

// SheetPoint is the correction from the first mark to one point: the sum of the mean
// corrections of the intervals on the way.
type SheetPoint struct {
	ReadingML    float64 `json:"reading_mL"`
	Steps        string  `json:"steps"` // the sum as it is written
	CorrectionML float64 `json:"correction_mL"`
	CurveML      float64 `json:"curve_mL"`      // of the fitted curve
	DifferenceML float64 `json:"difference_mL"` // curve − this
}

// Worksheet is the classical calculation by hand, so that a reviewer with a pocket
// calculator can follow: the mean correction of each interval, summed up the scale.
// It counts a reading near a mark as if it had been the mark, which the curve does not.
type Worksheet struct {
	FirstML           float64         `json:"first_mL"`
	ReferenceTempC    float64         `json:"reference_temp_C"`
	ExpansionPerC     float64         `json:"expansion_per_C"`
	WeightDensityKgM3 float64         `json:"weight_density_kg_m3"`
	Intervals         []SheetInterval `json:"intervals"`
	Points            []SheetPoint    `json:"points"`
	PooledSML         float64         `json:"pooled_s_mL"` // of all intervals; 0 without replicates
	PooledNu          int             `json:"pooled_nu"`
	LargestDifference float64         `json:"largest_difference_mL"` // between sheet and curve, without sign
	OffMarkML         float64         `json:"off_mark_mL"`           // how far a reading lay from its mark at most
	Unreached         []float64       `json:"unreached_mL"`          // points that hand calculation does not get to
}

// NewWorksheet works a calibration out by hand beside its curve. ds are the deliveries
// the curve was fitted to.
func NewWorksheet(in Inputs, c *Curve, ds []Delivery) (Worksheet, error) {
	entries := make([]SheetEntry, 0, len(ds))
	for _, d := range ds {
		v, err := DeliveryVolume(in, d)
		if err != nil {
			return Worksheet{}, fmt.Errorf("worked sheet: %w", err)
		}
		entries = append(entries, SheetEntry{
			Delivery: d.Delivery, StartML: d.Start.ReadingML, EndML: d.End.ReadingML,
			BeforeG: d.Before.MassG, AfterG: d.After.MassG, EvaporationG: d.EvaporationG, NetMassG: v.NetMassG,
			WaterTempC: d.Water.WaterTempC, WaterDensityKgM3: v.WaterDensityKgM3, AirDensityKgM3: v.AirDensityKgM3,
			FactorMLPerG: v.Volume20ML / v.NetMassG, VolumeML: v.Volume20ML,
		})
	}
	w, err := WorkByHand(c.FirstML, c.readingsML(), entries)
	if err != nil {
		return Worksheet{}, err
	}
	w.ReferenceTempC, w.ExpansionPerC, w.WeightDensityKgM3 = in.ReferenceTempC, in.ExpansionPerC, in.WeightDensityKgM3
	for i := range w.Points {
		p := &w.Points[i]
		at, err := c.At(p.ReadingML)
		if err != nil {
			return Worksheet{}, fmt.Errorf("worked sheet: %w", err)
		}
		p.CurveML, p.DifferenceML = at.CorrectionML, at.CorrectionML-p.CorrectionML
		w.LargestDifference = max(w.LargestDifference, math.Abs(p.DifferenceML))
	}
	return w, nil
}

// WorkByHand does the sheet for volumes that are already worked out. A start near
// firstML, which need not be 0, counts as firstML, where the correction is 0.
func WorkByHand(firstML float64, pointsML []float64, entries []SheetEntry) (Worksheet, error) {
	if len(pointsML) == 0 || len(entries) == 0 {
		return Worksheet{}, fmt.Errorf("worked sheet: %d points and %d deliveries", len(pointsML), len(entries))
	}
	w := Worksheet{FirstML: firstML}
	marks := append([]float64{firstML}, pointsML...)
	for _, e := range entries {
		e.CorrectionML = e.VolumeML - (e.EndML - e.StartML)
		if math.IsNaN(e.CorrectionML) || math.IsInf(e.CorrectionML, 0) {
			return Worksheet{}, fmt.Errorf("worked sheet: delivery %d is not finite", e.Delivery)
		}
		from, to := nearest(marks, e.StartML), nearest(marks, e.EndML)
		if to <= from {
			return Worksheet{}, fmt.Errorf("worked sheet: delivery %d from %g to %g mL passes no mark", e.Delivery, e.StartML, e.EndML)
		}
		w.OffMarkML = max(w.OffMarkML, math.Abs(e.StartML-from), math.Abs(e.EndML-to))
		w.add(from, to, e)
	}
	sort.SliceStable(w.Intervals, func(i, j int) bool {
		a, b := w.Intervals[i], w.Intervals[j]
		return a.ToML < b.ToML || a.ToML == b.ToML && a.FromML < b.FromML
	})
	w.average()
	w.sum(pointsML)
	return w, nil
}

func nearest(marks []float64, v float64) float64 {
	best := marks[0]
	for _, m := range marks {
		if math.Abs(m-v) < math.Abs(best-v) {
			best = m
		}
	}
	return best
}

func (w *Worksheet) add(from, to float64, e SheetEntry) {
	for i := range w.Intervals {
		if s := &w.Intervals[i]; s.FromML == from && s.ToML == to {
			s.Entries = append(s.Entries, e)
			return
		}
	}
	w.Intervals = append(w.Intervals, SheetInterval{FromML: from, ToML: to, Entries: []SheetEntry{e}})
}

// average fills means, standard deviations and the pooled one.
func (w *Worksheet) average() {
	squares := 0.0
	for i := range w.Intervals {
		s := &w.Intervals[i]
		values := make([]float64, len(s.Entries))
		for k, e := range s.Entries {
			values[k] = e.CorrectionML
		}
		s.MeanML = stat.Mean(values, nil)
		if n := len(values); n > 1 {
			s.SML = stat.StdDev(values, nil)
			squares += float64(n-1) * s.SML * s.SML
			w.PooledNu += n - 1
		}
	}
	if w.PooledNu > 0 {
		w.PooledSML = math.Sqrt(squares / float64(w.PooledNu))
	}
}

// sum adds the mean corrections up the scale. Where intervals from different marks end
// at one point, their sums are averaged by the number of deliveries.
func (w *Worksheet) sum(pointsML []float64) {
	reached := map[float64]float64{w.FirstML: 0}
	for _, point := range pointsML {
		total, n, steps := 0.0, 0, ""
		for _, s := range w.Intervals {
			base, ok := reached[s.FromML]
			if s.ToML != point || !ok {
				continue
			}
			count := len(s.Entries)
			total, n = total+float64(count)*(base+s.MeanML), n+count
			if steps != "" {
				steps += " and "
			}
			steps += fmt.Sprintf("%+.5f %+.5f", base, s.MeanML)
		}
		if n == 0 {
			w.Unreached = append(w.Unreached, point)
			continue
		}
		reached[point] = total / float64(n)
		w.Points = append(w.Points, SheetPoint{ReadingML: point, Steps: steps, CorrectionML: reached[point]})
	}
}
