package calc

import (
	"fmt"
	"math"
	"sort"
)

// Layout is how a calibration is laid out. The names of the patterns are those of a
// run's plan.
type Layout struct {
	PointsML        []float64 `json:"points_mL"` // rising, above 0
	Replicates      int       `json:"replicates"`
	ReadingPattern  string    `json:"reading_pattern"`  // stepwise or from-zero
	WeighingPattern string    `json:"weighing_pattern"` // separate, running or tared
}

// The patterns of a Layout.
const (
	readStepwise  = "stepwise"
	readFromZero  = "from-zero"
	weighSeparate = "separate"
	weighRunning  = "running"
	weighTared    = "tared"
)

// MostReplicates is how many replicates a proposal goes up to.
const MostReplicates = 30

// Conditions are what a forecast assumes of the room.
type Conditions struct {
	WaterTempC float64
	Ambient    Ambient
}

// OrdinaryRoom is 21 °C, 1013.25 hPa and 50 % relative humidity.
func OrdinaryRoom() Conditions {
	return Conditions{21, Ambient{AirTempC: 21, PressureHPa: normalPressureHPa, HumidityPct: 50}}
}

// Forecast is what a layout would reach. It counts on deliveries that scatter no more
// than the inputs say; between the test points the bridge term comes on top, which
// only the burette itself shows.
type Forecast struct {
	Layout     Layout       `json:"layout"`
	Deliveries int          `json:"deliveries"`
	Weighings  int          `json:"weighings"`
	Fills      int          `json:"fills"` // of the burette
	Points     []Point      `json:"points"`
	LargestUML float64      `json:"largest_U_mL"`
	AtML       float64      `json:"at_mL"`                          // the point with the largest U
	BetweenUML float64      `json:"largest_U_between_mL,omitempty"` // halfway between points, see ProposePoints
	FloorUML   float64      `json:"floor_U_mL"`                     // the largest U with replicates without end
	Dominant   []BudgetLine `json:"dominant"`                       // of that point, largest share first
	MPEML      float64      `json:"mpe_mL,omitempty"`
	TestRatio  float64      `json:"test_uncertainty_ratio,omitempty"` // MPE / largest U
	Within3rd  bool         `json:"U_within_third_MPE"`               // JCGM 106:2012 8.2.3

	floor, random []float64 // variances of the points, mL²: shared by the run, and of this layout's facts
	floorLine     BudgetLine
	curve         *Curve
}

// Foresee tells the uncertainty that a layout would reach, from the curve that perfect
// deliveries at the nominal readings would give. mpe may be the zero MPE.
func Foresee(in Inputs, l Layout, room Conditions, mpe MPE) (Forecast, error) {
	ds, weighings, err := l.deliveries(in, room)
	if err != nil {
		return Forecast{}, fmt.Errorf("plan: %w", err)
	}
	c, err := FitCurve(in, l.PointsML, ds)
	if err != nil {
		return Forecast{}, fmt.Errorf("plan: %w", err)
	}
	f := Forecast{Layout: l, Deliveries: len(ds), Weighings: weighings, Fills: l.Replicates, Points: c.Points, curve: c}
	if l.ReadingPattern == readFromZero {
		f.Fills = f.Deliveries
	}
	k, err := CoverageFactor(in.CoverageProbability, math.Inf(1))
	if err != nil {
		return Forecast{}, fmt.Errorf("plan: %w", err)
	}
	worst := 0
	for i, p := range c.Points {
		if p.ExpandedML > c.Points[worst].ExpandedML {
			worst = i
		}
		f.random = append(f.random, c.RandomML2[i][i])
		f.floor = append(f.floor, c.CovarianceML2[i][i]-c.RandomML2[i][i])
		f.FloorUML = max(f.FloorUML, k*math.Sqrt(f.floor[i]))
	}
	f.LargestUML, f.AtML = c.Points[worst].ExpandedML, c.Points[worst].ReadingML
	lines, err := c.Budget(worst)
	if err != nil {
		return Forecast{}, fmt.Errorf("plan: %w", err)
	}
	f.dominant(lines)
	if mpe.LimitML > 0 {
		f.MPEML, f.TestRatio = mpe.LimitML, mpe.LimitML/f.LargestUML
		f.Within3rd = 3*f.LargestUML <= mpe.LimitML
	}
	return f, nil
}

// dominant sorts the budget by share; the largest of what the run shares is kept too.
func (f *Forecast) dominant(lines []BudgetLine) {
	f.Dominant = append([]BudgetLine(nil), lines...)
	sort.SliceStable(f.Dominant, func(i, j int) bool { return f.Dominant[i].SharePct > f.Dominant[j].SharePct })
	for _, line := range f.Dominant {
		for _, common := range commonLines {
			if line.Input == common.Input && f.floorLine.Input == "" {
				f.floorLine = line
			}
		}
	}
}

// Words says in a sentence or two what the layout reaches and what it hangs on.
func (f Forecast) Words() string {
	s := fmt.Sprintf("%d deliveries reach U = %.4f mL at %g mL; the largest part of the variance there, %.0f %%, is %s.",
		f.Deliveries, f.LargestUML, f.AtML, f.Dominant[0].SharePct, f.Dominant[0].What)
	if f.BetweenUML > 0 {
		s += fmt.Sprintf(" Halfway between points it is up to %.4f mL.", f.BetweenUML)
	}
	switch {
	case f.MPEML == 0:
	case f.Within3rd:
		s += fmt.Sprintf(" That is within a third of the maximum permissible error, %.4f mL.", f.MPEML/3)
	default:
		s += fmt.Sprintf(" That is more than a third of the maximum permissible error, %.4f mL.", f.MPEML/3)
	}
	return s
}

// deliveries lays out perfect deliveries: volumes equal to the differences of nominal
// readings, facts shared as a run shares them. It counts the weighings too.
func (l Layout) deliveries(in Inputs, room Conditions) ([]Delivery, int, error) {
	if err := l.check(); err != nil {
		return nil, 0, err
	}
	perML, err := massOfML(in, room)
	if err != nil {
		return nil, 0, err
	}
	facts := int64(0)
	next := func() int64 { facts++; return facts }
	var ds []Delivery
	weighings := 0
	for rep := 1; rep <= l.Replicates; rep++ {
		for i, point := range l.PointsML {
			d := Delivery{
				Delivery: len(ds) + 1, PointML: point, Replicate: rep, Ambient: room.Ambient,
				Start: Reading{Fact: next()}, End: Reading{Fact: next(), ReadingML: point},
				Water:  WaterTemp{Fact: next(), WaterTempC: room.WaterTempC},
				Before: Weighing{Fact: next()}, After: Weighing{Fact: next()},
			}
			weighings += 2
			if i > 0 && l.ReadingPattern == readStepwise {
				d.Start = ds[len(ds)-1].End
			}
			if i > 0 && l.WeighingPattern == weighRunning {
				d.Before = ds[len(ds)-1].After
				weighings--
			}
			d.After.MassG = d.Before.MassG + (point-d.Start.ReadingML)*perML
			ds = append(ds, d)
		}
	}
	return ds, weighings, nil
}

func (l Layout) check() error {
	switch {
	case l.Replicates < 1 || l.Replicates > 1000:
		return fmt.Errorf("%d replicates", l.Replicates)
	case l.ReadingPattern != readStepwise && l.ReadingPattern != readFromZero:
		return fmt.Errorf("the reading pattern %q is not known", l.ReadingPattern)
	case l.WeighingPattern != weighSeparate && l.WeighingPattern != weighRunning && l.WeighingPattern != weighTared:
		return fmt.Errorf("the weighing pattern %q is not known", l.WeighingPattern)
	}
	return nil
}

// massOfML gives the balance reading in g of 1 mL at the reference temperature.
func massOfML(in Inputs, room Conditions) (float64, error) {
	one, err := DeliveryVolume(in, Delivery{
		After: Weighing{MassG: 1}, End: Reading{ReadingML: 1},
		Water: WaterTemp{WaterTempC: room.WaterTempC}, Ambient: room.Ambient,
	})
	if err != nil {
		return 0, err
	}
	return 1 / one.Volume20ML, nil
}
