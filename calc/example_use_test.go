package calc_test

import (
	"fmt"

	"tenthmark/calc"
)

// calibrated is a 50 mL burette from a run of five points.
func calibrated() *calc.Curve {
	in := calc.DefaultInputs()
	var ds []calc.Delivery
	for i, massG := range []float64{9.9588, 19.9148, 29.9107, 39.8892, 49.8621} {
		fact := int64(10 * i)
		ds = append(ds, calc.Delivery{
			Delivery: i + 1,
			Before:   calc.Weighing{Fact: fact + 1, MassG: 62.1340}, After: calc.Weighing{Fact: fact + 2, MassG: 62.1340 + massG},
			Start: calc.Reading{Fact: fact + 3}, End: calc.Reading{Fact: fact + 4, ReadingML: float64(10 * (i + 1))},
			Water:   calc.WaterTemp{Fact: fact + 5, WaterTempC: 21.35},
			Ambient: calc.Ambient{AirTempC: 21.6, PressureHPa: 998.4, HumidityPct: 47},
		})
	}
	c, err := calc.FitCurve(in, []float64{10, 20, 30, 40, 50}, ds)
	if err != nil {
		panic(err)
	}
	return c
}

// A titration that began at 0.42 mL: the correction at the start counts too.
func ExampleTitrate() {
	r, err := calc.Titrate(calibrated(), calc.Titration{StartML: 0.42, EndML: 24.79})
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("%.2f mL read, %.3f mL delivered, U = %.3f mL\n", r.ApparentML, r.VolumeML, r.ExpandedML)
	// Output: 24.37 mL read, 24.360 mL delivered, U = 0.028 mL
}

// A class is asked of the limit's table and judged by a rule that was agreed before.
func ExampleAssess() {
	mpe, err := calc.Limit(calc.DefaultStandard, "A", 50, 0.1)
	if err != nil {
		fmt.Println(err)
		return
	}
	judged, err := calc.Assess(calibrated(), mpe, calc.Rule{Name: calc.RuleNonBinary})
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("%s; nearest to ± %g mL: %+.4f mL from %g to %g mL\n",
		judged.Verdict, judged.MPEML, judged.WorstPair.DifferenceML, judged.WorstPair.FromML, judged.WorstPair.ToML)
	// Output: conditional pass; nearest to ± 0.05 mL: +0.0404 mL from 20 to 50 mL
}

// What would it take to reach a third of the class limit?
func ExamplePropose() {
	mpe, err := calc.Limit("", "A", 50, 0.1)
	if err != nil {
		fmt.Println(err)
		return
	}
	proposals, err := calc.Propose(calc.DefaultInputs(), []float64{10, 20, 30, 40, 50}, calc.OrdinaryRoom(), calc.GoalOfRatio(mpe, 3))
	if err != nil {
		fmt.Println(err)
		return
	}
	best := proposals[0]
	fmt.Printf("%s, weighed %s, %d replicates: U = %.4f mL\n",
		best.Forecast.Layout.ReadingPattern, best.Forecast.Layout.WeighingPattern, best.Replicates, best.Forecast.LargestUML)
	// Output: stepwise, weighed running, 2 replicates: U = 0.0153 mL
}
